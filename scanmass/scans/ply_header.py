"""The header of a PLY file: which elements follow, how many, and what each holds."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO, Literal

import numpy as np

from scanmass.errors import ScanFault

Encoding = Literal["ascii", "binary_little_endian", "binary_big_endian"]
TYPES = {
    "char": "i1", "uchar": "u1", "short": "i2", "ushort": "u2", "int": "i4", "uint": "u4", "float": "f4",
    "double": "f8", "int8": "i1", "uint8": "u1", "int16": "i2", "uint16": "u2", "int32": "i4", "uint32": "u4",
    "float32": "f4", "float64": "f8", "int64": "i8", "uint64": "u8",
}  # fmt: skip
MOST_HEADER = 1 << 20
"""A header longer than 1 MB is no header."""


@dataclass(frozen=True)
class Property:
    """A property's name, type code without byte order, and the type code of its length where it is a list."""

    name: str
    type: str
    length: str | None = None


@dataclass(frozen=True)
class Element:
    """An element's name, how many follow, and its properties in order."""

    name: str
    count: int
    properties: tuple[Property, ...]

    @property
    def has_list(self) -> bool:
        """Some property is a list, so rows differ in size."""
        return any(p.length is not None for p in self.properties)

    def row_type(self, order: str) -> np.dtype[np.void]:
        """The dtype of one row without lists, byte order ``order``; fields are named by their place."""
        return np.dtype([(f"p{k}", order + p.type) for k, p in enumerate(self.properties)])

    def least_size(self) -> int:
        """Bytes of a binary row whose lists are all empty."""
        return sum(np.dtype(p.length or p.type).itemsize for p in self.properties)


@dataclass(frozen=True)
class Header:
    """What a PLY header says. ``data_offset``: first byte after it; ``lines``: its number of lines."""

    encoding: Encoding
    elements: tuple[Element, ...]
    info: tuple[tuple[str, ...], ...]
    data_offset: int
    lines: int

    @property
    def order(self) -> str:
        """Byte order in numpy's mark."""
        return ">" if self.encoding == "binary_big_endian" else "<"

    def info_number(self, key: str) -> int | None:
        """A whole number from an ``obj_info`` or ``comment`` line ``key number``."""
        for words in self.info:
            if len(words) == 2 and words[0] == key and words[1].isdecimal():
                return int(words[1])
        return None


def read_header(path: Path) -> Header:
    """The header of the PLY file at ``path``.

    Raises
    ------
    ScanFault
        If it does not begin, end or read as the format says.
    """
    with path.open("rb") as stream:
        lines, offset = _header_lines(stream, path)
    encoding: str | None = None
    elements: list[Element] = []
    info: list[tuple[str, ...]] = []
    for number, words in enumerate((line.split() for line in lines), 1):
        if not words or number == 1:
            continue
        if words[0] == "format" and len(words) == 3:
            encoding = words[1]
        elif words[0] in ("comment", "obj_info"):
            info.append(tuple(words[1:]))
        elif words[0] == "element" and len(words) == 3 and words[2].isdecimal() and len(words[2]) < 19:
            elements.append(Element(words[1], int(words[2]), ()))
        elif words[0] == "property" and elements:
            last = elements[-1]
            elements[-1] = Element(last.name, last.count, (*last.properties, _property(words, number, path)))
        else:
            raise ScanFault(f"line {number} of the header reads {' '.join(words)[:60]!r}", file=path, allowed=_GRAMMAR)
    if encoding not in ("ascii", "binary_little_endian", "binary_big_endian"):
        allowed = "allowed are ascii, binary_little_endian and binary_big_endian"
        raise ScanFault(f"the header names the format {encoding!r}", file=path, allowed=allowed)
    return Header(encoding, tuple(elements), tuple(info), offset, len(lines) + 1)  # type: ignore[arg-type]


_GRAMMAR = "a PLY header holds format, comment, obj_info, element and property lines"


def _header_lines(stream: BinaryIO, path: Path) -> tuple[list[str], int]:
    start = stream.read(MOST_HEADER)
    ending = b"\r\n" if start.startswith(b"ply\r\n") else b"\r" if start.startswith(b"ply\r") else b"\n"
    lines: list[str] = []
    at = 0
    while True:
        end = start.find(ending, at)
        if end < 0:
            raise ScanFault("the header has no end_header line", file=path, allowed="the file is cut or no PLY file")
        line = start[at:end].decode("latin-1").strip()
        at = end + len(ending)
        if line == "end_header":
            return lines, at
        lines.append(line)


def _property(words: list[str], number: int, path: Path) -> Property:
    kinds = words[2:4] if words[1:2] == ["list"] else words[1:2]
    wanted = 5 if words[1:2] == ["list"] else 3
    if len(words) != wanted or any(kind not in TYPES for kind in kinds):
        seen = f"line {number} of the header reads {' '.join(words)[:60]!r}"
        raise ScanFault(seen, file=path, allowed="types are " + ", ".join(list(TYPES)[:8]))
    if wanted == 3:
        return Property(words[2], TYPES[words[1]])
    if TYPES[words[2]][0] == "f":
        raise ScanFault(f"line {number} of the header counts a list in {words[2]}", file=path, allowed="whole numbers")
    return Property(words[4], TYPES[words[3]], TYPES[words[2]])
