"""What one pass over a scan tells: how many points, how large, how flat."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numba import njit

from scanmass.geometry.edges import count_edges, welded
from scanmass.scans.corners import shared
from scanmass.scans.scan import FloatArray, Scan

COARSE, TOO_COARSE = 1e-5, 1e-2
"""Numbers stored in steps above these shares of the size: the steps add to the noise; they leave no shape."""

GREATEST_SINGLE = 3.4e38


@dataclass(frozen=True)
class Survey:
    """Of one scan, in its own unit: ``usable`` finite points, the ends of their box ``low``, ``high`` (3,).

    ``spreads`` (3,): standard deviations along the principal axes of the points, ascending.
    ``at_origin``: points whose three coordinates are all exactly zero.
    ``step``: the distance between neighbouring stored numbers if all are single precision, else 0.
    """

    usable: int
    low: FloatArray
    high: FloatArray
    spreads: FloatArray
    step: float
    at_origin: int = 0

    @property
    def size(self) -> float:
        """The largest side of the box."""
        with np.errstate(over="ignore"):
            return float((self.high - self.low).max())


def survey(scan: Scan) -> Survey:
    """One streaming pass over the points of ``scan``.

    Sums are taken about the first point, block after block, so a place far from the origin costs no digits.

    Raises
    ------
    ScanFault
        Where the file turns out to be cut or corrupt on the way.
    """
    usable, zeros, single = 0, 0, True
    box = np.array([[np.inf] * 3, [-np.inf] * 3])
    first, sums = np.zeros(3), np.zeros((4, 3))
    for block in scan.blocks():
        if len(block.points) == 0:
            continue
        if usable == 0:
            first = block.points[0].copy()
        usable += len(block.points)
        block_single, block_zeros = _gather(block.points, first, box, sums)
        single, zeros = single and bool(block_single), zeros + int(block_zeros)
    # Coordinates near the greatest float overflow here; they are refused for their size.
    with np.errstate(over="ignore", invalid="ignore"):
        sums /= max(usable, 1)
        covariance = sums[1:] - np.outer(sums[0], sums[0])
        size = float((box[1] - box[0]).max()) if usable else 0.0
    spreads = np.full(3, np.nan)
    if np.isfinite(covariance).all():
        spreads = np.sqrt(np.maximum(np.linalg.eigvalsh(covariance), 0.0))
    farthest = float(np.abs(box).max()) if usable and np.isfinite(size) else 0.0
    step = float(np.spacing(np.float32(farthest))) if single and 0.0 < farthest < GREATEST_SINGLE else 0.0
    return Survey(usable, box[0], box[1], spreads, step, zeros)


@njit(cache=True)
def _gather(points, first, box, sums):  # type: ignore[no-untyped-def]
    """Adds the points' box, sum and products about ``first``; are all single precision, and how many are zero."""
    part = np.zeros((4, 3))
    single, zeros = True, 0
    for i in range(len(points)):
        zeros += points[i, 0] == 0.0 and points[i, 1] == 0.0 and points[i, 2] == 0.0
        for j in range(3):
            x = points[i, j]
            box[0, j] = min(box[0, j], x)
            box[1, j] = max(box[1, j], x)
            single = single and np.float64(np.float32(x)) == x
            d = x - first[j]
            part[0, j] += d
            for k in range(3):
                part[1 + j, k] += d * (points[i, k] - first[k])
        # Sums in runs keep the rounding of a million points near that of a thousand.
        if i % 1024 == 1023:
            sums += part
            part[:] = 0.0
    sums += part
    return single, zeros


def is_closed(scan: Scan) -> bool:
    """Whether the scan is a mesh without open edges, equal points counting as one; faces may be turned any way."""
    if scan.faces is None:
        return False
    if len(scan.faces) > 0 and count_edges(scan.faces).open == 0:
        return True
    places, which = shared(scan.points())
    _, faces = welded(places, which[scan.faces])
    return len(faces) > 0 and count_edges(faces).open == 0
