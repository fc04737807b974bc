"""E57: every scan of the file as a view, in the frame of the file, in metres by the standard (ASTM E2807)."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.errors import Note, ScanFault
from scanmass.scans.blocks import BLOCK_POINTS, at_zero, eight_bit, triple
from scanmass.scans.names import AXES
from scanmass.scans.rotation import rotation_from_quaternion
from scanmass.scans.scan import Block, FloatArray, Scan, ViewHead
from scanmass.scans.wording import CUT

CARTESIAN = ("cartesianX", "cartesianY", "cartesianZ")
SPHERICAL = ("sphericalRange", "sphericalAzimuth", "sphericalElevation")
COLOURS = ("colorRed", "colorGreen", "colorBlue")
GRID = ("rowIndex", "columnIndex")
INVALID = ("cartesianInvalidState", "sphericalInvalidState")


def read_e57(path: Path) -> Scan:
    """All scans of an E57 file, each one a view with its pose applied.

    Points marked invalid, and points at no distance from a scanner, come as NaN: there was no return. A scanner
    stands at the origin of its own scan, so its place is the pose's translation, unless there is neither a pose
    that moves anything nor a range grid: then the points may have been merged from several places.

    Raises
    ------
    ScanFault
        If the file cannot be read, or holds no scan.
    """
    with _opened(path) as file:
        scans = [_described(file, k, path) for k in range(len(file.root()["data3D"]))]
    scans = [scan for scan in scans if scan.points > 0]
    if not scans:
        raise ScanFault("the file holds no scan with points", file=path, allowed="at least 500 are needed")
    return Scan(
        file=path.name,
        sha256="",
        format="e57",
        views=tuple(scan.head for scan in scans),
        blocks=lambda: _blocks(path, scans),
        total=sum(scan.points for scan in scans),
        unit="m",
        warnings=tuple(note for scan in scans for note in scan.warnings),
    )


@dataclass(frozen=True)
class _Described:
    """What the file says of one scan: its place in the list, fields, pose, and range of colours."""

    index: int
    points: int
    fields: tuple[str, ...]
    rotation: FloatArray
    translation: FloatArray
    colour_low: FloatArray
    colour_top: FloatArray
    first_cell: tuple[int, int]
    head: ViewHead
    warnings: tuple[Note, ...]


@contextmanager
def _opened(path: Path) -> Iterator[Any]:
    """The open file; whatever the library raises at a bad one becomes a ScanFault."""
    # Imported here: it takes longer than the rest of a reader.
    from pye57 import libe57

    file = None
    try:
        file = libe57.ImageFile(str(path), "r")
        yield file
    except (libe57.E57Exception, RuntimeError, ValueError, MemoryError) as error:
        raise ScanFault(f"the file cannot be read ({_first_line(error)})", file=path, allowed=CUT) from None
    finally:
        if file is not None:
            file.close()


def _first_line(error: Exception) -> str:
    return str(error).strip().partition("\n")[0][:80]


def _described(file: Any, index: int, path: Path) -> _Described:
    from pye57 import libe57
    from pye57.utils import get_fields

    node = file.root()["data3D"][index]
    points = node["points"]
    have = set(get_fields(libe57.StructureNode(points.prototype())))
    place = next((names for names in (CARTESIAN, SPHERICAL) if have.issuperset(names)), None)
    if place is None:
        seen = f"scan {index} has the fields " + ", ".join(sorted(have))[:100]
        raise ScanFault(seen, file=path, allowed="x, y and z, or range, azimuth and elevation are needed")
    fields = [*place, *(name for name in INVALID if name in have)]
    fields += [name for names in (COLOURS, GRID) if have.issuperset(names) for name in names]
    rotation, translation, warnings = _pose(node, index, path)
    grid, first = _grid(node) if have.issuperset(GRID) else (None, (0, 0))
    moved = bool(translation.any()) or not np.array_equal(rotation, np.eye(3))
    name = node["name"].value() if node.isDefined("name") and node["name"].value() else f"scan {index}"
    limits = np.array([[_number(node, f"colorLimits/{c}{end}", top) for c in COLOURS] for end, top in _ENDS])
    return _Described(
        index=index,
        points=int(points.childCount()),
        fields=tuple(fields),
        rotation=rotation,
        translation=translation,
        colour_low=limits[0],
        colour_top=limits[1],
        first_cell=first,
        head=ViewHead(name, translation if moved or grid is not None else None, grid),
        warnings=warnings,
    )


_ENDS = (("Minimum", 0.0), ("Maximum", 255.0))


def _number(node: Any, key: str, default: float) -> float:
    return float(node[key].value()) if node.isDefined(key) else default


def _grid(node: Any) -> tuple[tuple[int, int] | None, tuple[int, int]]:
    """Rows and columns of the scan's range grid, and the number its first row and column have."""
    ends = [
        int(_number(node, f"indexBounds/{side}{end}", -1))
        for side in ("row", "column")
        for end in ("Minimum", "Maximum")
    ]
    rows, columns = ends[1] - ends[0] + 1, ends[3] - ends[2] + 1
    if min(ends) < 0 or min(rows, columns) < 2 or rows * columns > 2**40:
        return None, (0, 0)
    return (rows, columns), (ends[0], ends[2])


