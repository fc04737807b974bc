"""Text: a line for each point (XYZ, TXT, CSV, ASC), and PTS, whose first line counts them."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

from scanmass.errors import Note, ScanFault
from scanmass.scans.blocks import block_of
from scanmass.scans.numbers import FloatArray, count_lines, line_blocks, parse_lines
from scanmass.scans.scan import Block, Scan, ViewHead
from scanmass.scans.text_layout import Layout, layout_of
from scanmass.scans.views import ViewTable, view_table


def read_text(path: Path) -> Scan:
    """The points in a text file. Normals, colours and view numbers are read from columns that are named so.

    Raises
    ------
    ScanFault
        If the columns cannot be told, a line does not hold what the first one does, or the file holds more or
        fewer points than its count.
    """
    layout = layout_of(path)
    table: ViewTable | None = None
    warnings: tuple[Note, ...] = ()
    if "view" in layout.places:
        table, warnings = view_table((rows[:, 0] for rows in _rows(path, _only_view(layout))), path.name)
    return Scan(
        file=path.name,
        sha256="",
        format="text",
        views=(ViewHead("view 0"),) if table is None else table.heads,
        blocks=lambda: _blocks(path, layout, table),
        total=_total(path, layout),
        warnings=warnings,
        assumptions=layout.assumptions,
    )


def _total(path: Path, layout: Layout) -> int:
    """Points of the file: its lines that hold anything, counted without reading their numbers."""
    return sum(count_lines(text) for text, _ in line_blocks(path, layout.offset, layout.first_line))


def _only_view(layout: Layout) -> Layout:
    view = layout.cut.use[layout.places["view"]]
    return replace(layout, cut=replace(layout.cut, use=(view,)))


def _rows(path: Path, layout: Layout) -> Iterator[FloatArray]:
    read = 0
    for text, first in line_blocks(path, layout.offset, layout.first_line):
        rows = parse_lines(text, layout.cut, path.name, first)
        read += len(rows)
        yield rows
    if layout.promised is not None and read != layout.promised:
        seen = f"the first line counts {layout.promised} points, but {read} follow"
        raise ScanFault(seen, file=path, allowed="the file is cut or its count is wrong: copy or export it again")


def _blocks(path: Path, layout: Layout, table: ViewTable | None) -> Iterator[Block]:
    for rows in _rows(path, layout):
        block = block_of({name: rows[:, k] for name, k in layout.places.items() if name != "view"}, layout.colour_top)
        if table is None:
            yield block
        else:
            yield from table.split(block, rows[:, layout.places["view"]])
