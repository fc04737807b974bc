"""Numbers in lines of text, by the block: a compiled fast path, and a slow one that can tell what is wrong."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt
from numba import njit

from scanmass.errors import ScanFault

FloatArray = npt.NDArray[np.float64]
BLOCK_BYTES = 1 << 25
"""Text is read 32 MB at a time: about a million lines."""
COMMENTS = (b"#", b"//", b"%", b"!")
MOST_DIGITS = 18
"""Significant digits that fit a 64-bit whole number; further ones cannot change a float."""
_POWERS = np.array([float(f"1e{k}") for k in range(301)])


@dataclass(frozen=True)
class Columns:
    """How lines are cut: ``count`` fields between ``separator`` (None: any blanks), of which ``use`` are wanted."""

    count: int
    use: tuple[int, ...]
    separator: bytes | None = None


@njit(cache=True)
def _digits(data, at, mantissa, digits):  # type: ignore[no-untyped-def]
    """Reads on a run of digits: the mantissa, its significant digits, the place after, digits kept and left out."""
    kept, beyond = 0, 0
    while at < len(data) and 48 <= data[at] <= 57:
        if digits < MOST_DIGITS:
            mantissa = mantissa * 10 + (data[at] - 48)
            digits += mantissa > 0
            kept += 1
        else:
            beyond += 1
        at += 1
    return mantissa, digits, at, kept, beyond


@njit(cache=True)
def _number(data, at, powers):  # type: ignore[no-untyped-def]
    """The plain decimal number at ``at`` and the place after it, or place -1.

    Up to 15 digits and a power of ten up to 22 give the nearest float in one rounding (Clinger 1990); longer
    numbers come within 4e-16 of themselves. Powers beyond 10^300 are left to the slow path.
    """
    n = len(data)
    negative = data[at] == 45
    if negative or data[at] == 43:
        at += 1
    mantissa, digits, at, read, power = _digits(data, at, 0, 0)
    if at < n and data[at] == 46:
        mantissa, digits, at, places, _ = _digits(data, at + 1, mantissa, digits)
        read += places
        power -= places
    if read == 0:
        return 0.0, -1
    if at < n and (data[at] == 101 or data[at] == 69):
        at += 1
        down = at < n and data[at] == 45
        if at < n and (data[at] == 45 or data[at] == 43):
            at += 1
        exponent, digits, at, read, _ = _digits(data, at, 0, 0)
        if read == 0 or digits > 3:
            return 0.0, -1
        power += -exponent if down else exponent
    if power > 280 or power < -300:
        return 0.0, -1
    number = mantissa * powers[power] if power >= 0 else mantissa / powers[-power]
    return (-number if negative else number), at


@njit(cache=True)
def _past_blanks(data, at, separator):  # type: ignore[no-untyped-def]
    while at < len(data) and data[at] != separator and (data[at] == 32 or data[at] == 9 or data[at] == 13):
        at += 1
    return at


@njit(cache=True)
def _line(data, at, separator, wanted, powers, out, row):  # type: ignore[no-untyped-def]
    """Reads one line into ``out[row]``: its number of fields and the place of its end, or place -1."""
    n, column = len(data), 0
    at = _past_blanks(data, at, -1)
    while at < n and data[at] != 10:
        if column >= len(wanted) or row >= len(out):
            return column, -1
        if wanted[column] >= 0:
            out[row, wanted[column]], at = _number(data, at, powers)
            if at < 0:
                return column, -1
        else:
            while at < n and data[at] != 10 and data[at] != separator and (separator >= 0 or data[at] > 32):
                if data[at] == 34:
                    return column, -1
                at += 1
        column += 1
        end = at
        at = _past_blanks(data, at, separator)
        if at >= n or data[at] == 10:
            break
        if separator >= 0:
            if data[at] != separator:
                return column, -1
            at = _past_blanks(data, at + 1, separator)
            if at >= n or data[at] == 10:
                column += 1
        elif at == end:
            return column, -1
    return column, at


@njit(cache=True)
def _parse(data, separator, wanted, powers, out):  # type: ignore[no-untyped-def]
    """Rows parsed into ``out``, or -1 at anything that is not a plain decimal number in its place."""
    at, row = 0, 0
    while at < len(data):
        fields, at = _line(data, at, separator, wanted, powers, out, row)
        if at < 0 or (fields != 0 and fields != len(wanted)):
            return -1
        row += fields != 0
        at += 1
    return row


@njit(cache=True)
def _count(data):  # type: ignore[no-untyped-def]
    """Lines that hold anything and are no comment."""
    n, at, rows = len(data), 0, 0
    while at < n:
        at = _past_blanks(data, at, -1)
        if at < n and data[at] != 10:
            slashes = data[at] == 47 and at + 1 < n and data[at + 1] == 47
            rows += not (data[at] == 35 or data[at] == 37 or data[at] == 33 or slashes)
        while at < n and data[at] != 10:
            at += 1
        at += 1
    return rows


def count_lines(text: bytes) -> int:
    """Lines that are neither blank nor comments.

    >>> count_lines(b"# x y z\\n1 2 3\\n\\n4 5 6")
    2
    """
    return int(_count(np.frombuffer(text, np.uint8)))


def parse_lines(text: bytes, columns: Columns, file: str, first_line: int) -> FloatArray:
    """The wanted numbers (n, len(columns.use)) of all lines that are neither blank nor comments.

    Raises
    ------
    ScanFault
        At a line with more or fewer fields, or a field that is no number; ``first_line`` numbers the first.

    >>> parse_lines(b"1 2 3\\n4 5 6.5", Columns(3, (0, 2)), "a.xyz", 1).tolist()
    [[1.0, 3.0], [4.0, 6.5]]
    """
    if any(mark in text for mark in COMMENTS):
        text = b"\n".join(b"" if line.lstrip().startswith(COMMENTS) else line for line in text.split(b"\n"))
    wanted = np.full(columns.count, -1, np.int64)
    wanted[list(columns.use)] = np.arange(len(columns.use))
    out = np.empty((text.count(b"\n") + 1, len(columns.use)))
    separator = -1 if columns.separator is None else columns.separator[0]
    rows = _parse(np.frombuffer(text, np.uint8), separator, wanted, _POWERS, out)
    return out[:rows] if rows >= 0 else _parse_slowly(text, columns, file, first_line)


def _parse_slowly(text: bytes, columns: Columns, file: str, first_line: int) -> FloatArray:
    lines = text.split(b"\n")
    rows = [line.strip() for line in lines if line.strip()]
    quoted = b'"' in text
    if quoted or all(len(row.split(columns.separator)) == columns.count for row in rows):
        try:
            return np.loadtxt(
                [row.decode("latin-1") for row in rows],
                comments=None,
                delimiter=None if columns.separator is None else columns.separator.decode(),
                usecols=columns.use,
                quotechar='"' if quoted else None,
                ndmin=2,
            )
        except ValueError:
            pass
    raise _what_is_wrong(lines, columns, file, first_line)


def _what_is_wrong(lines: Sequence[bytes], columns: Columns, file: str, first_line: int) -> ScanFault:
    for number, line in enumerate(lines, first_line):
        fields = line.strip().split(columns.separator)
        if not line.strip():
            continue
        if len(fields) != columns.count:
            seen = f"line {number} holds {len(fields)} fields"
            return ScanFault(seen, file=file, allowed=f"every line must hold {columns.count}, as the first one does")
        for index in columns.use:
            word = fields[index].strip()
            try:
                float(word)
            except ValueError:
                seen = f"line {number}: {shown(word)} is not a number"
                return ScanFault(seen, file=file, allowed="numbers are written like 12.5 or 1.25e1")
    return ScanFault(f"the lines from {first_line} on cannot be read as numbers", file=file)


def shown(word: bytes) -> str:
    """A word of the file for a message: printable, quoted, at most 30 characters."""
    text = word[:30].decode("utf-8", "replace")
    return "'" + "".join(c if c.isprintable() else "?" for c in text) + ("..." if len(word) > 30 else "") + "'"


def line_blocks(path: Path, offset: int, first_line: int) -> Iterator[tuple[bytes, int]]:
    """Whole lines of a text file from byte ``offset``, some 32 MB at a time, with the number of their first line."""
    with path.open("rb") as stream:
        stream.seek(offset)
        rest = b""
        while True:
            piece = stream.read(BLOCK_BYTES)
            text = rest + piece
            if piece and b"\n" not in text and b"\r" in text:
                text = text.replace(b"\r", b"\n")
            end = text.rfind(b"\n") + 1 if piece else len(text)
            if piece and end == 0 and len(text) > BLOCK_BYTES // 2:
                raise ScanFault(f"line {first_line} does not end", file=path, allowed="a line for each point")
            if end:
                yield text[:end], first_line
                first_line += text.count(b"\n", 0, end)
            rest = text[end:]
            if not piece:
                return
