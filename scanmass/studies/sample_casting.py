"""Samples: an iron casting as one merged cloud, as six views, and as its drawing says."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from scanmass.progress import Progress
from scanmass.studies.bodies import Body, box, turned
from scanmass.studies.casting_body import CORE_SHIFT, HEIGHT, casting
from scanmass.studies.ray_casting import Scene
from scanmass.studies.scanner import Pose, Sensor, View, look
from scanmass.studies.sensor_errors import SensorErrors
from scanmass.studies.stations import ring
from scanmass.studies.truth import errors_entry, file_entry, truth, write_truth
from scanmass.studies.write_meshes import write_stl
from scanmass.studies.write_points import merged, write_pcd, write_range_ply

IRON = 7200.0
MERGED, VIEWS, NOMINAL = "iron_casting", "casting_views", "casting_nominal"
_TURN = turned((4.0, -3.0, 31.0))
_PLACE = (0.210, -0.140, 0.350)
_MIDDLE = (0.0, 0.0, 0.065)
_ROUND = (0.0, 60.0, 120.0, 180.0, 240.0, 300.0)

_MERGED_ERRORS = SensorErrors(white_std=0.00006, footprint=0.5, drop_out=0.01, steepest=np.radians(80.0), strays=3)
_VIEW_ERRORS = SensorErrors(
    white_std=0.00004,
    incidence_growth=0.5,
    quantum=0.00001,
    footprint=0.5,
    field_std=0.00008,
    field_length=0.020,
    rotation_std=np.radians(0.03),
    shift_std=0.00004,
    steepest=np.radians(80.0),
)


def as_cast() -> Body:
    """The casting as it lies in both scans: its core shifted, turned and moved from the drawing's frame."""
    return casting(CORE_SHIFT).moved(_TURN, _PLACE)


def _set_up(over: bool) -> Scene:
    """The casting on a table; turned over where ``over``: then it is the table that lies on top of it."""
    height = HEIGHT + 0.010 if over else -0.010
    table = box("table", (0.9, 0.7, 0.02), (0.0, 0.0, height)).moved(_TURN, _PLACE)
    return Scene([as_cast(), table])


def _placed(poses: Sequence[Pose]) -> list[Pose]:
    """Poses given in the drawing's frame, in the scan's."""

    def there(place: Sequence[float], shift: Sequence[float]) -> tuple[float, float, float]:
        x, y, z = (float(part) for part in _TURN @ np.asarray(place) + np.asarray(shift))
        return x, y, z

    return [Pose(there(p.position, _PLACE), there(p.look_at, _PLACE), there(p.up, (0.0, 0.0, 0.0))) for p in poses]


def _looks(
    sensor: Sensor, upright: Sequence[Pose], over: Sequence[Pose], seed: int, name: str, progress: Progress
) -> list[View]:
    """Both set-ups, with the table's returns cut away as an operator does."""
    views: list[View] = []
    for poses, turned_over in ((upright, False), (over, True)):
        scene = _set_up(turned_over)
        for pose in _placed(poses):
            view = look(scene, sensor, pose, seed=seed, index=len(views))
            views.append(view.keep(view.part != 1))
            progress(name, len(views), len(upright) + len(over))
    return views


def _as_drawn(figures: dict[str, object]) -> dict[str, object]:
    return figures | {
        "underside_missing": False,
        "core_shift_m": list(CORE_SHIFT),
        "nominal": f"{NOMINAL}.stl",
        "rotation_scan_from_drawing": _TURN.tolist(),
        "drawing_origin_m": list(_PLACE),
    }


