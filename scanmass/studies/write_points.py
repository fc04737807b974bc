"""Point files: PLY with a view number, PLY with a range grid, PCD, and text with a header."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np
import numpy.typing as npt

from scanmass.studies.scanner import View

FloatArray = npt.NDArray[np.float64]


def write_ply(path: Path, points: FloatArray, view: npt.NDArray[np.integer], comment: str) -> None:
    """Little-endian PLY of ``points`` (n, 3), in the file's unit, each with the number of its ``view`` (n,)."""
    record = np.dtype([("x", "<f4"), ("y", "<f4"), ("z", "<f4"), ("view", "u1")])
    table = np.empty(len(points), record)
    table["x"], table["y"], table["z"] = points.T
    table["view"] = view
    header = [
        *("ply", "format binary_little_endian 1.0", f"comment {comment}", f"element vertex {len(points)}"),
        *("property float x", "property float y", "property float z", "property uchar view", "end_header\n"),
    ]
    path.write_bytes("\n".join(header).encode("ascii") + table.tobytes())


def write_range_ply(path: Path, view: View, metres_per_unit: float, comment: str) -> None:
    """Big-endian PLY of one view with its range grid: for each pixel, row by row, a list of no or one point number."""
    rows, columns = view.grid_shape
    header = [
        *("ply", "format binary_big_endian 1.0", f"comment {comment}"),
        *(f"obj_info num_cols {columns}", f"obj_info num_rows {rows}", f"element vertex {len(view.points)}"),
        *("property float x", "property float y", "property float z", f"element range_grid {rows * columns}"),
        "property list uchar int vertex_indices\nend_header\n",
    ]
    number = np.full(rows * columns, -1, np.int64)
    number[view.rows.astype(np.int64) * columns + view.columns] = np.arange(len(view.points))
    grid = b"".join(b"\0" if k < 0 else b"\1" + int(k).to_bytes(4, "big") for k in number)
    coordinates = (view.points / metres_per_unit).astype(">f4").tobytes()
    path.write_bytes("\n".join(header).encode("ascii") + coordinates + grid)


def write_pcd(path: Path, points: FloatArray) -> None:
    """Binary PCD of ``points`` (n, 3), in the file's unit."""
    n = len(points)
    header = [
        *("# .PCD v0.7 - Point Cloud Data file format", "VERSION 0.7", "FIELDS x y z", "SIZE 4 4 4", "TYPE F F F"),
        *("COUNT 1 1 1", f"WIDTH {n}", "HEIGHT 1", "VIEWPOINT 0 0 0 1 0 0 0", f"POINTS {n}", "DATA binary\n"),
    ]
    path.write_bytes("\n".join(header).encode("ascii") + points.astype("<f4").tobytes())


def write_view_pcd(path: Path, points: FloatArray, scanner: FloatArray | None) -> None:
    """Binary PCD of one view in doubles, ``scanner`` (3,) in the frame of ``points`` (n, 3), None where not known."""
    n = len(points)
    place = " ".join(repr(float(c)) for c in (np.zeros(3) if scanner is None else scanner))
    header = [
        *("# .PCD v0.7 - Point Cloud Data file format", "VERSION 0.7", "FIELDS x y z", "SIZE 8 8 8", "TYPE F F F"),
        *("COUNT 1 1 1", f"WIDTH {n}", "HEIGHT 1", f"VIEWPOINT {place} 1 0 0 0", f"POINTS {n}", "DATA binary\n"),
    ]
    path.write_bytes("\n".join(header).encode("ascii") + points.astype("<f8").tobytes())


def write_xyz(path: Path, points: FloatArray, view: npt.NDArray[np.integer], decimals: int) -> None:
    """Text of ``points`` (n, 3), in the file's unit, under a header line: x y z view."""
    lines = [
        f"{x:.{decimals}f} {y:.{decimals}f} {z:.{decimals}f} {v}"
        for (x, y, z), v in zip(points.tolist(), view.tolist(), strict=True)
    ]
    path.write_bytes(("x y z view\n" + "\n".join(lines) + "\n").encode("ascii"))


def merged(views: Sequence[View]) -> tuple[FloatArray, npt.NDArray[np.int32], npt.NDArray[np.int32]]:
    """Points (n, 3), view numbers (n,) from 0, and part numbers (n,) of several views in turn."""
    number = [np.full(len(view.points), k, np.int32) for k, view in enumerate(views)]
    return (
        np.concatenate([view.points for view in views]),
        np.concatenate(number),
        np.concatenate([view.part for view in views]),
    )
