"""Faces with any number of corners, cut into triangles."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.errors import Note, ScanFault
from scanmass.scans.wording import CUT

IntArray = npt.NDArray[np.int64]


@dataclass(frozen=True)
class Triangles:
    """Triangles (m, 3), and what was assumed to get them."""

    faces: IntArray
    assumptions: tuple[Note, ...] = ()


def fanned(corners: IntArray, counts: IntArray, points: int, file: str) -> Triangles:
    """Triangles of polygons: ``counts`` (k,) corners each, their point numbers one after the other in ``corners``.

    A polygon of n corners becomes the n - 2 triangles round its first corner: exact for flat ones, convex or not,
    in every volume integral. Order and direction are kept. Faces of fewer than three corners hold nothing.

    Raises
    ------
    ScanFault
        Where a corner is not one of ``points`` points.

    >>> fanned(np.array([0, 1, 2, 3]), np.array([4]), 4, "a.ply").faces.tolist()
    [[0, 1, 2], [0, 2, 3]]
    """
    if len(corners):
        check_range(int(corners.min()), int(corners.max()), points, file)
    starts = np.cumsum(counts) - counts
    pieces = np.maximum(counts - 2, 0)
    owner = np.repeat(np.arange(len(counts)), pieces)
    step = np.arange(len(owner)) - np.repeat(np.cumsum(pieces) - pieces, pieces)
    first = starts[owner]
    faces = np.stack([corners[first], corners[first + step + 1], corners[first + step + 2]], axis=1)
    larger = int((counts > 3).sum())
    notes: Sequence[Note] = ()
    if larger:
        text = f"{file}: {larger} faces with more than three corners were cut into triangles from their first corner."
        notes = (Note("polygons-fanned", text),)
    return Triangles(faces.astype(np.int64), tuple(notes))


def check_range(least: int, greatest: int, points: int, file: str) -> None:
    """Refuse faces that name a point the file does not hold."""
    if least < 0 or greatest >= points:
        wrong = least if least < 0 else greatest
        raise ScanFault(
            f"a face names point number {wrong}, counted from 0, but the file holds {points} points",
            file=file,
            allowed=CUT,
        )