def write_merged(directory: Path, progress: Progress) -> list[Path]:
    """Write the merged cloud and its truth."""
    sensor = Sensor(125, 125, np.radians(29.0), _MERGED_ERRORS)
    upright = ring(_MIDDLE, 0.75, 25.0, _ROUND) + ring(_MIDDLE, 0.75, 60.0, (40.0, 160.0, 280.0))
    upright += ring(_MIDDLE, 0.75, 12.0, (0.0, 40.0, 320.0))
    over = ring(_MIDDLE, 0.75, 35.0, _ROUND, up=-1.0) + ring(_MIDDLE, 0.75, 60.0, (80.0, 200.0, 320.0), up=-1.0)
    points, _, part = merged(_looks(sensor, upright, over, 103, MERGED, progress))
    cloud = directory / f"{MERGED}.pcd"
    write_pcd(cloud, 1000.0 * points)
    scenario = (
        "A grey-iron bracket of 300 mm with a bored barrel, bosses, ribs and fillets, scanned in two set-ups, on its "
        "foot and turned over, from twelve and nine stations. The operator cut the table away and merged everything "
        "into one cloud that no longer tells which station saw a point. White noise only. The barrel's core had "
        "shifted: the bore lies off the drawing."
    )
    entry = file_entry(cloud.name, "PCD", "mm", "points", len(points), 1)
    figures = truth(MERGED, as_cast(), IRON, scenario=scenario, material="grey cast iron", files=[entry])
    figures = _as_drawn(figures) | {"false_returns": int(np.sum(part < 0)), "planted_errors": errors_entry(sensor)}
    described = directory / f"{MERGED}.truth.json"
    write_truth(described, figures)
    return [cloud, described]


def write_views(directory: Path, progress: Progress) -> list[Path]:
    """Write the six views and their truth."""
    sensor = Sensor(220, 220, np.radians(28.0), _VIEW_ERRORS)
    upright, over = [], []
    # Chosen so that six views see as much as six can, and most of it more than once.
    for azimuth, elevation in ((80.0, 55.0), (320.0, 35.0), (220.0, 65.0)):
        upright += ring(_MIDDLE, 0.75, elevation, (azimuth,))
    for azimuth, elevation in ((120.0, 25.0), (240.0, 25.0), (340.0, 55.0)):
        over += ring(_MIDDLE, 0.75, elevation, (azimuth,), up=-1.0)
    views = _looks(sensor, upright, over, 104, VIEWS, progress)
    paths, files = [], []
    for number, view in enumerate(views, start=1):
        path = directory / f"{VIEWS}_{number}.ply"
        write_range_ply(path, view, 0.001, f"unit mm; view {number} of {len(views)}, all in one frame")
        paths.append(path)
        files.append(file_entry(path.name, "PLY", "mm", "points", len(view.points), 1))
    scenario = (
        "The same grey-iron bracket as iron_casting, as six views in one frame, each a file with its range grid: three "
        "with the casting on its foot, three turned over, the table cut away. Each view has a smooth error over some "
        "20 mm, white noise, mixed pixels at edges, and was registered a little wrong. Together they see all but the "
        "depths of some holes and a part under the side boss: 2 % of the surface is over 4 mm from any point."
    )
    figures = truth(VIEWS, as_cast(), IRON, scenario=scenario, material="grey cast iron", files=files)
    stations = [list(view.pose.position) for view in views]
    figures = _as_drawn(figures) | {"stations_m": stations, "planted_errors": errors_entry(sensor)}
    described = directory / f"{VIEWS}.truth.json"
    write_truth(described, figures)
    return [*paths, described]


def write_nominal(directory: Path, progress: Progress) -> list[Path]:
    """Write the casting as drawn and its truth."""
    body = casting(name=NOMINAL).rounded(0.001)
    mesh = directory / f"{NOMINAL}.stl"
    write_stl(mesh, body, 0.001, "bracket as drawn, unit mm")
    scenario = "The bracket of iron_casting and casting_views as drawn, in the drawing's frame: z along the bore."
    entry = file_entry(mesh.name, "STL", "mm", "mesh", 3 * len(body.faces), 1)
    figures = truth(NOMINAL, body, IRON, scenario=scenario, material="grey cast iron", files=[entry])
    described = directory / f"{NOMINAL}.truth.json"
    write_truth(described, figures | {"underside_missing": False})
    progress(NOMINAL, 1, 1)
    return [mesh, described]
