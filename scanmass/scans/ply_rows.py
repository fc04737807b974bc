"""The rows of one element of a PLY file: its scalars by the block, its lists whole."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
from numba import njit

from scanmass.errors import ScanFault
from scanmass.scans.blocks import BLOCK_POINTS
from scanmass.scans.numbers import Columns, line_blocks, parse_lines
from scanmass.scans.ply_header import Element, Header
from scanmass.scans.wording import CUT, CUT_OR_MISCOUNTED

FloatArray = npt.NDArray[np.float64]
Scalars = dict[int, npt.NDArray[Any]]


@dataclass(frozen=True)
class Lists:
    """The lists of one property, one a row: ``counts`` (n,) and their items (sum of counts,) end to end."""

    counts: npt.NDArray[np.int64]
    items: npt.NDArray[np.int64]


def scalars(path: Path, header: Header, which: int, wanted: tuple[int, ...]) -> Iterator[Scalars]:
    """The ``wanted`` properties of element number ``which``, by the block: property number to column."""
    element = header.elements[which]
    if header.encoding == "ascii":
        yield from _ascii_scalars(path, header, which, wanted)
    elif element.has_list:
        yield _scalars_beside_lists(path, header, which, wanted)
    else:
        offset = element_offset(path, header, which)
        dtype = element.row_type(header.order)
        for start in range(0, element.count, BLOCK_POINTS):
            n = min(BLOCK_POINTS, element.count - start)
            rows = np.fromfile(path, dtype, n, offset=offset + start * dtype.itemsize)
            if len(rows) < n:
                raise _cut(path, element)
            yield {k: rows[f"p{k}"] for k in wanted}


def lists(path: Path, header: Header, which: int, wanted: int) -> Lists:
    """All lists of property number ``wanted`` of element number ``which``."""
    element = header.elements[which]
    if header.encoding == "ascii":
        return _ascii_lists(path, header, which, wanted)
    data, at = _rest(path, header), element_offset(path, header, which) - header.data_offset
    _, starts, counts, _ = _walked(path, header, element, data, at, wanted)
    dtype = np.dtype(header.order + element.properties[wanted].type)
    items = _gathered(data, starts[:, wanted], counts, dtype)
    if dtype.kind == "f":
        items = _whole(items, path)
    return Lists(counts, items.astype(np.int64))


def element_offset(path: Path, header: Header, which: int) -> int:
    """The first byte of element number ``which`` of a binary file, checked against the size of the file.

    Raises
    ------
    ScanFault
        If the elements before it, or its own least size, do not fit into the file.
    """
    size = path.stat().st_size
    offset = header.data_offset
    for number, element in enumerate(header.elements[: which + 1]):
        if offset + element.count * element.least_size() > size:
            raise _cut(path, element)
        if number == which or not element.properties:
            continue
        if element.has_list:
            data = _rest(path, header)
            offset = header.data_offset + _walked(path, header, element, data, offset - header.data_offset, -1)[3]
        else:
            offset += element.count * element.least_size()
    return offset


def _rest(path: Path, header: Header) -> npt.NDArray[np.uint8]:
    return np.fromfile(path, np.uint8, offset=header.data_offset)


@njit(cache=True)
def _walk(data, at, rows, lengths, sizes, wanted, big, begins, starts, counts):  # type: ignore[no-untyped-def]
    """Notes where each row and each property begins; returns the place after the last row, or -1 past the end."""
    for row in range(rows):
        begins[row] = at
        for k in range(len(sizes)):
            items = 1
            if lengths[k] > 0:
                if at + lengths[k] > len(data):
                    return -1
                items = 0
                for b in range(lengths[k]):
                    items = items * 256 + data[at + (b if big else lengths[k] - 1 - b)]
                at += lengths[k]
                if items < 0 or items > len(data):
                    return -1
                if k == wanted:
                    counts[row] = items
            if starts.shape[1] > 0:
                starts[row, k] = at
            at += items * sizes[k]
            if at > len(data):
                return -1
    return at


def _walked(
    path: Path, header: Header, element: Element, data: npt.NDArray[np.uint8], at: int, wanted: int
) -> tuple[npt.NDArray[np.int64], npt.NDArray[np.int64], npt.NDArray[np.int64], int]:
    """Rows' first bytes, properties' first bytes (n, k), the wanted list's counts, and the end, all within ``data``."""
    lengths = np.array([0 if p.length is None else np.dtype(p.length).itemsize for p in element.properties])
    sizes = np.array([np.dtype(p.type).itemsize for p in element.properties])
    n = element.count
    begins, counts = np.empty(n, np.int64), np.zeros(n, np.int64)
    starts = np.empty((n, len(sizes) if wanted >= 0 else 0), np.int64)
    end = int(_walk(data, at, n, lengths, sizes, wanted, header.order == ">", begins, starts, counts))
    if end < 0:
        raise _cut(path, element)
    return begins, starts, counts, end


def _gathered(
    data: npt.NDArray[np.uint8], starts: npt.NDArray[np.int64], counts: npt.NDArray[np.int64], dtype: np.dtype[Any]
) -> npt.NDArray[Any]:
    """``counts`` items of ``dtype`` from each of ``starts``, end to end."""
    size = dtype.itemsize
    total = int(counts.sum())
    first = np.repeat(starts - size * (np.cumsum(counts) - counts), counts)
    index = first + size * np.arange(total)
    raw = np.empty((total, size), np.uint8)
    for b in range(size):
        raw[:, b] = data[index + b]
    return raw.view(dtype).reshape(-1)


