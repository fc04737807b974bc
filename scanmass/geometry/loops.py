"""Regions of a closed mesh and the rims that part them from the rest."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from scanmass.geometry.edges import half_edges

FaceArray = npt.NDArray[np.int64]
Mask = npt.NDArray[np.bool_]


def rim_edges(faces: FaceArray, region: Mask) -> FaceArray:
    """Half-edges (k, 2) of the faces of ``region`` (m,) whose other face is outside it, as the region runs them.

    >>> tetrahedron = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
    >>> rim_edges(tetrahedron, np.array([True, False, False, False])).tolist()
    [[0, 2], [2, 1], [1, 0]]
    """
    edges = half_edges(faces[region])
    size = int(faces.max(initial=0)) + 1
    twins = np.isin(edges[:, 1] * size + edges[:, 0], edges[:, 0] * size + edges[:, 1])
    rim: FaceArray = edges[~twins]
    return rim


def untangled(faces: FaceArray, region: Mask) -> Mask:
    """``region`` grown until its rims are simple loops: no vertex is passed twice.

    Where two rims touch at a vertex, the faces round that vertex join the region.
    """
    grown = region.copy()
    while True:
        starts, passes = np.unique(rim_edges(faces, grown)[:, 0], return_counts=True)
        twice = starts[passes > 1]
        if len(twice) == 0:
            return grown
        grown |= np.isin(faces, twice).any(axis=1)


def area_vector(vertices: npt.NDArray[np.float64], faces: FaceArray) -> npt.NDArray[np.float64]:
    """Sum (3,) of face areas times normals: it depends on the rim of the faces alone."""
    a, b, c = vertices[faces[:, 0]], vertices[faces[:, 1]], vertices[faces[:, 2]]
    total: npt.NDArray[np.float64] = 0.5 * np.cross(b - a, c - a).sum(axis=0)
    return total
