"""OFF: points and polygons as text, with or without normals and colours of the points."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import numpy.typing as npt

from scanmass.errors import ScanFault
from scanmass.scans.blocks import eight_bit
from scanmass.scans.memory import mesh_scan
from scanmass.scans.numbers import Columns, parse_lines
from scanmass.scans.polygons import Triangles, fanned
from scanmass.scans.scan import Scan
from scanmass.scans.wording import CUT_OR_MISCOUNTED

HEADS = (b"OFF", b"COFF", b"NOFF", b"CNOFF")
"""C: a colour follows the coordinates, N: a normal does."""


def read_off(path: Path) -> Scan:
    """The mesh in an OFF file: a head word, the counts of points, faces and edges, then a line for each.

    Raises
    ------
    ScanFault
        If the head is another, the file holds less than it counts, or a face names a point that is not there.
    """
    text = path.read_bytes()
    head, _, _ = text.partition(b"\n")
    if b"BINARY" in head or b"\0" in text:
        raise ScanFault(
            "the file is binary", file=path, allowed="OFF is read as text only: export it as text or as PLY"
        )
    lines = [line.partition(b"#")[0].strip() for line in text.replace(b"\r", b"\n").split(b"\n")]
    lines = [line for line in lines if line]
    word, _, rest = (lines[0] if lines else b"").partition(b" ")
    if word not in HEADS:
        seen = f"the file begins with {word[:20].decode('latin-1')!r}"
        raise ScanFault(seen, file=path, allowed="it must begin with one of " + b", ".join(HEADS).decode())
    body = [rest, *lines[1:]] if rest.strip() else lines[1:]
    points, faces = _counts(body, path)
    if points + faces > len(body) - 1:
        seen = f"the head counts {points} points and {faces} faces, but {len(body) - 1} lines follow"
        raise ScanFault(seen, file=path, allowed=CUT_OR_MISCOUNTED)
    width = len(body[1].split()) if points else 0
    need = 3 + 3 * (b"N" in word)
    if width < need:
        raise ScanFault(f"a line of a point holds {width} numbers", file=path, allowed=f"{need} are needed")
    rows = parse_lines(b"\n".join(body[1 : 1 + points]), Columns(width, tuple(range(width))), path.name, 3)
    triangles = _faces(body[1 + points : 1 + points + faces], points, path)
    colours = None
    if b"C" in word and width >= need + 3:
        part = rows[:, need : need + 3]
        colours = eight_bit(part, 1.0 if part.max() <= 1.0 else 255.0)
    normals = np.ascontiguousarray(rows[:, 3:6]) if b"N" in word else None
    return mesh_scan(
        path,
        "off",
        np.ascontiguousarray(rows[:, :3]),
        triangles.faces,
        normals=normals,
        colours=colours,
        assumptions=triangles.assumptions,
    )


def _counts(body: list[bytes], path: Path) -> tuple[int, int]:
    words = body[0].split() if body else []
    if len(words) < 2 or not all(word.isdigit() for word in words[:2]):
        seen = f"the counts read {b' '.join(words)[:40].decode('latin-1')!r}"
        raise ScanFault(seen, file=path, allowed="points, faces and edges are counted in whole numbers")
    return int(words[0]), int(words[1])


def _faces(lines: list[bytes], points: int, path: Path) -> Triangles:
    if lines and len(lines[0].split()) == 4:
        try:
            rows = parse_lines(b"\n".join(lines), Columns(4, (0, 1, 2, 3)), path.name, 1)
        except ScanFault:
            rows = np.zeros((1, 4))
        if (rows[:, 0] == 3).all() and (rows == np.round(rows)).all() and (np.abs(rows) < 2**53).all():
            return fanned(rows[:, 1:].reshape(-1).astype(np.int64), np.full(len(rows), 3), points, path.name)
    counts: list[int] = []
    corners: list[int] = []
    try:
        for line in lines:
            words = line.split()
            n = int(words[0])
            if n < 1 or len(words) < n + 1:
                raise ValueError
            counts.append(n)
            corners += map(int, words[1 : n + 1])
        numbers: npt.NDArray[np.int64] = np.array(corners, np.int64)
    except (ValueError, OverflowError):
        raise ScanFault(
            "a line of a face does not hold the corners it counts", file=path, allowed=CUT_OR_MISCOUNTED
        ) from None
    return fanned(numbers, np.array(counts, np.int64), points, path.name)
