"""Edges of a triangle mesh: is it closed, into which shells does it fall, where are its rims."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components

FloatArray = npt.NDArray[np.float64]
FaceArray = npt.NDArray[np.int64]


@dataclass(frozen=True)
class EdgeCount:
    """``open``: edges with one face. ``crowded``: with three or more. ``clashing``: faces that disagree."""

    open: int
    crowded: int
    clashing: int

    @property
    def closed(self) -> bool:
        """Every edge has exactly two faces that agree."""
        return self.open == 0 and self.crowded == 0 and self.clashing == 0

    @property
    def balanced(self) -> bool:
        """Every edge is run through as often one way as the other, so volume integrals are well defined."""
        return self.open == 0 and self.clashing == 0


def half_edges(faces: FaceArray) -> FaceArray:
    """Directed edges (3 m, 2) of faces (m, 3); row 3 k + i starts at corner i of face k."""
    return np.stack([faces, np.roll(faces, -1, axis=1)], axis=2).reshape(-1, 2)


def _edge_keys(faces: FaceArray) -> tuple[FaceArray, npt.NDArray[np.bool_]]:
    edges = half_edges(faces)
    forward = edges[:, 0] < edges[:, 1]
    low, high = edges.min(axis=1), edges.max(axis=1)
    return low * (int(faces.max(initial=0)) + 1) + high, forward


def count_edges(faces: FaceArray) -> EdgeCount:
    """What is wrong with the edges of faces (m, 3).

    >>> tetrahedron = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
    >>> count_edges(tetrahedron).closed, count_edges(tetrahedron[:3]).open
    (True, 3)
    """
    keys, forward = _edge_keys(faces)
    _, which, total = np.unique(keys, return_inverse=True, return_counts=True)
    balance = np.bincount(which, np.where(forward, 1, -1), minlength=len(total))
    odd = total == 1
    return EdgeCount(int(odd.sum()), int((total > 2).sum()), int(((balance != 0) & ~odd).sum()))


def shell_labels(faces: FaceArray) -> tuple[int, npt.NDArray[np.int64]]:
    """Number of shells and the shell of each face (m,): faces joined by a shared edge belong together."""
    m = len(faces)
    keys, _ = _edge_keys(faces)
    order = np.argsort(keys, kind="stable")
    same = keys[order][1:] == keys[order][:-1]
    owner = order // 3
    left, right = owner[:-1][same], owner[1:][same]
    graph = coo_matrix((np.ones(len(left), np.int8), (left, right)), shape=(m, m))
    n, labels = connected_components(graph, directed=False)
    return int(n), labels.astype(np.int64)


def boundary_loops(faces: FaceArray) -> tuple[list[npt.NDArray[np.int64]], bool]:
    """Closed rims as arrays of vertex numbers, in the direction of the missing faces' reverse half-edges.

    Each rim runs along the half-edges of existing faces. The second value is False where the rims do not part
    into simple loops (a vertex with more than one way out).
    """
    edges = half_edges(faces)
    keys, _ = _edge_keys(faces)
    _, first, total = np.unique(keys, return_index=True, return_counts=True)
    rim = edges[first[total == 1]]
    following = dict(zip(rim[:, 0].tolist(), rim[:, 1].tolist(), strict=True))
    simple = len(following) == len(rim) and set(following) == set(following.values())
    if not simple:
        return [], len(rim) == 0
    loops: list[npt.NDArray[np.int64]] = []
    while following:
        start, at = next(iter(following.items()))
        loop = [start]
        del following[start]
        while at != start:
            loop.append(at)
            at = following.pop(at)
        loops.append(np.array(loop, np.int64))
    return loops, True


def welded(vertices: FloatArray, faces: FaceArray, tolerance: float = 0.0) -> tuple[FloatArray, FaceArray]:
    """The mesh with vertices within ``tolerance`` (equal, at 0) made one, and faces that collapse by it dropped.

    Vertices are matched on a grid of ``tolerance``; unused vertices go.
    """
    keys = vertices if tolerance == 0 else np.round(vertices / tolerance)
    _, first, which = np.unique(keys + 0.0, axis=0, return_index=True, return_inverse=True)
    joined = which.reshape(-1)[faces]
    distinct = (joined[:, 0] != joined[:, 1]) & (joined[:, 1] != joined[:, 2]) & (joined[:, 2] != joined[:, 0])
    joined = joined[distinct]
    used, compact = np.unique(joined, return_inverse=True)
    return vertices[first][used], compact.reshape(-1, 3).astype(np.int64)


def parted(vertices: FloatArray, faces: FaceArray) -> tuple[FloatArray, FaceArray]:
    """A balanced mesh with every edge shared by exactly two faces: where sheets touch, corners are doubled.

    Faces stay where they are, so areas and volumes do not change. At an edge of four faces or more each face that
    runs along it one way is joined to one that runs the other way; corners that no joined edge holds together
    become vertices of their own.

    Raises
    ------
    ValueError
        If the mesh is not balanced, see :class:`EdgeCount`.

    >>> bow_tie = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
    >>> twins = np.concatenate([bow_tie, np.array([4, 5, 0, 1])[bow_tie]])  # two tetrahedra on one common edge
    >>> count_edges(twins).crowded, count_edges(parted(np.eye(6, 3), twins)[1]).closed
    (1, True)
    """
    if not count_edges(faces).balanced:
        raise ValueError("only a mesh whose edges are run through as often one way as the other can be parted")
    keys, forward = _edge_keys(faces)
    there = np.flatnonzero(forward)[np.argsort(keys[forward], kind="stable")]
    back = np.flatnonzero(~forward)[np.argsort(keys[~forward], kind="stable")]
    start, end = np.arange(len(keys)), np.arange(len(keys)).reshape(-1, 3)[:, [1, 2, 0]].ravel()
    left = np.concatenate([start[there], end[there]])
    right = np.concatenate([end[back], start[back]])
    graph = coo_matrix((np.ones(len(left), np.int8), (left, right)), shape=(len(keys), len(keys)))
    _, corner = connected_components(graph, directed=False)
    _, first = np.unique(corner, return_index=True)
    return vertices[faces.ravel()[first]], corner.reshape(-1, 3).astype(np.int64)
