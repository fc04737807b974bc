"""OBJ: points and polygons as text; polygons are cut into triangles."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import numpy.typing as npt

from scanmass.errors import ScanFault
from scanmass.scans.blocks import eight_bit
from scanmass.scans.memory import mesh_scan
from scanmass.scans.numbers import Columns, FloatArray, parse_lines, shown
from scanmass.scans.polygons import check_range, fanned
from scanmass.scans.scan import Scan
from scanmass.scans.wording import CUT

IntArray = npt.NDArray[np.int64]
MOST_LOOSE = 0.01
"""Share of points without a face that a whole file may hold."""


def read_obj(path: Path) -> Scan:
    """The points and faces in an OBJ file. Groups, materials, textures, lines and curves are passed over.

    Normals are read where there are no faces and one for each point; colours where they follow the coordinates.

    Raises
    ------
    ScanFault
        If a line cannot be read, or a face names a point that is not there.
    """
    text = path.read_bytes()
    if b"\0" in text:
        raise ScanFault("the file is no plain text", file=path, allowed="an OBJ file is text: the name may be wrong")
    lines = text.replace(b"\r\n", b"\n").replace(b"\r", b"\n").replace(b"\\\n", b" ").split(b"\n")
    lines = [line.strip() for line in lines]
    if b"v" in lines or b"f" in lines:
        raise ScanFault("a point or a face is begun and left empty", file=path, allowed=CUT)
    rows = _numbers(lines, b"v", path)
    if len(rows) == 0:
        raise ScanFault("the file holds no line of a point", file=path, allowed="a point is written: v x y z")
    points = np.ascontiguousarray(rows[:, :3])
    colours = eight_bit(rows[:, -3:], 1.0 if rows[:, -3:].max() <= 1.0 else 255.0) if rows.shape[1] >= 6 else None
    corners, counts = _faces(lines, len(points), path)
    triangles = fanned(corners, counts, len(points), path.name)
    _refuse_cut(text, triangles.faces, len(points), path)
    normals = None
    if len(triangles.faces) == 0:
        found = _numbers(lines, b"vn", path)
        normals = found if found.shape == points.shape else None
    return mesh_scan(
        path, "obj", points, triangles.faces, normals=normals, colours=colours, assumptions=triangles.assumptions
    )


def _refuse_cut(text: bytes, faces: IntArray, points: int, path: Path) -> None:
    """OBJ counts nothing, so a cut shows only in what is left: a last line that does not end, and points not used."""
    loose = points - len(np.unique(faces))
    if len(faces) and loose > MOST_LOOSE * points and not text.endswith((b"\n", b"\r")):
        seen = f"the last line does not end, and {loose} of {points} points belong to no face"
        raise ScanFault(seen, file=path, allowed=CUT)


def _numbers(lines: list[bytes], key: bytes, path: Path) -> FloatArray:
    """The numbers of all lines that begin with ``key``."""
    marks = (key + b" ", key + b"\t")
    found = [line[len(key) :] for line in lines if line.startswith(marks)]
    if not found:
        return np.empty((0, 3))
    width = len(found[0].split())
    if width < 3:
        raise ScanFault(f"a point is written {shown(found[0].strip())}", file=path, allowed="v x y z")
    try:
        return parse_lines(b"\n".join(found), Columns(width, tuple(range(width))), path.name, 1)
    except ScanFault as fault:
        seen = f"{key.decode()} {fault.seen}".replace("line", "entry", 1)
        raise ScanFault(
            seen, file=path, allowed=f"every entry must hold {width} numbers, as the first one does"
        ) from None


def _corners(text: bytes, path: Path) -> tuple[FloatArray, IntArray]:
    """Numbers of all lines end to end, and how many each holds; fast where all hold as many as the first."""
    width = len(text.partition(b"\n")[0].split())
    try:
        rows = parse_lines(text, Columns(max(width, 1), tuple(range(width))), path.name, 1)
    except ScanFault:
        rows = np.empty((0, width))
    if len(rows) == text.count(b"\n") + 1:
        return rows.reshape(-1), np.full(len(rows), width)
    faces = [line.split() for line in text.split(b"\n")]
    try:
        corners = np.array([word for words in faces for word in words], dtype=np.float64)
    except ValueError:
        seen = "a face names its corners by something else than numbers"
        raise ScanFault(seen, file=path, allowed="f 1 2 3") from None
    return corners, np.array([len(words) for words in faces], np.int64)


def _faces(lines: list[bytes], points: int, path: Path) -> tuple[IntArray, IntArray]:
    """Corners of all faces end to end, from 0, and the number of each."""
    marks = (b"f ", b"f\t")
    text = b"\n".join([line[1:] for line in lines if line.startswith(marks)])
    if not text:
        return np.empty(0, np.int64), np.empty(0, np.int64)
    corners, counts = _corners(re.sub(rb"/\S*", b"", text) if b"/" in text else text, path)
    if not np.isfinite(corners).all() or (np.abs(corners) > 2**53).any() or (corners != np.round(corners)).any():
        raise ScanFault("a face names its corners by something else than whole numbers", file=path, allowed="f 1 2 3")
    numbers = corners.astype(np.int64)
    if (counts < 3).any():
        seen = f"a face has {counts.min()} corners"
        raise ScanFault(seen, file=path, allowed="three at least: the file is cut or corrupt")
    if (numbers == 0).any():
        raise ScanFault("a face names point number 0", file=path, allowed="OBJ counts points from 1")
    backward = numbers < 0
    if backward.any():
        before = np.cumsum([line.startswith((b"v ", b"v\t")) for line in lines])
        known = np.repeat(before[[line.startswith(marks) for line in lines]], counts)
        numbers = np.where(backward, known + numbers, numbers - 1)
        check_range(int(numbers.min()), int(numbers.max()), points, path.name)
        return numbers, counts
    return numbers - 1, counts