def _scalars_beside_lists(path: Path, header: Header, which: int, wanted: tuple[int, ...]) -> Scalars:
    element = header.elements[which]
    data, at = _rest(path, header), element_offset(path, header, which) - header.data_offset
    _, starts, _, _ = _walked(path, header, element, data, at, 0)
    one = np.ones(element.count, np.int64)
    types = {k: np.dtype(header.order + element.properties[k].type) for k in wanted}
    return {k: _gathered(data, starts[:, k], one, types[k]) for k in wanted}


def _element_text(path: Path, header: Header, which: int) -> Iterator[tuple[bytes, int]]:
    """The lines of one element of an ascii file: an element's instance takes a line."""
    skip = sum(element.count for element in header.elements[:which])
    left = header.elements[which].count
    for text, first in line_blocks(path, header.data_offset, header.lines + 1):
        ends = np.append(np.flatnonzero(np.frombuffer(text, np.uint8) == 10) + 1, len(text))
        lines = len(ends) - text.endswith(b"\n")
        if lines <= skip:
            skip -= lines
            continue
        taken = min(lines - skip, left)
        yield text[ends[skip - 1] if skip else 0 : ends[skip + taken - 1]], first + skip
        skip, left = 0, left - taken
        if left == 0:
            return
    if left:
        raise _cut(path, header.elements[which])


def _ascii_scalars(path: Path, header: Header, which: int, wanted: tuple[int, ...]) -> Iterator[Scalars]:
    element = header.elements[which]
    if any(p.length is not None for p in element.properties[: max(wanted) + 1]):
        raise ScanFault(f"the {element.name} element holds a list before its coordinates", file=path, allowed=_PLAIN)
    columns = Columns(len(element.properties), wanted)
    rows = 0
    for text, first in _element_text(path, header, which):
        if element.has_list:
            text = b"\n".join(b" ".join(line.split()[: len(element.properties)]) for line in text.split(b"\n"))
        values = parse_lines(text, columns, path.name, first)
        rows += len(values)
        yield {k: values[:, place] for place, k in enumerate(wanted)}
    if rows < element.count:
        raise _cut(path, element)


_PLAIN = "export the points with x, y and z first"


def _ascii_lists(path: Path, header: Header, which: int, wanted: int) -> Lists:
    element = header.elements[which]
    counts: list[npt.NDArray[np.int64]] = []
    items: list[npt.NDArray[np.int64]] = []
    for text, first in _element_text(path, header, which):
        found = _even_lists(text, element, path, first) or _uneven_lists(text, element, wanted, path, first)
        counts.append(found.counts)
        items.append(found.items)
    joined = Lists(np.concatenate(counts or [_NONE]), np.concatenate(items or [_NONE]))
    if len(joined.counts) < element.count:
        raise _cut(path, element)
    return joined


_NONE = np.empty(0, np.int64)


def _even_lists(text: bytes, element: Element, path: Path, first: int) -> Lists | None:
    """The lists of an element that holds nothing else, where all are of one length; else None."""
    head = text[: text.find(b"\n")].split()
    if len(element.properties) != 1 or not head or not head[0].isdigit() or int(head[0]) != len(head) - 1:
        return None
    try:
        values = parse_lines(text, Columns(len(head), tuple(range(len(head)))), path.name, first)
    except ScanFault:
        return None
    if not (values[:, 0] == len(head) - 1).all():
        return None
    return Lists(values[:, 0].astype(np.int64), _whole(values[:, 1:].reshape(-1), path))


def _uneven_lists(text: bytes, element: Element, wanted: int, path: Path, first: int) -> Lists:
    counts: list[int] = []
    items: list[bytes] = []
    for number, line in enumerate(text.split(b"\n"), first):
        words = line.split()
        if not words:
            continue
        at = 0
        try:
            for k, prop in enumerate(element.properties):
                length = 1 if prop.length is None else int(words[at])
                at += prop.length is not None
                if length < 0 or at + length > len(words):
                    raise ValueError
                if k == wanted:
                    counts.append(length)
                    items += words[at : at + length]
                at += length
        except (ValueError, IndexError):
            seen = f"line {number} does not hold what the header says of the element {element.name}"
            raise ScanFault(seen, file=path, allowed=CUT) from None
    try:
        values = np.array(items, dtype=np.float64)
    except ValueError:
        raise ScanFault(f"a list of the element {element.name} holds something else than numbers", file=path) from None
    return Lists(np.array(counts, np.int64), _whole(values, path))


def _whole(values: npt.NDArray[Any], path: Path) -> npt.NDArray[np.int64]:
    if not (np.isfinite(values).all() and (np.abs(values) < 2**53).all() and (values == np.round(values)).all()):
        raise ScanFault("a face names a point by something else than a whole number", file=path)
    return values.astype(np.int64)


def _cut(path: Path, element: Element) -> ScanFault:
    seen = f"the header promises {element.count} of the element {element.name}, but the file ends before"
    return ScanFault(seen, file=path, allowed=CUT_OR_MISCOUNTED)
