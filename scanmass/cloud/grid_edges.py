"""Samples at the edges of a view's range grid, where one pixel may mix two surfaces."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy import ndimage

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

REACH = 2
"""Cells from an empty cell or a jump within which a sample is at an edge."""
JUMP = 5.0
"""Spacings between neighbouring cells that make a jump."""
TOO_MANY = 0.5
"""Share of marked samples above which the grid is too sparse to tell its edges."""


def grid_edges(
    points: FloatArray,
    rows: npt.NDArray[np.int32],
    columns: npt.NDArray[np.int32],
    shape: tuple[int, int],
    scanner: FloatArray | None,
) -> BoolArray | None:
    """Which points (n, 3) of one view lie within 2 cells of an empty cell or of a jump over 5 spacings.

    ``rows``, ``columns`` (n,) place the points in the grid of ``shape``. With the ``scanner`` (3,) known a jump is one
    in range, and the spacing grows with range; else it is one in space, against the view's median spacing. The
    grid's own border is no edge. None where more than half of the points would be marked: too sparse a grid to tell.

    >>> r, c = (a.ravel().astype(np.int32) for a in np.mgrid[0:9, 0:9])
    >>> p = np.stack([r, c, np.where(c < 4, 0, 20)], axis=1).astype(float)
    >>> marked = grid_edges(p, r, c, (9, 9), None).reshape(9, 9)
    >>> marked[4].astype(int).tolist()
    [0, 0, 1, 1, 1, 1, 0, 0, 0]
    """
    inside = (rows >= 0) & (columns >= 0) & (rows < shape[0]) & (columns < shape[1])
    place = np.full(shape, -1, np.int32)
    place[rows[inside], columns[inside]] = np.flatnonzero(inside)
    full = place >= 0
    distance = None if scanner is None else np.linalg.norm(points - scanner, axis=1)
    steps = [_steps(place, points, distance, axis) for axis in (0, 1)]
    pace = np.concatenate([s[0][np.isfinite(s[0])] for s in steps])
    if len(pace) == 0:
        return None
    limit = JUMP * float(np.median(pace))
    jumps = np.zeros(shape, np.bool_)
    for axis, (_, leap) in enumerate(steps):
        far = np.zeros(shape, np.bool_)
        first = (slice(0, -1), slice(None)) if axis == 0 else (slice(None), slice(0, -1))
        second = (slice(1, None), slice(None)) if axis == 0 else (slice(None), slice(1, None))
        far[first] |= leap > limit
        far[second] |= leap > limit
        jumps |= far
    block = np.ones((3, 3), np.bool_)
    near = ndimage.binary_dilation(~full, block, iterations=REACH)
    near |= ndimage.binary_dilation(jumps, block, iterations=REACH - 1)
    marked = np.zeros(len(points), np.bool_)
    marked[inside] = near[rows[inside], columns[inside]]
    return None if marked.mean() > TOO_MANY else marked


def _steps(
    place: npt.NDArray[np.int32], points: FloatArray, distance: FloatArray | None, axis: int
) -> tuple[FloatArray, FloatArray]:
    """Distance between neighbouring cells along an axis, and how far they leap; NaN beside empty cells.

    With ranges known both are divided by the range, so one limit serves near and far.
    """
    a, b = (place[:-1], place[1:]) if axis == 0 else (place[:, :-1], place[:, 1:])
    both = (a >= 0) & (b >= 0)
    pace, leap = np.full(a.shape, np.nan), np.full(a.shape, np.nan)
    i, j = a[both], b[both]
    apart = np.linalg.norm(points[i] - points[j], axis=1)
    if distance is None:
        pace[both], leap[both] = apart, apart
    else:
        nearer = np.maximum(np.minimum(distance[i], distance[j]), np.finfo(float).tiny)
        pace[both], leap[both] = apart / nearer, np.abs(distance[i] - distance[j]) / nearer
    return pace, leap
