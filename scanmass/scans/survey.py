"""What one pass over a scan tells: how many points, how large, how flat."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from scanmass.geometry.edges import count_edges, welded
from scanmass.scans.scan import FloatArray, Scan

COARSE = 1e-5
"""Numbers stored in steps above this share of the size deserve a warning: the steps add to the noise."""


@dataclass(frozen=True)
class Survey:
    """Of one scan, in its own unit: ``usable`` finite points, the ends of their box ``low``, ``high`` (3,).

    ``spreads`` (3,): standard deviations along the principal axes of the points, ascending.
    ``step``: the distance between neighbouring stored numbers if all are single precision, as far as that matters.
    """

    usable: int
    low: FloatArray
    high: FloatArray
    spreads: FloatArray
    step: float

    @property
    def size(self) -> float:
        """The largest side of the box."""
        return float((self.high - self.low).max())


def survey(scan: Scan) -> Survey:
    """One streaming pass over the points of ``scan``.

    Sums are taken about the first point, block after block, so a place far from the origin costs no digits.

    Raises
    ------
    ScanFault
        Where the file turns out to be cut or corrupt on the way.
    """
    usable, single = 0, True
    low, high = np.full(3, np.inf), np.full(3, -np.inf)
    first, total, second = np.zeros(3), np.zeros(3), np.zeros((3, 3))
    # Coordinates near the greatest float overflow here; they are refused for their size.
    with np.errstate(over="ignore", invalid="ignore"):
        for block in scan.blocks():
            points = block.points
            if len(points) == 0:
                continue
            if usable == 0:
                first = points[0].copy()
            usable += len(points)
            low, high = np.minimum(low, points.min(axis=0)), np.maximum(high, points.max(axis=0))
            single = single and not _finer_than_single(points)
            offset = points - first
            total += offset.sum(axis=0)
            second += offset.T @ offset
        mean = total / max(usable, 1)
        covariance = second / max(usable, 1) - np.outer(mean, mean)
        size = float((high - low).max()) if usable else 0.0
    spreads = np.full(3, np.nan)
    if np.isfinite(covariance).all():
        spreads = np.sqrt(np.maximum(np.linalg.eigvalsh(covariance), 0.0))
    farthest = float(np.maximum(np.abs(low), np.abs(high)).max()) if usable and np.isfinite(size) else 0.0
    step = float(np.spacing(np.float32(farthest))) if single and farthest else 0.0
    return Survey(usable, low, high, spreads, step)


def _finer_than_single(points: FloatArray) -> bool:
    """Whether some coordinate is no single-precision number; not asked where single precision would do."""
    if np.spacing(np.float32(np.abs(points).max())) <= COARSE * np.ptp(points, axis=0).max():
        return False
    return bool((points.astype(np.float32) != points).any())


def is_closed(scan: Scan) -> bool:
    """Whether the scan is a mesh whose every edge has two faces, equal points counting as one."""
    if scan.faces is None:
        return False
    if count_edges(scan.faces).closed:
        return True
    _, faces = welded(scan.points(), scan.faces)
    return len(faces) > 0 and count_edges(faces).closed
