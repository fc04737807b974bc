"""Harmonic maps: values at free vertices of a mesh that are the mean of their neighbours'."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy.sparse import coo_matrix, csr_matrix
from scipy.sparse.linalg import splu

FloatArray = npt.NDArray[np.float64]
FaceArray = npt.NDArray[np.int64]


def neighbour_matrix(faces: FaceArray, n: int) -> csr_matrix:
    """Ones (n, n) where two vertices share an edge of faces (m, 3)."""
    rows = faces[:, [0, 1, 2, 1, 2, 0]].ravel()
    columns = faces[:, [1, 2, 0, 0, 1, 2]].ravel()
    matrix = coo_matrix((np.ones(len(rows)), (rows, columns)), shape=(n, n)).tocsr()
    matrix.data[:] = 1.0
    return matrix


def harmonic(faces: FaceArray, values: FloatArray, fixed: npt.NDArray[np.bool_]) -> FloatArray:
    """``values`` (n, k) with every vertex that is not ``fixed`` (n,) set to the mean of its neighbours.

    Positions mapped so from a rim make a membrane without foldovers where the rim is convex (Tutte 1963).
    Vertices that no chain of edges joins to a fixed one, or without faces, keep their values.

    >>> fan = np.array([[0, 1, 4], [1, 2, 4], [2, 3, 4], [3, 0, 4]])
    >>> rim = np.array([[0.0, 0], [1, 0], [1, 1], [0, 1], [7, 7]])
    >>> harmonic(fan, rim, np.array([True, True, True, True, False]))[4].tolist()
    [0.5, 0.5]
    """
    # Only the vertices of these faces: a small hole in a large mesh costs what the hole does.
    used, compact = np.unique(faces, return_inverse=True)
    faces, held = compact.reshape(-1, 3).astype(np.int64), fixed[used]
    result = values.copy()
    ring = neighbour_matrix(faces, len(used))
    moves = ~held & _reached(ring, held)
    free = np.flatnonzero(moves)
    if len(free) == 0:
        return result
    rows = ring[free]
    degree = np.asarray(rows.sum(axis=1)).ravel()
    laplacian = csr_matrix((degree, (np.arange(len(free)), np.arange(len(free))))) - rows[:, free]
    known = np.ascontiguousarray(rows[:, ~moves] @ values[used[~moves]])
    result[used[free]] = splu(laplacian.tocsc()).solve(known)
    return result


def _reached(ring: csr_matrix, fixed: npt.NDArray[np.bool_]) -> npt.NDArray[np.bool_]:
    from scipy.sparse.csgraph import connected_components

    _, label = connected_components(ring, directed=False)
    anchored = np.zeros(label.max(initial=0) + 1, bool)
    anchored[label[fixed]] = True
    reached: npt.NDArray[np.bool_] = anchored[label]
    return reached
