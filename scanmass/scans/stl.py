"""STL: triangles, binary or ascii. Corners with the very same coordinates become one point."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import numpy.typing as npt

from scanmass.errors import Note, ScanFault
from scanmass.geometry.edges import welded
from scanmass.scans.corners import shared
from scanmass.scans.memory import mesh_scan
from scanmass.scans.numbers import Columns, parse_lines
from scanmass.scans.scan import Scan

FloatArray = npt.NDArray[np.float64]
HEAD = 84
"""80 bytes of anything, then the number of triangles."""
FACET = np.dtype([("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("attribute", "<u2")])


def read_stl(path: Path) -> Scan:
    """The mesh in an STL file. The facet normals are not used: the order of the corners says the same.

    Raises
    ------
    ScanFault
        If the file is neither form, holds fewer triangles than it promises, or a coordinate that is not finite.
    """
    size = path.stat().st_size
    with path.open("rb") as stream:
        head = stream.read(HEAD)
    promised = int.from_bytes(head[80:84], "little")
    warnings: tuple[Note, ...] = ()
    if len(head) == HEAD and promised > 0 and size == HEAD + promised * FACET.itemsize:
        corners = _binary(path, promised)
    elif head.lstrip().startswith(b"solid") and _is_text(path):
        corners = _ascii(path)
    elif promised > 0 and HEAD + promised * FACET.itemsize < size:
        text = f"{path.name}: {size - HEAD - promised * FACET.itemsize} bytes after the last triangle were not read."
        corners, warnings = _binary(path, promised), (Note("bytes-unread", text),)
    else:
        seen = f"the header promises {promised} triangles, but {max(size - HEAD, 0)} bytes follow"
        allowed = "50 bytes for each are needed: the file is cut or no STL file"
        raise ScanFault(seen if len(head) == HEAD else "the file ends within its header", file=path, allowed=allowed)
    if not np.isfinite(corners).all():
        seen = f"{int((~np.isfinite(corners)).any(axis=1).sum())} corners have coordinates that are not finite"
        raise ScanFault(seen, file=path, allowed="repair the mesh or export it again")
    places, which = shared(corners)
    points, faces = welded(places, which.reshape(-1, 3))
    lost = len(corners) // 3 - len(faces)
    if lost:
        text = f"{path.name}: {lost} triangles with two corners in one place were left out: they hold no area."
        warnings += (Note("faces-without-area", text),)
    return mesh_scan(path, "stl", points, faces, warnings=warnings)


def _binary(path: Path, triangles: int) -> FloatArray:
    return np.fromfile(path, FACET, triangles, offset=HEAD)["corners"].reshape(-1, 3).astype(np.float64)


def _is_text(path: Path) -> bool:
    with path.open("rb") as stream:
        return b"\0" not in stream.read(4096)


def _ascii(path: Path) -> FloatArray:
    lines = path.read_bytes().replace(b"\r\n", b"\n").replace(b"\r", b"\n").split(b"\n")
    words = [line.strip() for line in lines]
    corners = [word[6:] for word in words if word[:6].lower() == b"vertex"]
    facets = sum(1 for word in words if word[:5].lower() == b"facet")
    last = next((word for word in reversed(words) if word), b"")
    if facets == 0 or len(corners) != 3 * facets or not last.lower().startswith(b"endsolid"):
        seen = (
            f"the file holds {facets} facets and {len(corners)} corners, and ends with {last[:30].decode('latin-1')!r}"
        )
        raise ScanFault(seen, file=path, allowed="three corners for each facet, and endsolid: the file is cut")
    try:
        return parse_lines(b"\n".join(corners), Columns(3, (0, 1, 2)), path.name, 1)
    except ScanFault as fault:
        seen = "corner " + fault.seen.removeprefix("line ")
        raise ScanFault(seen, file=path, allowed="a corner is written: vertex x y z") from None
