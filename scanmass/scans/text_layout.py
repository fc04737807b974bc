"""How a text file of points is laid out: header or not, separator, what each column holds."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from scanmass.errors import Note, ScanFault
from scanmass.scans.names import AXES, COLOURS, NORMALS, columns_of
from scanmass.scans.numbers import COMMENTS, Columns, FloatArray, parse_lines, shown

SAMPLE_BYTES = 1 << 16
"""What the columns hold is judged from the first 64 KB."""


@dataclass(frozen=True)
class Layout:
    """Where the points begin, how lines are cut, property to place among ``cut.use``, and the promised points."""

    offset: int
    first_line: int
    cut: Columns
    places: dict[str, int]
    colour_top: float
    promised: int | None
    assumptions: tuple[Note, ...]


def layout_of(path: Path) -> Layout:
    """The layout of the text file at ``path``.

    Raises
    ------
    ScanFault
        If it is no text, its numbers hold decimal commas, or its columns cannot be told.
    """
    sample = _sample(path)
    head = _Head(path)
    offset, line_number, line = 0, 1, b""
    for raw in sample.splitlines(keepends=True):
        line = raw.strip()
        if not head.takes(line, line_number):
            break
        offset, line_number = offset + len(raw), line_number + 1
    else:
        raise ScanFault("the file holds no line of numbers", file=path, allowed="a line for each point: x y z")
    separator = _separator(line, path)
    fields = len(_fields(line, separator))
    columns, notes = head.named(fields)
    rows = _sample_rows(sample[offset:], fields, separator, path, line_number)
    if not columns:
        columns, notes = _unnamed(fields, rows, path)
    cut = Columns(fields, tuple(columns.values()), separator)
    top = _colour_top(rows[:, [columns[name] for name in COLOURS]]) if "red" in columns else 255.0
    places = {name: place for place, name in enumerate(columns)}
    return Layout(offset, line_number, cut, places, top, head.promised, notes)


def _sample(path: Path) -> bytes:
    with path.open("rb") as stream:
        sample = stream.read(SAMPLE_BYTES)
        whole = len(sample) < SAMPLE_BYTES
    if b"\0" in sample or sample.startswith((b"\xff\xfe", b"\xfe\xff")):
        allowed = "points as text are needed, in plain ASCII or UTF-8: the name and the content may not match"
        raise ScanFault("the file is no plain text", file=path, allowed=allowed)
    end = max(sample.rfind(b"\n"), sample.rfind(b"\r"))
    if end < 0 and not whole:
        raise ScanFault("the first line does not end", file=path, allowed="a line for each point: x y z")
    return sample if whole else sample[: end + 1]


class _Head:
    """The lines before the points: comments, a count, the names of the columns."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self.promised: int | None = None
        self.names: bytes | None = None
        self.comment: bytes | None = None

    def takes(self, line: bytes, number: int) -> bool:
        """Whether the line still belongs to the head."""
        line = line.removeprefix(b"\xef\xbb\xbf")
        if not line:
            return True
        if line.startswith(COMMENTS):
            self.comment = line.lstrip(b"#/%! ")
            return True
        words = re.split(rb"[\s,;]+", _QUOTED.sub(b"q", line))
        if len(words) == 1 and words[0].isdigit() and self.promised is None:
            self.promised = int(words[0])
            return True
        numbers = sum(_is_number(word) for word in words)
        if numbers >= 3 or numbers == len([word for word in words if word]):
            return False
        if words[0].lower() in (b"ncols", b"nrows"):
            raise ScanFault("the file is a terrain grid, not a list of points", file=self.path, allowed="x y z lines")
        if self.names is not None:
            seen = f"line {number} holds {shown(line)}, after a line of column names"
            raise ScanFault(seen, file=self.path, allowed="one line of names, then numbers")
        if not re.search(rb"[A-Za-z]", line):
            return False
        self.names = line
        return True

    def named(self, fields: int) -> tuple[dict[str, int], tuple[Note, ...]]:
        """The columns by their names; empty where there are no names."""
        for line, is_header in ((self.names, True), (self.comment, False)):
            if line is None:
                continue
            columns: dict[str, int] = {}
            names: list[str] = []
            for cut in (rb"\t", rb",", rb";", rb"[\s,;]+"):
                names = [word.decode("utf-8", "replace") for word in re.split(cut, line)]
                if len(names) == fields:
                    columns = columns_of(names)
                    break
            if all(axis in columns for axis in AXES):
                return columns, ()
            if is_header:
                seen = f"the first line names the columns {', '.join(names)[:100]}, and each line holds {fields}"
                raise ScanFault(seen, file=self.path, allowed="a name for each column, x, y and z among them")
        return {}, ()


