"""Which side of the surface is outside: evidence sample by sample, and votes among neighbours."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from numba import njit
from scipy.spatial import ConvexHull, QhullError

from scanmass.cloud.normals import RawNormals
from scanmass.geometry.occupancy import directions, escape_shares, facing_sheets, occupancy
from scanmass.geometry.planes import plane_axes

FloatArray = npt.NDArray[np.float64]
IndexArray = npt.NDArray[np.int64]

Floor = tuple[FloatArray, float]
"""The plane an object stood on, {x: x.up = height}, as (up, height)."""
RAYS = 48
OFFSET = 2.5
"""Cells from a sample to where its rays start."""
CLEAR = 0.1
"""Escapes on one side must exceed those on the other by this share to count."""
WALLED = 0.2
"""Where more samples than this have another sheet within the offset, walls are too thin to be counted by parity."""


def scanner_evidence(points: FloatArray, normals: FloatArray, scanners: FloatArray) -> FloatArray:
    """Evidence (n,) that a normal points outward, in [-1, 1], from the scanner (n, 3) that saw each sample.

    Full above 17 degrees to the surface, less towards grazing; 0 where the scanner is NaN.
    """
    sight = scanners - points
    length = np.linalg.norm(sight, axis=1)
    cosine = np.einsum("ij,ij->i", sight, normals) / np.where(length > 0, length, 1.0)
    evidence: FloatArray = np.nan_to_num(np.clip(cosine / 0.3, -1.0, 1.0))
    return evidence


def ray_evidence(points: FloatArray, raw: RawNormals, asked: IndexArray, floor: Floor | None = None) -> FloatArray:
    """Evidence (m,) that the normals of the samples ``asked`` (m,) point outward, in [-1, 1], from escape rays.

    48 rays start 2.5 cells off the sample on either side and run through a grid of the surface's cells; the side
    more of them escape from is outside. A side closed off by another sheet before the rays start (the far face
    of a thin wall) has no escape. Where neither side has any, as on the inner wall of a closed hollow body, the
    walls that rays pass are counted instead: an odd number leads out of material, an even one out of a cavity;
    not, though, where walls are thinner than the rays' offset, since two sheets in one cell count as one wall.
    Where the object stood on a ``floor`` (up, height) a lid there closes its unseen underside, for the rays alone.
    """
    cell = max(
        1.6 * float(np.median(raw.distance[:, min(4, raw.distance.shape[1]) - 1])),
        float(np.ptp(points, axis=0).max()) / 200.0,
    )
    walls = points if floor is None else np.concatenate([points, _lid(points, floor, 0.7 * cell)])
    grid = occupancy(walls, cell)
    own = max(4.0 * raw.noise, 0.3 * cell)
    blocked = facing_sheets(grid, points, raw.normals, asked, own, OFFSET * cell) < np.inf
    free, odd = escape_shares(grid, points[asked], raw.normals[asked], directions(RAYS), OFFSET)
    free[blocked] = 0.0
    escapes = free[:, 0] - free[:, 1]
    evidence = np.where(np.abs(escapes) > CLEAR, np.clip(2.0 * escapes, -1.0, 1.0), 0.0)
    if blocked.any(axis=1).mean() < WALLED:
        closed = (free.max(axis=1) < CLEAR) & ~blocked.any(axis=1)
        parity = odd[:, 1] - odd[:, 0]
        evidence = np.where(closed & (np.abs(parity) > CLEAR), np.clip(parity, -1.0, 1.0), evidence)
    return np.asarray(evidence)


def _lid(points: FloatArray, floor: Floor, step: float) -> FloatArray:
    """Points on the floor, ``step`` apart, within the convex outline of the object seen from above."""
    up, height = floor
    axes = plane_axes(up)
    flat = points @ axes.T
    low = flat.min(axis=0)
    counts = np.ceil(np.ptp(flat, axis=0) / step).astype(int) + 1
    places = low + step * np.stack(np.meshgrid(*map(np.arange, counts), indexing="ij"), axis=-1).reshape(-1, 2)
    try:
        edges = ConvexHull(flat).equations
    except QhullError:
        return np.empty((0, 3))
    inside = (places @ edges[:, :2].T + edges[:, 2]).max(axis=1) <= step
    lid: FloatArray = places[inside] @ axes + height * up
    return lid


@njit(cache=True)
def _vote(points, normals, index, evidence, rounds):  # type: ignore[no-untyped-def]
    n, k = index.shape
    belief = evidence.copy()
    heard = evidence.copy()
    for _ in range(rounds):
        for i in range(n):
            total, weight = 0.0, 0.0
            for j in range(k):
                m = index[i, j]
                turn, height, far = 0.0, 0.0, 0.0
                for axis in range(3):
                    step = points[m, axis] - points[i, axis]
                    turn += normals[i, axis] * normals[m, axis]
                    height += step * normals[i, axis]
                    far += step * step
                # A sample across the normal lies on another sheet: its outside is not this one's.
                if height * height > 0.25 * far:
                    continue
                w = turn * abs(turn)
                total += w * belief[m]
                weight += abs(w)
            vote = total / weight if weight > 0.0 else 0.0
            heard[i] = min(1.0, max(-1.0, 0.5 * evidence[i] + vote))
        belief, heard = heard, belief
    return belief


def vote(
    points: FloatArray, normals: FloatArray, index: IndexArray, evidence: FloatArray, rounds: int = 10
) -> FloatArray:
    """Evidence (n,) after ``rounds`` of voting among neighbours ``index`` (n, k), in [-1, 1].

    A neighbour counts by how parallel its normal is, and turns its vote over where the normals are opposed;
    neighbours that lie off the sample's own sheet are not heard.
    """
    belief: FloatArray = _vote(
        np.ascontiguousarray(points), np.ascontiguousarray(normals), np.ascontiguousarray(index), evidence, rounds
    )
    return belief
