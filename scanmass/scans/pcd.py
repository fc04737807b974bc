"""PCD: ascii, binary or binary_compressed, in rows and columns where the file says it is organised."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.errors import Note, ScanFault
from scanmass.scans.blocks import BLOCK_POINTS, at_zero, block_of
from scanmass.scans.names import AXES, COLOURS, columns_of
from scanmass.scans.numbers import Columns, line_blocks, parse_lines
from scanmass.scans.scan import Block, FloatArray, Scan, ViewHead
from scanmass.scans.views import ViewTable, view_table
from scanmass.scans.wording import CUT_OR_MISCOUNTED

KEYS = ("VERSION", "FIELDS", "COLUMNS", "SIZE", "TYPE", "COUNT", "WIDTH", "HEIGHT", "VIEWPOINT", "POINTS", "DATA")
_KINDS = {"F": "f", "I": "i", "U": "u"}


def read_pcd(path: Path) -> Scan:
    """The scan in a PCD file, by the format's published description (version 0.7).

    Points of NaN, or at the very origin, are places where an organised cloud has no return. A viewpoint other
    than the default is taken for the scanner's position in the frame of the points; the points stay as they are.

    Raises
    ------
    ScanFault
        If the header cannot be understood or promises more than the file holds.
    """
    layout = _layout(path)
    scanner, assumptions = _scanner(layout)
    grid = (layout.height, layout.width) if layout.height > 1 else None
    table: ViewTable | None = None
    warnings: tuple[Note, ...] = ()
    if "view" in layout.columns and grid is None:
        table, warnings = view_table((layout.column(rows, "view") for rows in layout.blocks()), path.name)
    views: tuple[ViewHead, ...] = (ViewHead("view 0", scanner, grid),)
    if table is not None:
        views = tuple(replace(head, scanner=scanner if len(table.heads) == 1 else None) for head in table.heads)
    return Scan(
        file=path.name,
        sha256="",
        format="pcd",
        views=views,
        blocks=lambda: _blocks(layout, table),
        total=layout.points,
        warnings=warnings,
        assumptions=assumptions,
    )


@dataclass(frozen=True)
class _Layout:
    path: Path
    dtype: np.dtype[np.void]
    columns: dict[str, int]
    packed_colour: int | None
    width: int
    height: int
    viewpoint: FloatArray
    data: str
    offset: int
    lines: int

    @property
    def points(self) -> int:
        return self.width * self.height

    def column(self, rows: npt.NDArray[Any], name: str) -> npt.NDArray[Any]:
        """The property ``name`` of rows, the first of a field that counts several."""
        column: npt.NDArray[Any] = rows[f"p{self.columns[name]}"]
        return column if column.ndim == 1 else column[:, 0]

    def blocks(self) -> Iterator[npt.NDArray[Any]]:
        """All points as rows of ``dtype``, block by block."""
        if self.data == "ascii":
            yield from self._ascii()
        elif self.data == "binary":
            self._check(self.points * self.dtype.itemsize)
            for start in range(0, self.points, BLOCK_POINTS):
                n = min(BLOCK_POINTS, self.points - start)
                rows = np.fromfile(self.path, self.dtype, n, offset=self.offset + start * self.dtype.itemsize)
                if len(rows) < n:
                    self._check(self.points * self.dtype.itemsize)
                yield rows
        else:
            yield from self._compressed()

    def _check(self, needed: int) -> None:
        if self.path.stat().st_size - self.offset < needed:
            seen = f"the header promises {self.points} points of {self.dtype.itemsize} bytes, but the file ends before"
            raise ScanFault(seen, file=self.path, allowed=CUT_OR_MISCOUNTED)

    def _ascii(self) -> Iterator[npt.NDArray[Any]]:
        fields = [(name, int(np.prod(self.dtype[name].shape))) for name in self.dtype.names or ()]
        width = sum(count for _, count in fields)
        left = self.points
        for text, first in line_blocks(self.path, self.offset, self.lines + 1):
            values = parse_lines(text, Columns(width, tuple(range(width))), self.path.name, first)[:left]
            rows = np.zeros(len(values), self.dtype)
            at = 0
            for name, count in fields:
                wanted = values[:, at] if self.dtype[name].shape == () else values[:, at : at + count]
                with np.errstate(over="ignore", invalid="ignore"):
                    rows[name] = wanted
                at += count
            left -= len(values)
            yield rows
        if left:
            seen = f"the header promises {self.points} points, but {left} are missing"
            raise ScanFault(seen, file=self.path, allowed=CUT_OR_MISCOUNTED)

    def _compressed(self) -> Iterator[npt.NDArray[Any]]:
        # numba is not needed for the other forms.
        from scanmass.scans.lzf import unpacked

        self._check_compressed_sizes()
        raw = np.fromfile(self.path, np.uint8, offset=self.offset)
        packed, size = (int(n) for n in raw[:8].view("<u4"))
        data = unpacked(raw[8 : 8 + packed], size)
        if data is None:
            raise ScanFault("the compressed points cannot be unpacked", file=self.path, allowed=CUT_OR_MISCOUNTED)
        fields, at = {}, 0
        for name in self.dtype.names or ():
            end = at + self.points * self.dtype[name].itemsize
            fields[name] = data[at:end].view(self.dtype[name].base).reshape(self.points, *self.dtype[name].shape)
            at = end
        for start in range(0, self.points, BLOCK_POINTS):
            rows = np.empty(min(BLOCK_POINTS, self.points - start), self.dtype)
            for name, column in fields.items():
                rows[name] = column[start : start + len(rows)]
            yield rows

    def _check_compressed_sizes(self) -> None:
        with self.path.open("rb") as stream:
            stream.seek(self.offset)
            sizes = np.frombuffer(stream.read(8), "<u4")
        held = self.path.stat().st_size - self.offset - 8
        if len(sizes) < 2 or int(sizes[0]) > held or int(sizes[1]) != self.points * self.dtype.itemsize:
            seen = (
                f"the header promises {self.points} points of {self.dtype.itemsize} bytes, the compressed data differ"
            )
            raise ScanFault(seen, file=self.path, allowed=CUT_OR_MISCOUNTED)


def _layout(path: Path) -> _Layout:
    words, offset, lines = _header(path)
    names = words.get("FIELDS") or words.get("COLUMNS") or []
    try:
        dtype = _dtype(names, words)
        width, height = int(words["WIDTH"][0]), int(words["HEIGHT"][0])
        points = int(words.get("POINTS", [str(width * height)])[0])
        viewpoint = np.array([float(word) for word in words.get("VIEWPOINT", "0001000")])
        if min(width, height) < 0 or points != width * height or viewpoint.shape != (7,):
            raise ValueError
    except (KeyError, ValueError, IndexError):
        allowed = "FIELDS, SIZE, TYPE, COUNT, WIDTH, HEIGHT and POINTS must be there and agree"
        raise ScanFault("the header does not fit together", file=path, allowed=allowed) from None
    columns = columns_of(names)
    if not all(axis in columns for axis in AXES):
        raise ScanFault(
            "the points have the fields " + ", ".join(names)[:100], file=path, allowed="x, y and z are needed"
        )
    data = words["DATA"][0] if words["DATA"] else ""
    if data not in ("ascii", "binary", "binary_compressed"):
        allowed = "allowed are ascii, binary and binary_compressed"
        raise ScanFault(f"the header says DATA {data[:30]}", file=path, allowed=allowed)
    colour = next((k for k, name in enumerate(names) if name.lower() in ("rgb", "rgba")), None)
    if colour is not None and dtype[f"p{colour}"].itemsize != 4:
        colour = None
    layout = _Layout(path, dtype, columns, colour, width, height, viewpoint, data, offset, lines)
    _check_layout(layout)
    return layout


def _check_layout(layout: _Layout) -> None:
    """Refuse more points than the file can hold, before anything is made for them."""
    if layout.points == 0:
        raise ScanFault("the header promises no points", file=layout.path, allowed="at least 500 are needed")
    if layout.data == "binary":
        layout._check(layout.points * layout.dtype.itemsize)
    elif layout.data == "binary_compressed":
        layout._check_compressed_sizes()
    else:
        layout._check(2 * layout.points * len(layout.columns) - 1)


def _header(path: Path) -> tuple[dict[str, list[str]], int, int]:
    with path.open("rb") as stream:
        start = stream.read(1 << 16)
    words: dict[str, list[str]] = {}
    at = lines = 0
    while "DATA" not in words:
        end = start.find(b"\n", at)
        if end < 0:
            raise ScanFault("the header has no DATA line", file=path, allowed="the file is cut or no PCD file")
        line = start[at:end].decode("latin-1").strip()
        at, lines = end + 1, lines + 1
        if line and not line.startswith("#"):
            key, *rest = line.split()
            if key not in KEYS:
                raise ScanFault(
                    f"line {lines} of the header reads {line[:60]!r}", file=path, allowed="keys are " + ", ".join(KEYS)
                )
            words[key] = rest
    return words, at, lines


def _dtype(names: list[str], words: dict[str, list[str]]) -> np.dtype[np.void]:
    counts = [int(n) for n in words.get("COUNT", ["1"] * len(names))]
    if min(counts) < 1 or max(counts) > 65536:
        raise ValueError
    fields: list[tuple[Any, ...]] = []
    for k, (_, size, kind, count) in enumerate(zip(names, words["SIZE"], words["TYPE"], counts, strict=True)):
        code = "<" + _KINDS[kind] + size
        if size not in ("1", "2", "4", "8") or code in ("<f1", "<f2"):
            raise ValueError
        fields.append((f"p{k}", code) if count == 1 else (f"p{k}", code, (count,)))
    return np.dtype(fields)


def _scanner(layout: _Layout) -> tuple[FloatArray | None, tuple[Note, ...]]:
    """The scanner's place: the viewpoint, where it says something."""
    place, turn = layout.viewpoint[:3], layout.viewpoint[3:]
    default = not place.any()
    if not np.isfinite(layout.viewpoint).all() or (default and layout.height == 1):
        return None, ()
    text = f"{layout.path.name}: VIEWPOINT was taken for the scanner's position in the frame of the points"
    if np.abs(turn[1:]).max() > 1e-9:
        text += "; its rotation was not applied to them"
    return place, (Note("viewpoint-is-scanner", text + "."),)


def _blocks(layout: _Layout, table: ViewTable | None) -> Iterator[Block]:
    names = [name for name in layout.columns if name not in (*COLOURS, "view") or layout.packed_colour is None]
    at = 0
    for rows in layout.blocks():
        block = block_of({name: layout.column(rows, name) for name in names if name != "view"}, 255.0)
        if layout.packed_colour is not None:
            block = replace(block, colours=_unpacked_colour(rows[f"p{layout.packed_colour}"]))
        if layout.height > 1:
            block.points[at_zero(block.points)] = np.nan
            row, column = np.divmod(np.arange(at, at + len(rows)), layout.width)
            block = replace(block, rows=row.astype(np.int32), columns=column.astype(np.int32))
        at += len(rows)
        if table is None:
            yield block
        else:
            yield from table.split(block, layout.column(rows, "view"))


def _unpacked_colour(column: npt.NDArray[Any]) -> npt.NDArray[np.uint8]:
    """Colours (n, 3) from four bytes a point: blue, green, red, and one of no use."""
    raw = np.ascontiguousarray(column).view(np.uint8).reshape(-1, 4)
    return np.ascontiguousarray(raw[:, [2, 1, 0]])