def _pose(node: Any, index: int, path: Path) -> tuple[FloatArray, FloatArray, tuple[Note, ...]]:
    """Rotation (3, 3) and translation (3,) from the scan's own frame to that of the file."""
    turn = np.array([_number(node, f"pose/rotation/{c}", float(c == "w")) for c in "wxyz"])
    shift = np.array([_number(node, f"pose/translation/{c}", 0.0) for c in AXES])
    length = float(np.linalg.norm(turn))
    if not (np.isfinite(turn).all() and np.isfinite(shift).all() and length > 0):
        raise ScanFault(f"the pose of scan {index} is no rotation and translation", file=path, allowed=CUT)
    warnings: tuple[Note, ...] = ()
    if abs(length - 1) > 1e-4:
        text = f"{path.name}: the pose of scan {index} has a rotation of length {length:.6g} where 1 is right."
        warnings = (Note("pose-not-unit", text),)
    w, x, y, z = (float(part) for part in turn / length)
    return rotation_from_quaternion(w, x, y, z), shift, warnings


def _blocks(path: Path, scans: list[_Described]) -> Iterator[Block]:
    with _opened(path) as file:
        for view, scan in enumerate(scans):
            for columns in _columns(file, scan, path):
                yield replace(_block(scan, columns), view=view)


def _columns(file: Any, scan: _Described, path: Path) -> Iterator[dict[str, FloatArray]]:
    """The fields of one scan, block by block; the same buffers are filled again and again."""
    from pye57 import libe57

    room = min(scan.points, BLOCK_POINTS)
    arrays = {name: np.empty(room) for name in scan.fields}
    buffers = libe57.VectorSourceDestBuffer()
    for name, array in arrays.items():
        buffers.append(libe57.SourceDestBuffer(file, name, array, room, True, True))
    reader = file.root()["data3D"][scan.index]["points"].reader(buffers)
    left = scan.points
    try:
        while read := reader.read():
            left -= read
            yield {name: array[:read] for name, array in arrays.items()}
    finally:
        reader.close()
    if left:
        raise ScanFault(f"{left} points of scan {scan.index} are missing", file=path, allowed=CUT)


def _block(scan: _Described, columns: dict[str, FloatArray]) -> Block:
    n = len(columns[scan.fields[0]])
    # Places without a return may hold anything.
    with np.errstate(over="ignore", invalid="ignore"):
        own = triple(columns.__getitem__, CARTESIAN, n) if "cartesianX" in columns else _from_spherical(columns)
        points = own @ scan.rotation.T + scan.translation
    for name in INVALID:
        if name in columns:
            points[columns[name] != 0] = np.nan
    if scan.head.scanner is not None:
        points[at_zero(own)] = np.nan
    colours = None
    if "colorRed" in columns:
        span = np.maximum(scan.colour_top - scan.colour_low, 1e-12)
        colours = eight_bit((triple(columns.__getitem__, COLOURS, n) - scan.colour_low) / span, 1.0)
    rows: npt.NDArray[np.int32] | None = None
    cells: npt.NDArray[np.int32] | None = None
    if scan.head.grid_shape is not None:
        rows = (columns["rowIndex"] - scan.first_cell[0]).astype(np.int32)
        cells = (columns["columnIndex"] - scan.first_cell[1]).astype(np.int32)
    return Block(0, points, None, colours, rows, cells)


def _from_spherical(columns: dict[str, FloatArray]) -> FloatArray:
    """Range, azimuth (from x towards y) and elevation (from the xy plane) as x, y, z."""
    distance, azimuth, elevation = (columns[name] for name in SPHERICAL)
    level = distance * np.cos(elevation)
    return np.stack([level * np.cos(azimuth), level * np.sin(azimuth), distance * np.sin(elevation)], axis=1)
