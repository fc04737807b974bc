"""The pieces a cloud falls into: the object, parts of it that were seen apart, clutter, or a second object."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components
from scipy.spatial import ConvexHull, Delaunay, QhullError, cKDTree

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
BoolArray = npt.NDArray[np.bool_]

CRUMB = 20
"""Pieces with fewer samples are strays, not things."""
ENCLOSED = 0.5
"""Share of a piece's samples within the object's convex hull that makes it a part of the object."""
OPEN = 0.6
"""Share of straight lines from one piece to the other that meet nothing, above which the two face each other open."""
SIMILAR_AREA, SIMILAR_SIZE = 0.3, 0.5
"""A piece with this share of the object's area and of its size is another object of similar size."""


def piece_labels(points: FloatArray, cell: float) -> tuple[int, IntArray]:
    """Number of pieces and the piece of each point (n,): cells of edge ``cell`` that touch, corners included, join.

    >>> piece_labels(np.array([[0.0, 0, 0], [1.5, 0, 0], [9.0, 0, 0]]), 1.0)
    (2, array([0, 0, 1]))
    """
    place = np.floor((points - points.min(axis=0)) / cell).astype(np.int64)
    cells, which = np.unique(place, axis=0, return_inverse=True)
    which = which.reshape(-1)
    pairs = cKDTree(cells).query_pairs(1.8, output_type="ndarray")
    graph = coo_matrix((np.ones(len(pairs), np.int8), (pairs[:, 0], pairs[:, 1])), shape=(len(cells),) * 2)
    n, labels = connected_components(graph, directed=False)
    return int(n), labels[which].astype(np.int64)


def largest_piece(points: FloatArray, cell: float) -> BoolArray:
    """The points (n,) of the piece with the most cells."""
    if len(points) == 0:
        return np.zeros(0, np.bool_)
    n, labels = piece_labels(points, cell)
    largest: BoolArray = labels == int(np.argmax(_cells_of(points, labels, n, cell)))
    return largest


def _cells_of(points: FloatArray, labels: IntArray, n: int, cell: float) -> IntArray:
    """Cells a piece fills: its area, whatever the density it was sampled at."""
    place = np.floor((points - points.min(axis=0)) / cell).astype(np.int64)
    rows = np.unique(np.column_stack([place, labels]), axis=0)
    return np.bincount(rows[:, 3], minlength=n)


@dataclass(frozen=True)
class Pieces:
    """Masks (n,) over a cloud: the ``object``, ``clutter``, and ``strays``; sizes in metres of ``rivals``.

    ``rivals``: other pieces of similar size that are no part of the object; they are in no mask.
    ``joined``: pieces apart from the main one that were kept as parts of the object.
    """

    object: BoolArray
    clutter: BoolArray
    strays: BoolArray
    rivals: tuple[float, ...]
    size: float
    joined: int


def sort_pieces(points: FloatArray, cell: float, rng: np.random.Generator) -> Pieces:
    """Tell the object from what else the cloud (n, 3) holds.

    The piece that fills most cells is the object. Another piece belongs to it when half of it lies in the object's
    convex hull (an inner wall, a part behind an occlusion), or when the two are open to each other: most straight
    lines from one to the other meet no third sample, as from the front to the back of a body whose sides were not
    seen. Of two bodies that each are closed, only a quarter of such lines are free. What is left is clutter, strays
    (fewer than 20 samples), or rivals.
    """
    n, labels = piece_labels(points, cell)
    filled = _cells_of(points, labels, n, cell)
    samples = np.bincount(labels, minlength=n)
    order = np.argsort(-filled, kind="stable")
    body = labels == order[0]
    size = _size(points[body])
    masks = {name: np.zeros(len(points), np.bool_) for name in ("clutter", "strays")}
    rivals: list[float] = []
    joined = 0
    for piece in order[1:]:
        own = labels == piece
        if samples[piece] < CRUMB:
            masks["strays"] |= own
            continue
        if _in_hull(points[own], points[body]).mean() >= ENCLOSED or (
            filled[piece] >= 0.05 * filled[order[0]] and _open_to_each_other(points, body, own, cell, rng)
        ):
            body = body | own
            joined += 1
        elif filled[piece] >= SIMILAR_AREA * filled[order[0]] and _size(points[own]) >= SIMILAR_SIZE * size:
            rivals.append(_size(points[own]))
        else:
            masks["clutter"] |= own
    return Pieces(body, masks["clutter"], masks["strays"], tuple(rivals), size, joined)


def _size(points: FloatArray) -> float:
    return float(np.ptp(points, axis=0).max())


def _in_hull(points: FloatArray, body: FloatArray) -> BoolArray:
    try:
        corners = body[ConvexHull(body).vertices]
        inside: BoolArray = Delaunay(corners).find_simplex(points) >= 0
    except QhullError:
        return np.zeros(len(points), np.bool_)
    return inside


def _open_to_each_other(
    points: FloatArray, body: BoolArray, piece: BoolArray, cell: float, rng: np.random.Generator, lines: int = 400
) -> bool:
    """Whether most straight lines between the two meet no sample on their way.

    Lines between any two samples, or else from samples of each to the nearest of the other: those between the faces
    of a thin plate, which any others would graze.
    """
    first, second = points[body], points[piece]
    tree = cKDTree(np.concatenate([first, second]))
    a, b = first[rng.choice(len(first), lines)], second[rng.choice(len(second), lines)]
    if _clear_share(tree, a, b, cell) > OPEN:
        return True
    across = (
        _clear_share(tree, a, second[cKDTree(second).query(a)[1]], cell),
        _clear_share(tree, b, first[cKDTree(first).query(b)[1]], cell),
    )
    return min(across) > OPEN


def _clear_share(tree: cKDTree, start: FloatArray, end: FloatArray, cell: float) -> float:
    step = end - start
    length = np.linalg.norm(step, axis=1)
    clear = np.ones(len(start), np.bool_)
    # Ends are left out: two and a half cells, the samples' own sheets.
    for share in np.linspace(0.0, 1.0, 65):
        along = share * length
        free = (along > 2.5 * cell) & (length - along > 2.5 * cell) & clear
        if free.any():
            near, _ = tree.query(start[free] + share * step[free], distance_upper_bound=0.5 * cell)
            clear[np.flatnonzero(free)[np.isfinite(near)]] = False
    return float(clear.mean())
