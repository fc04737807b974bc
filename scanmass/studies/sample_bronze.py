"""Sample: a hollow bronze, once as a mesh with its core space and once as it looks from outside."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from scanmass.geometry.polyhedron import polyhedron_moments
from scanmass.progress import Progress
from scanmass.studies.bodies import box, turned
from scanmass.studies.bronze_body import bronze_figure
from scanmass.studies.ray_casting import Scene
from scanmass.studies.scanner import Sensor, look
from scanmass.studies.sensor_errors import SensorErrors
from scanmass.studies.stations import ring
from scanmass.studies.truth import errors_entry, file_entry, truth, write_truth
from scanmass.studies.write_e57 import write_e57
from scanmass.studies.write_meshes import write_stl

NAME = "hollow_bronze"
_PLACE = (1.250, -0.400, 0.0)
_ERRORS = SensorErrors(
    white_std=0.0003,
    incidence_growth=0.5,
    quantum=0.0001,
    footprint=0.7,
    mixing_jump=0.010,
    field_std=0.0002,
    field_length=0.040,
    rotation_std=np.radians(0.02),
    shift_std=0.0002,
    drop_out=0.01,
    steepest=np.radians(80.0),
    strays=8,
)
_SCENARIO = (
    "A draped bronze figure 0.9 m tall, cast hollow with a wall of 5 to 8 mm and a closed, empty core space, stands "
    "on a floor. The STL mesh has the outer surface and the core space, as from a CT scan. The E57 file holds what "
    "ten scanner positions saw of the outside, each scan with its pose: nothing of the core space or of the foot."
)


def write_bronze(directory: Path, progress: Progress) -> list[Path]:
    """Write the mesh, the cloud and their truth."""
    figure = bronze_figure().moved(turned((0.0, 0.0, 25.0)), _PLACE).rounded(0.001)
    x, y, _ = _PLACE
    scene = Scene([figure, box("floor", (3.0, 3.0, 0.1), (x, y, -0.05))])
    sensor = Sensor(220, 110, np.radians(19.5), _ERRORS)
    poses = ring((x, y, 0.45), 1.55, 4.0, [0.0, 60.0, 120.0, 180.0, 240.0, 300.0])
    poses += ring((x, y, 0.47), 1.60, 38.0, [30.0, 150.0, 270.0]) + ring((x, y, 0.60), 1.25, 72.0, [90.0])
    views = []
    for k, pose in enumerate(poses):
        views.append(look(scene, sensor, pose, seed=102, index=k))
        progress(NAME, k + 1, len(poses))
    mesh, cloud = directory / f"{NAME}.stl", directory / f"{NAME}.e57"
    write_stl(mesh, figure, 0.001, "hollow bronze figure, unit mm")
    write_e57(cloud, views, "hollow bronze figure")
    points = sum(len(view.points) for view in views)
    files = [
        file_entry(mesh.name, "STL", "mm", "mesh", 3 * len(figure.faces), 1),
        file_entry(cloud.name, "E57", "m", "points", points, len(views)),
    ]
    half = len(figure.faces) // 2
    outside = polyhedron_moments(figure.vertices, figure.faces[:half])
    figures = truth(NAME, figure, 8700.0, scenario=_SCENARIO, material="statuary bronze", files=files, stands=True)
    figures |= {
        "underside_missing": {mesh.name: False, cloud.name: True},
        "support_height_m": 0.0,
        "wall_m": [0.005, 0.008],
        "outer_volume_m3": {"value": float(outside[0])},
        "outer_centroid_m": {"value": (outside[1:4] / outside[0]).tolist()},
        "planted_errors": errors_entry(sensor),
    }
    described = directory / f"{NAME}.truth.json"
    write_truth(described, figures)
    return [mesh, cloud, described]
