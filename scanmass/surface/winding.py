"""Consistent faces: duplicates out, windings that agree, and what lies inside what."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from numba import njit
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import breadth_first_order, connected_components

from scanmass.geometry.edges import half_edges
from scanmass.surface.mesh import FaceArray, FloatArray


def without_duplicates(faces: FaceArray) -> FaceArray:
    """Faces (m, 3) with those on the same three vertices made one; a face and its reverse cancel.

    >>> without_duplicates(np.array([[0, 1, 2], [1, 2, 0], [3, 4, 5], [3, 5, 4]])).tolist()
    [[0, 1, 2]]
    """
    key = np.sort(faces, axis=1)
    rolled = np.take_along_axis(faces, (np.argmin(faces, axis=1)[:, None] + np.arange(3)) % 3, axis=1)
    sign = np.where(rolled[:, 1] < rolled[:, 2], 1, -1)
    _, first, which = np.unique(key, axis=0, return_index=True, return_inverse=True)
    which = which.reshape(-1)
    net = np.sign(np.bincount(which, sign, minlength=len(first)))
    agreeing = np.flatnonzero(sign == net[which])
    _, chosen = np.unique(which[agreeing], return_index=True)
    kept: FaceArray = faces[np.sort(agreeing[chosen])]
    return kept


def clashes(faces: FaceArray) -> int:
    """Number of edges with exactly two faces of faces (m, 3) that disagree about which side is outside.

    >>> clashes(np.array([[0, 1, 2], [1, 2, 3]])), clashes(np.array([[0, 1, 2], [2, 1, 3]]))
    (1, 0)
    """
    return int(_pairs(faces)[2].sum())


def _pairs(faces: FaceArray) -> tuple[FaceArray, FaceArray, npt.NDArray[np.bool_]]:
    """The two faces of each edge that has just two, and whether they disagree."""
    edges = half_edges(faces)
    size = int(faces.max(initial=0)) + 1
    key = edges.min(axis=1) * size + edges.max(axis=1)
    order = np.argsort(key, kind="stable")
    _, first, total = np.unique(key[order], return_index=True, return_counts=True)
    pair = first[total == 2]
    one, two = order[pair], order[pair + 1]
    return one // 3, two // 3, edges[one, 0] == edges[two, 0]


def oriented(faces: FaceArray) -> FaceArray:
    """Faces (m, 3) turned so that those joined by an edge with exactly two faces agree, as far as that is possible.

    In each patch so joined the side of most of its faces wins. A Moebius strip stays at odds somewhere.
    """
    m = len(faces)
    left, right, clash = _pairs(faces)
    graph = coo_matrix((np.where(clash, 2, 1), (left, right)), shape=(m, m)).tocsr()
    _, label = connected_components(graph, directed=False)
    flip = np.zeros(m, bool)
    relation = dict(zip(zip(left.tolist(), right.tolist(), strict=True), clash.tolist(), strict=True))
    for root in np.unique(label, return_index=True)[1]:
        reached, parent = breadth_first_order(graph, int(root), directed=False)
        for face in reached[1:].tolist():
            before = int(parent[face])
            edge = (before, face) if (before, face) in relation else (face, before)
            flip[face] = flip[before] ^ relation[edge]
        if flip[reached].mean() > 0.5:
            flip[reached] = ~flip[reached]
    return np.where(flip[:, None], faces[:, ::-1], faces)


@njit(cache=True)
def _solid_angles(points, corners):  # type: ignore[no-untyped-def]
    result = np.zeros(len(points))
    for i in range(len(points)):
        total = 0.0
        for k in range(len(corners)):
            a0, a1, a2 = (
                corners[k, 0, 0] - points[i, 0],
                corners[k, 0, 1] - points[i, 1],
                corners[k, 0, 2] - points[i, 2],
            )
            b0, b1, b2 = (
                corners[k, 1, 0] - points[i, 0],
                corners[k, 1, 1] - points[i, 1],
                corners[k, 1, 2] - points[i, 2],
            )
            c0, c1, c2 = (
                corners[k, 2, 0] - points[i, 0],
                corners[k, 2, 1] - points[i, 1],
                corners[k, 2, 2] - points[i, 2],
            )
            a = np.sqrt(a0 * a0 + a1 * a1 + a2 * a2)
            b = np.sqrt(b0 * b0 + b1 * b1 + b2 * b2)
            c = np.sqrt(c0 * c0 + c1 * c1 + c2 * c2)
            det = a0 * (b1 * c2 - b2 * c1) + a1 * (b2 * c0 - b0 * c2) + a2 * (b0 * c1 - b1 * c0)
            ab = a0 * b0 + a1 * b1 + a2 * b2
            bc = b0 * c0 + b1 * c1 + b2 * c2
            ca = c0 * a0 + c1 * a1 + c2 * a2
            total += 2.0 * np.arctan2(det, a * b * c + ab * c + bc * a + ca * b)
        result[i] = total
    return result


def winding_numbers(points: FloatArray, vertices: FloatArray, faces: FaceArray) -> FloatArray:
    """How often a mesh winds round each of points (k, 3): 1 inside, 0 outside, negative inside reversed shells.

    Sum of solid angles over 4 pi (van Oosterom & Strackee 1983; Jacobson et al. 2013).

    >>> v = np.array([[0, 0, 0], [6, 0, 0], [0, 3, 0], [0, 0, 2]], dtype=float)
    >>> f = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
    >>> winding_numbers(np.array([[1.0, 0.5, 0.5], [9.0, 9.0, 9.0]]), v, f).round(9).__abs__().tolist()
    [1.0, 0.0]
    """
    result: FloatArray = _solid_angles(np.ascontiguousarray(points), np.ascontiguousarray(vertices[faces])) / (
        4 * np.pi
    )
    return result + 0.0