def _is_number(word: bytes) -> bool:
    try:
        float(word)
    except ValueError:
        return False
    return True


def _fields(line: bytes, separator: bytes | None) -> list[bytes]:
    """The fields of a line; a separator between quotation marks parts nothing."""
    return _QUOTED.sub(b"q", line).split(separator)


_QUOTED = re.compile(rb'"[^"]*"')
_INNER_COMMA = re.compile(rb"^[+-]?\d*,\d+([eE][+-]?\d+)?,?$")


def _separator(line: bytes, path: Path) -> bytes | None:
    """The mark between numbers of this line, None for blanks."""
    line = line.removeprefix(b"\xef\xbb\xbf")
    line = _QUOTED.sub(b"q", line)
    words = re.split(rb"[\s;]+", line)
    if len(words) > 1 and any(_INNER_COMMA.match(word) for word in words):
        allowed = "write numbers with a decimal point: 1.5, not 1,5"
        raise ScanFault(f"the numbers hold decimal commas: {shown(line)}", file=path, allowed=allowed)
    if b";" in line:
        return b";"
    return b"," if b"," in line else None


def _sample_rows(text: bytes, fields: int, separator: bytes | None, path: Path, first_line: int) -> FloatArray:
    """The first lines with all their fields; fields that are no numbers are NaN."""
    try:
        return parse_lines(text, Columns(fields, tuple(range(fields)), separator), path.name, first_line)
    except ScanFault:
        rows = [_fields(line, separator) for line in text.splitlines()[:1000]]
        whole = [[float(w) if _is_number(w) else np.nan for w in row] for row in rows if len(row) == fields]
        return np.array(whole).reshape(-1, fields)


def _unnamed(fields: int, rows: FloatArray, path: Path) -> tuple[dict[str, int], tuple[Note, ...]]:
    """Columns without names: x, y, z first; colours and unit normals where nothing else fits."""
    if fields < 3:
        raise ScanFault(f"each line holds {fields} fields", file=path, allowed="at least x, y and z")
    columns = {axis: k for k, axis in enumerate(AXES)}
    what = ["columns 1 to 3 are x, y, z"]
    # A single number before the threes is the intensity, as in PTS: x y z intensity red green blue.
    whole = (4, 7) if fields % 3 == 1 else (3, 6)
    for start in (3, 4, 6, 7):
        part = rows[:, start : start + 3]
        if part.shape[1] < 3 or not np.isfinite(part).all():
            continue
        if "nx" not in columns and bool((np.abs((part * part).sum(axis=1) - 1) < 0.02).all()):
            columns.update({name: start + k for k, name in enumerate(NORMALS)})
            what.append(f"{start + 1} to {start + 3} unit normals")
        elif "red" not in columns and start in whole and _are_colours(part):
            columns.update({name: start + k for k, name in enumerate(COLOURS)})
            what.append(f"{start + 1} to {start + 3} colours")
    used = len(columns)
    if fields == 3:
        return columns, ()
    rest = "" if used == fields else "; the others are not used"
    return columns, (Note("columns-unnamed", f"{path.name}: the columns have no names: {', '.join(what)}{rest}."),)


def _are_colours(part: FloatArray) -> bool:
    whole = bool((part == np.round(part)).all())
    return whole and bool((part >= 0).all()) and bool((part <= 255).all()) and bool(part.max() > 1)


def _colour_top(part: FloatArray) -> float:
    most = float(np.nanmax(part, initial=0.0))
    return 1.0 if most <= 1.0 else 255.0 if most <= 255.0 else 65535.0
