"""LAS and LAZ, by the block. The library that unpacks them is imported when one is read."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.errors import Note, ScanFault
from scanmass.scans.blocks import BLOCK_POINTS, block_of
from scanmass.scans.las_header import check_header
from scanmass.scans.scan import Block, Scan, ViewHead
from scanmass.scans.views import ViewTable
from scanmass.scans.wording import CUT

MOST_SETUPS = 1000
"""More different source numbers than this are no scanner setups."""


def read_las(path: Path) -> Scan:
    """The scan in a LAS or LAZ file.

    The point source number names "a setup identifier for static systems" (ASPRS LAS 1.4, table of point formats).
    Where it varies, and is set for every point, it is taken for the view, and that is listed as assumed.

    Raises
    ------
    ScanFault
        If the header promises more than the file holds, or the points cannot be unpacked.
    """
    check_header(path)
    with _opened(path) as reader:
        total = int(reader.header.point_count)
        _check_size(path, reader.header)
        has_colour = "red" in set(reader.header.point_format.dimension_names)
    table, top = _survey(path, has_colour)
    assumptions: tuple[Note, ...] = ()
    if table is not None:
        text = f"{path.name}: the {len(table.ids)} point source numbers were taken for scanner setups, one view each."
        assumptions = (Note("views-from-source-numbers", text),)
    return Scan(
        file=path.name,
        sha256="",
        format="las",
        views=(ViewHead("view 0"),) if table is None else table.heads,
        blocks=lambda: _blocks(path, table, top),
        total=total,
        assumptions=assumptions,
    )


@contextmanager
def _opened(path: Path) -> Iterator[Any]:
    """The open file; whatever the library raises at a bad one becomes a ScanFault."""
    # Imported here: it takes longer than the rest of a reader.
    import laspy

    try:
        with laspy.open(path) as reader:
            yield reader
    except (ScanFault, KeyboardInterrupt, SystemExit, GeneratorExit, TypeError, AttributeError, NameError):
        raise  # a fault found already, an interruption, or an error of this package's own
    except BaseException as error:  # the unpacker's panics are no Exception
        raise ScanFault(f"the file cannot be read ({str(error)[:80]})", file=path, allowed=CUT) from None


def _check_size(path: Path, header: Any) -> None:
    size = path.stat().st_size
    promised, count = int(header.offset_to_point_data), int(header.point_count)
    # A compressed point takes a fraction of a bit at the least: what fits is found out in unpacking, by the block.
    if not header.are_points_compressed:
        promised += count * int(header.point_format.size)
    if count == 0 or promised > size:
        seen = f"the header promises {count} points in {promised} bytes, the file holds {size} bytes"
        raise ScanFault(seen, file=path, allowed=CUT if count else "at least 500 points are needed")


def _chunks(path: Path) -> Iterator[Any]:
    with _opened(path) as reader:
        left = int(reader.header.point_count)
        for chunk in reader.chunk_iterator(BLOCK_POINTS):
            left -= len(chunk)
            yield chunk
        if left:
            raise ScanFault(f"{left} of the points that the header promises are missing", file=path, allowed=CUT)


def _survey(path: Path, has_colour: bool) -> tuple[ViewTable | None, float]:
    """The setups, if the source numbers name some, and the greatest colour value: 8 or 16 bits."""
    used = np.zeros(65536, bool)
    most = 0
    for chunk in _chunks(path):
        used[np.asarray(chunk["point_source_id"])] = True
        if has_colour:
            most = max(most, *(int(np.max(chunk[name], initial=0)) for name in ("red", "green", "blue")))
    ids = np.flatnonzero(used)
    setups = 1 < len(ids) <= MOST_SETUPS and not used[0]
    return ViewTable(ids.astype(np.int64)) if setups else None, 65535.0 if most > 255 else 255.0


def _blocks(path: Path, table: ViewTable | None, top: float) -> Iterator[Block]:
    for chunk in _chunks(path):
        columns: dict[str, npt.NDArray[Any]] = {axis: np.asarray(getattr(chunk, axis)) for axis in "xyz"}
        if "red" in set(chunk.point_format.dimension_names):
            columns.update({name: np.asarray(chunk[name]) for name in ("red", "green", "blue")})
        block = block_of(columns, top)
        if table is None:
            yield block
        else:
            yield from table.split(block, np.asarray(chunk["point_source_id"]))
