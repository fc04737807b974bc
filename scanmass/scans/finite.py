"""Where points without finite coordinates leave: between a reader and everybody else."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from scanmass.errors import ScanFault
from scanmass.scans.blocks import taken
from scanmass.scans.scan import Block, FloatArray, Scan


def finite_rows(points: FloatArray) -> npt.NDArray[np.bool_]:
    """Which of the points (n, 3) are finite: (n,) bool."""
    finite = np.isfinite(points)
    mask: npt.NDArray[np.bool_] = finite[:, 0] & finite[:, 1] & finite[:, 2]
    return mask


def finite_only(scan: Scan) -> Scan:
    """The same scan, its blocks without the points that have a coordinate that is not finite.

    ``total`` still counts them: what the blocks lack was dropped here. In a mesh the faces are numbered anew.

    Raises
    ------
    ScanFault
        If a face of a mesh uses such a point.
    """
    faces = scan.faces
    if faces is not None:
        finite = finite_rows(scan.points())
        if not finite[faces].all():
            seen = f"{int((~finite).sum())} points of the mesh have coordinates that are not finite, and faces use them"
            raise ScanFault(seen, file=scan.file, allowed="repair the mesh or export it again")
        faces = (np.cumsum(finite) - 1)[faces]

    def blocks() -> Iterator[Block]:
        for block in scan.blocks():
            mask = finite_rows(block.points)
            yield block if mask.all() else taken(block, mask)

    return replace(scan, blocks=blocks, faces=faces)
