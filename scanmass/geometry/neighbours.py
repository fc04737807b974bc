"""Nearest neighbours in a cloud, and the local scale they tell."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy.spatial import cKDTree

FloatArray = npt.NDArray[np.float64]
IndexArray = npt.NDArray[np.int64]

_BITS = 10


def _spread_bits(x: IndexArray) -> IndexArray:
    x = (x | (x << 16)) & 0x030000FF
    x = (x | (x << 8)) & 0x0300F00F
    x = (x | (x << 4)) & 0x030C30C3
    return (x | (x << 2)) & 0x09249249


def curve_order(points: FloatArray) -> IndexArray:
    """An order (n,) of points (n, 3) in which those near in space are near in memory (Z-order curve).

    >>> curve_order(np.array([[0.0, 0, 0], [9, 9, 9], [0.1, 0, 0], [9, 9, 8.9]])).tolist()
    [0, 2, 3, 1]
    """
    low = points.min(axis=0)
    reach = max(float((points.max(axis=0) - low).max()), np.finfo(float).tiny)
    place = np.minimum((points - low) / reach * 2**_BITS, 2**_BITS - 1).astype(np.int64)
    key = _spread_bits(place[:, 0]) | _spread_bits(place[:, 1]) << 1 | _spread_bits(place[:, 2]) << 2
    return np.argsort(key, kind="stable")


def nearest(points: FloatArray, k: int, queries: FloatArray | None = None) -> tuple[FloatArray, IndexArray]:
    """Distances (m, k) and indices (m, k) of the ``k`` points nearest to each query, ascending.

    Without ``queries`` each point is asked for its nearest *others*: the point itself is left out. Where there are
    fewer than ``k`` (others), ``k`` is what there is. Equal distances come in no stated order, but always in the
    same one for the same input.

    >>> distance, index = nearest(np.array([[0.0, 0, 0], [1, 0, 0], [3, 0, 0]]), 1)
    >>> distance[:, 0].tolist(), index[:, 0].tolist()
    ([1.0, 1.0, 2.0], [1, 0, 1])
    """
    n = len(points)
    own = queries is None
    k = min(k, n - 1 if own else n)
    asked = points if queries is None else queries
    if k <= 0:
        return np.empty((len(asked), 0)), np.empty((len(asked), 0), np.int64)
    # Points sorted along a curve halve the time of a query: the tree's leaves are then in the cache.
    order = curve_order(points)
    tree = cKDTree(points[order], balanced_tree=False, compact_nodes=False)
    turn = order if queries is None else curve_order(asked)
    distance, index = tree.query(asked[turn], k=np.arange(1, k + 1 + int(own)))
    if own:
        distance, index = _without_self(distance, index)
    found, where = np.empty_like(distance), np.empty(index.shape, np.int64)
    found[turn], where[turn] = distance, order[index]
    return found, where


def _without_self(distance: FloatArray, index: IndexArray) -> tuple[FloatArray, IndexArray]:
    # Among points at one place the query's own number need not come first.
    n, width = index.shape
    if np.array_equal(index[:, 0], np.arange(n)):
        return distance[:, 1:], index[:, 1:]
    is_self = index == np.arange(n)[:, None]
    column = np.where(is_self.any(axis=1), is_self.argmax(axis=1), width - 1)
    keep = np.arange(width)[None, :] != column[:, None]
    return distance[keep].reshape(n, width - 1), index[keep].reshape(n, width - 1)


def median_spacing(points: FloatArray, sample: int = 20_000) -> float:
    """Median distance from a point to its nearest other point, from at most ``sample`` of them, evenly drawn.

    Points at the very same place count as one.

    >>> round(median_spacing(np.stack([np.arange(9.0), np.zeros(9), np.zeros(9)], axis=1)), 6)
    1.0
    """
    if len(points) < 2:
        return 0.0
    step = -(-len(points) // sample)
    asked = points[::step]
    distance, _ = nearest(points, 9, asked)
    apart = np.where(distance > 0, distance, np.inf).min(axis=1)
    apart = apart[np.isfinite(apart)]
    return float(np.median(apart)) if len(apart) else 0.0


def sample_areas(distance: FloatArray) -> FloatArray:
    """Area (n,) of surface that each sample stands for, from distances (n, k) to its k nearest others.

    On an evenly sampled surface of density rho, the k-th neighbour of a point lies at r with k = pi rho r^2.
    """
    k = distance.shape[1]
    area: FloatArray = np.pi * distance[:, -1] ** 2 / k
    return area
