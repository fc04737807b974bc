"""PLY: points or a mesh, ascii or binary of either order, with a range grid where the file keeps one.

Read by the format's description (Turk, *The PLY Polygon File Format*, 1994): every element the header names is
understood by its sizes, so those of no use here are passed over.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.errors import Note, ScanFault
from scanmass.scans.blocks import at_zero, block_of
from scanmass.scans.names import AXES, columns_of
from scanmass.scans.ply_header import Header, read_header
from scanmass.scans.ply_rows import Lists, element_offset, lists, scalars
from scanmass.scans.polygons import Triangles, check_range, fanned
from scanmass.scans.scan import Block, Scan, ViewHead
from scanmass.scans.views import ViewTable, view_table
from scanmass.scans.wording import CUT_OR_MISCOUNTED

FACE_LISTS = ("vertex_indices", "vertex_index")


def read_ply(path: Path) -> Scan:
    """The scan in a PLY file.

    Raises
    ------
    ScanFault
        If the header cannot be understood or promises more than the file holds, points lack coordinates, or a face
        names a point that is not there.
    """
    header = read_header(path)
    vertex = _vertex(path, header)
    vertex.check_size()
    mesh = _mesh(path, header, vertex.count)
    has_faces = len(mesh.faces) > 0
    grid, warnings = (None, ()) if has_faces else _range_grid(path, header, vertex.count)
    table: ViewTable | None = None
    if "view" in vertex.columns and not has_faces and grid is None:
        table, notes = view_table((columns["view"] for columns in vertex.blocks(("view",))), path.name)
        warnings += notes
    elif "view" in vertex.columns:
        text = (
            f"{path.name}: the view numbers of a {'mesh' if has_faces else 'range grid'} are not used; it is one view."
        )
        warnings += (Note("view-numbers-unused", text),)
    return Scan(
        file=path.name,
        sha256="",
        format="ply",
        views=(ViewHead("view 0", None, grid.shape if grid else None),) if table is None else table.heads,
        blocks=lambda: _blocks(vertex, table, grid),
        total=vertex.count + (grid.empty if grid else 0),
        faces=mesh.faces if has_faces else None,
        no_return=grid.empty if grid else 0,
        warnings=warnings,
        assumptions=mesh.assumptions,
    )


@dataclass(frozen=True)
class _Vertex:
    """The vertex element: where it stands in the header, and which properties of it are of use."""

    path: Path
    header: Header
    which: int
    columns: dict[str, int]

    @property
    def count(self) -> int:
        return self.header.elements[self.which].count

    @property
    def colour_top(self) -> float:
        if "red" not in self.columns:
            return 255.0
        kind = self.header.elements[self.which].properties[self.columns["red"]].type
        return {"u2": 65535.0, "f4": 1.0, "f8": 1.0}.get(kind, 255.0)

    def check_size(self) -> None:
        """Refuse more points than the file can hold: an ascii number takes two bytes."""
        if self.header.encoding != "ascii":
            element_offset(self.path, self.header, self.which)
            return
        element = self.header.elements[self.which]
        least = 2 * len(element.properties) * element.count - 1
        if least > self.path.stat().st_size - self.header.data_offset:
            seen = f"the header promises {element.count} of the element {element.name}, but the file ends before"
            raise ScanFault(seen, file=self.path, allowed=CUT_OR_MISCOUNTED)

    def blocks(self, names: tuple[str, ...]) -> Iterator[dict[str, npt.NDArray[Any]]]:
        """The named properties, block by block."""
        wanted = tuple(self.columns[name] for name in names)
        for found in scalars(self.path, self.header, self.which, wanted):
            yield {name: found[self.columns[name]] for name in names}


def _vertex(path: Path, header: Header) -> _Vertex:
    names = [element.name for element in header.elements]
    if "vertex" not in names or header.elements[names.index("vertex")].count == 0:
        raise ScanFault("the file holds no vertex element", file=path, allowed="export it with its points")
    which = names.index("vertex")
    properties = header.elements[which].properties
    columns = columns_of([p.name if p.length is None else "" for p in properties])
    if not all(axis in columns for axis in AXES):
        seen = "the points have the properties " + ", ".join(p.name for p in properties)[:100]
        raise ScanFault(seen, file=path, allowed="x, y and z are needed")
    return _Vertex(path, header, which, columns)


@dataclass(frozen=True)
class _Grid:
    """Rows and columns (n,) of the points in their range grid, and how many of its cells hold none."""

    shape: tuple[int, int]
    rows: npt.NDArray[np.int32]
    columns: npt.NDArray[np.int32]
    empty: int


def _blocks(vertex: _Vertex, table: ViewTable | None, grid: _Grid | None) -> Iterator[Block]:
    at = 0
    for columns in vertex.blocks(tuple(vertex.columns)):
        block = block_of(columns, vertex.colour_top)
        n = len(block.points)
        if grid is not None:
            block.points[at_zero(block.points)] = np.nan
            block = replace(block, rows=grid.rows[at : at + n], columns=grid.columns[at : at + n])
        at += n
        if table is None:
            yield block
        else:
            yield from table.split(block, columns["view"])


def _lists_of(path: Path, header: Header, element: str) -> Lists | None:
    for which, found in enumerate(header.elements):
        if found.name == element and found.count > 0:
            for k, prop in enumerate(found.properties):
                if prop.length is not None and prop.name in FACE_LISTS:
                    return lists(path, header, which, k)
    return None


def _mesh(path: Path, header: Header, points: int) -> Triangles:
    faces = _lists_of(path, header, "face")
    if faces is not None:
        return fanned(faces.items, faces.counts, points, path.name)
    strips = _lists_of(path, header, "tristrips")
    if strips is None:
        return Triangles(np.empty((0, 3), np.int64))
    return Triangles(_unrolled(strips, points, path.name))


def _unrolled(strips: Lists, points: int, file: str) -> npt.NDArray[np.int64]:
    """Triangles of strips, -1 between one and the next: every second one is turned."""
    ends = np.cumsum(strips.counts)
    flat = np.insert(strips.items, ends, -1)
    if len(flat) < 3:
        return np.empty((0, 3), np.int64)
    check_range(0, int(flat.max()), points, file)
    breaks = np.where(flat < 0, np.arange(len(flat)), -1)
    place = np.arange(len(flat)) - np.maximum.accumulate(breaks) - 1
    faces = np.stack([flat[:-2], flat[1:-1], flat[2:]], axis=1)
    odd = place[:-2] % 2 == 1
    faces[odd] = faces[odd][:, [1, 0, 2]]
    whole = (faces >= 0).all(axis=1)
    distinct = (faces[:, 0] != faces[:, 1]) & (faces[:, 1] != faces[:, 2]) & (faces[:, 2] != faces[:, 0])
    found: npt.NDArray[np.int64] = faces[whole & distinct]
    return found


def _range_grid(path: Path, header: Header, points: int) -> tuple[_Grid | None, tuple[Note, ...]]:
    """The range grid of a file that names its ``num_cols`` and ``num_rows``; a warning where it does not fit."""
    columns, rows = header.info_number("num_cols"), header.info_number("num_rows")
    if columns is None or rows is None or columns * rows == 0:
        return None, ()
    cells = _lists_of(path, header, "range_grid")
    if cells is None:
        filled = np.arange(points) if points == rows * columns else None
    else:
        single = len(cells.counts) == rows * columns and int(cells.counts.max(initial=0)) <= 1
        filled = np.full(points, -1)
        if single and len(cells.items) == points and cells.items.min() >= 0 and cells.items.max() < points:
            filled[cells.items] = np.flatnonzero(cells.counts)
        if (filled < 0).any():
            filled = None
    if filled is None:
        text = (
            f"{path.name}: the range grid of {rows} rows and {columns} columns does not fit its points; it is not used."
        )
        return None, (Note("range-grid-unused", text),)
    row, column = np.divmod(filled, columns)
    return _Grid((rows, columns), row.astype(np.int32), column.astype(np.int32), rows * columns - points), ()
