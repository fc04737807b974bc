"""Sample: a rotor with a drilled unbalance, in inches."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from scanmass.geometry.moments import centroid
from scanmass.progress import Progress
from scanmass.studies.bodies import Body, box, turned
from scanmass.studies.ray_casting import Scene
from scanmass.studies.rotor_body import HOLE_DEPTH, HOLE_PLACE, HOLE_RADIUS, HOLE_SEGMENTS, rotor
from scanmass.studies.scanner import Pose, Sensor, View, look
from scanmass.studies.sensor_errors import SensorErrors
from scanmass.studies.truth import errors_entry, file_entry, truth, write_truth
from scanmass.studies.write_meshes import write_obj
from scanmass.studies.write_points import merged, write_xyz

NAME = "rotor"
STEEL, INCH = 7850.0, 0.0254
_TURN = turned((14.0, 0.0, 0.0))
_PLACE = (-0.100, 0.060, 0.180)
_ERRORS = SensorErrors(
    white_std=0.00004,
    incidence_growth=0.5,
    footprint=0.5,
    field_std=0.00003,
    field_length=0.015,
    rotation_std=np.radians(0.01),
    shift_std=0.00002,
    steepest=np.radians(80.0),
)
_SCENARIO = (
    "A steel rotor of 400 mm: a shaft with two discs and a keyway, lying along x in two V-shaped rests. A hole was "
    "drilled into the larger disc's face on purpose. Scanned in two set-ups of twelve stations all round it, the rests "
    "moved along the shaft between them and cut away. The OBJ file is the rotor's exact mesh, in the same frame. "
    "Both files are in inches."
)


def _stations(first: float) -> list[Pose]:
    """Twelve places in a screw round the axis: square to it, and from both ends at 35 and 50 degrees to it."""
    poses = []
    middle = np.array([0.2, 0.0, 0.0]) + _PLACE
    for k in range(12):
        turn, from_axis = np.radians(first + 30.0 * k), np.radians((90.0, 35.0, 130.0, 90.0, 50.0, 145.0)[k % 6])
        outward = np.array([0.0, np.sin(turn), np.cos(turn)])
        step = 0.72 * (np.cos(from_axis) * np.array([1.0, 0.0, 0.0]) + np.sin(from_axis) * outward)
        x, y, z = (float(np.round(part, 12)) for part in middle + step)
        sideways = (0.0, float(np.round(np.cos(turn), 12)), float(np.round(-np.sin(turn), 12)))
        poses.append(Pose((x, y, z), (float(middle[0]), float(middle[1]), float(middle[2])), sideways))
    return poses


def _rests(body: Body, places: tuple[float, float]) -> list[Body]:
    """The rotor in two rests whose notch is left out: a narrow block under the shaft at each place along it."""
    _, y, z = _PLACE
    return [body] + [box("rest", (0.012, 0.050, 0.150), (_PLACE[0] + at, y, z - 0.095)) for at in places]


def _looks(body: Body, sensor: Sensor, progress: Progress) -> list[View]:
    views: list[View] = []
    for first, places in ((0.0, (0.035, 0.370)), (15.0, (0.085, 0.305))):
        scene = Scene(_rests(body, places))
        for pose in _stations(first):
            view = look(scene, sensor, pose, seed=105, index=len(views))
            views.append(view.keep(view.part == 0))
            progress(NAME, len(views), 24)
    return views


def write_rotor(directory: Path, progress: Progress) -> list[Path]:
    """Write the mesh, the cloud and their truth."""
    body = rotor().moved(_TURN, _PLACE)
    sensor = Sensor(112, 200, np.radians(39.0), _ERRORS)
    views = _looks(body, sensor, progress)
    points, view, _ = merged(views)
    mesh, cloud = directory / f"{NAME}.obj", directory / f"{NAME}.xyz"
    write_obj(mesh, body, INCH, "rotor, unit inch")
    write_xyz(cloud, points / INCH, view, 5)
    files = [
        file_entry(mesh.name, "OBJ", "inch", "mesh", len(body.vertices), 1),
        file_entry(cloud.name, "XYZ", "inch", "points", len(points), len(views)),
    ]
    figures = truth(NAME, body, STEEL, scenario=_SCENARIO, material="mild steel", files=files)
    figures |= {"underside_missing": False, "axis": _axis(), "unbalance": _unbalance(body)}
    figures |= {"planted_errors": errors_entry(sensor)}
    described = directory / f"{NAME}.truth.json"
    write_truth(described, figures)
    return [mesh, cloud, described]


def _axis() -> dict[str, Any]:
    return {"point_m": list(_PLACE), "direction": [1.0, 0.0, 0.0]}


def _unbalance(body: Body) -> dict[str, Any]:
    """The static unbalance about the axis, and what the drilled hole took away."""
    moments = body.moments()
    offset = centroid(moments) - np.asarray(_PLACE)
    offset[0] = 0.0
    # The drill's outline is a polygon, so its area is a little below the circle's.
    area = 0.5 * HOLE_SEGMENTS * HOLE_RADIUS**2 * np.sin(2 * np.pi / HOLE_SEGMENTS)
    middle = _TURN @ (np.array(HOLE_PLACE) + [0.5 * HOLE_DEPTH, 0.0, 0.0]) + _PLACE
    return {
        "static_kg_m": (STEEL * moments[0] * offset).tolist(),
        "hole": {"removed_kg": float(STEEL * area * HOLE_DEPTH), "middle_m": middle.tolist(), "radius_m": HOLE_RADIUS},
    }
