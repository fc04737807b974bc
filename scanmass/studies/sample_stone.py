"""Sample: a carved stone on a turntable, its underside never seen."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from scanmass.progress import Progress
from scanmass.studies.bodies import Body, box, from_solid, solid_modeller, turned
from scanmass.studies.ray_casting import Scene
from scanmass.studies.scanner import Pose, Sensor, look
from scanmass.studies.sensor_errors import SensorErrors
from scanmass.studies.stations import ring
from scanmass.studies.stone_body import stone_beast
from scanmass.studies.truth import errors_entry, file_entry, truth, write_truth
from scanmass.studies.write_points import merged, write_ply

NAME = "stone_turntable"
_DISC_TOP = 0.850
_MIDDLE = (0.620, 0.410, _DISC_TOP)
_ERRORS = SensorErrors(
    white_std=0.00015,
    incidence_growth=1.0,
    footprint=0.6,
    field_std=0.00012,
    field_length=0.030,
    rotation_std=np.radians(0.03),
    shift_std=0.0001,
    drop_out=0.02,
    steepest=np.radians(82.0),
    strays=12,
)
_SCENARIO = (
    "A sandstone guardian beast, 0.6 m long, lies on a turntable disc that stands on a work table. Eleven stations "
    "stand round it and above it, some near and some far, and one looks closely at the head, so the points are "
    "uneven. The flat underside rests on the disc and is never seen. A mason's mallet and a small gauge block lie "
    "on the table beside the disc. The stations were registered to each other with small errors."
)


def _turntable() -> Body:
    m = solid_modeller()
    solid = m.Manifold.cylinder(0.040, 0.365, 0.365, 180).translate((_MIDDLE[0], _MIDDLE[1], _DISC_TOP - 0.040))
    return from_solid("turntable", solid)


def _mallet() -> Body:
    m = solid_modeller()
    head = m.Manifold.cylinder(0.110, 0.046, 0.038, 64)
    handle = m.Manifold.cylinder(0.260, 0.013, 0.016, 32).translate((0.0, 0.0, 0.100))
    lying = (head + handle).rotate((0.0, 90.0, 35.0)).translate((0.93, 0.86, _DISC_TOP - 0.040 + 0.047))
    return from_solid("mallet", lying)


def _poses() -> list[Pose]:
    x, y, z = _MIDDLE
    middle = (x, y, z + 0.15)
    poses = ring(middle, 1.05, 22.0, [8.0, 68.0, 128.0, 188.0, 248.0, 308.0])
    poses += ring(middle, 1.45, 48.0, [38.0, 158.0, 278.0])
    poses += ring(middle, 1.20, 78.0, [98.0])
    return [*poses, Pose((x + 0.55, y - 0.20, z + 0.42), (x + 0.20, y + 0.06, z + 0.24))]


def write_stone(directory: Path, progress: Progress) -> list[Path]:
    """Write the cloud and its truth."""
    stone = stone_beast().moved(turned((0.0, 0.0, 21.0)), _MIDDLE)
    table = box("table", (1.8, 1.4, 0.05), (0.62, 0.50, _DISC_TOP - 0.040 - 0.025))
    gauge = box("gauge block", (0.100, 0.030, 0.030), (0.16, 0.02, _DISC_TOP - 0.040 + 0.015))
    bodies = [stone, _turntable(), table, _mallet(), gauge]
    scene = Scene(bodies)
    sensor = Sensor(116, 150, np.radians(39.0), _ERRORS)
    poses = _poses()
    views = []
    for k, pose in enumerate(poses):
        views.append(look(scene, sensor, pose, seed=101, index=k))
        progress(NAME, k + 1, len(poses))
    points, view, part = merged(views)
    cloud = directory / f"{NAME}.ply"
    write_ply(cloud, 1000.0 * points, view, "unit mm; view: the station that saw the point")
    entry = file_entry(cloud.name, "PLY", "mm", "points", len(points), len(views))
    figures = truth(NAME, stone, 2200.0, scenario=_SCENARIO, material="sandstone", files=[entry], stands=True)
    figures |= {
        "underside_missing": True,
        "support_height_m": _DISC_TOP,
        "points_on": {body.name: int(np.sum(part == k)) for k, body in enumerate(bodies)},
        "false_returns": int(np.sum(part < 0)),
        "planted_errors": errors_entry(sensor),
    }
    described = directory / f"{NAME}.truth.json"
    write_truth(described, figures)
    return [cloud, described]
