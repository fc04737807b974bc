"""Exact volume and surface moments of triangle meshes.

A closed mesh is the signed sum of the tetrahedra from one apex to its faces; polynomials of degree two over a
tetrahedron are integrated exactly (Lee & Requicha 1982; Mirtich 1996 gives the equivalent face integrals).
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from numba import njit, prange

from scanmass.geometry.moments import monomials, translated

FloatArray = npt.NDArray[np.float64]
FaceArray = npt.NDArray[np.int64]


# Sums in runs of fixed length keep the rounding of a million faces near that of a thousand, and make the answer
# the same for any number of threads.
_RUN = 4096


@njit(cache=True, parallel=True)
def _tetrahedron_sums(vertices, faces, apex):  # type: ignore[no-untyped-def]
    m = faces.shape[0]
    runs = (m + _RUN - 1) // _RUN
    parts = np.zeros((runs, 10))
    for r in prange(runs):
        part = np.zeros(10)
        for k in range(r * _RUN, min((r + 1) * _RUN, m)):
            i, j, h = faces[k, 0], faces[k, 1], faces[k, 2]
            a0, a1, a2 = vertices[i, 0] - apex[0], vertices[i, 1] - apex[1], vertices[i, 2] - apex[2]
            b0, b1, b2 = vertices[j, 0] - apex[0], vertices[j, 1] - apex[1], vertices[j, 2] - apex[2]
            c0, c1, c2 = vertices[h, 0] - apex[0], vertices[h, 1] - apex[1], vertices[h, 2] - apex[2]
            det = a0 * (b1 * c2 - b2 * c1) + a1 * (b2 * c0 - b0 * c2) + a2 * (b0 * c1 - b1 * c0)
            s0, s1, s2 = a0 + b0 + c0, a1 + b1 + c1, a2 + b2 + c2
            part[0] += det
            part[1] += det * s0
            part[2] += det * s1
            part[3] += det * s2
            part[4] += det * (a0 * a0 + b0 * b0 + c0 * c0 + s0 * s0)
            part[5] += det * (a1 * a1 + b1 * b1 + c1 * c1 + s1 * s1)
            part[6] += det * (a2 * a2 + b2 * b2 + c2 * c2 + s2 * s2)
            part[7] += det * (a0 * a1 + b0 * b1 + c0 * c1 + s0 * s1)
            part[8] += det * (a1 * a2 + b1 * b2 + c1 * c2 + s1 * s2)
            part[9] += det * (a2 * a0 + b2 * b0 + c2 * c0 + s2 * s0)
        parts[r] = part
    return parts


def polyhedron_moments(vertices: FloatArray, faces: FaceArray, apex: FloatArray | None = None) -> FloatArray:
    """Ten volume moments of a closed mesh about the origin, in the order of :mod:`.moments`.

    Parameters
    ----------
    vertices : (n, 3), metres
    faces : (m, 3), counter-clockwise seen from outside; reversed faces count negative, so a cavity is a shell
        of faces that point into it. Where an edge lacks its second face the answer depends on ``apex``:
        check with :func:`scanmass.geometry.edges.count_edges` first.
    apex : (3,), the tetrahedra's common corner; the mean of the vertices where None.

    Notes
    -----
    Tetrahedron (0, a, b, c) with d = a.(b x c): volume d/6, first moments d/24 (a + b + c),
    second d/120 (a a^T + b b^T + c c^T + s s^T), s = a + b + c.

    >>> v = np.array([[0, 0, 0], [6, 0, 0], [0, 3, 0], [0, 0, 2]], dtype=float)
    >>> f = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
    >>> polyhedron_moments(v, f)[:4].round(12).tolist()
    [6.0, 9.0, 4.5, 3.0]
    """
    points = np.ascontiguousarray(vertices, dtype=np.float64)
    if len(faces) == 0:
        return np.zeros(10)
    corner = points.mean(axis=0) if apex is None else np.asarray(apex, dtype=np.float64)
    sums: FloatArray = _tetrahedron_sums(points, np.ascontiguousarray(faces, dtype=np.int64), corner).sum(axis=0)
    sums /= np.array([6, 24, 24, 24, 120, 120, 120, 120, 120, 120])
    return translated(sums, corner)


def face_areas(vertices: FloatArray, faces: FaceArray) -> tuple[FloatArray, FloatArray]:
    """Areas (m,) and unit normals (m, 3) of triangles; the normal of a face without area is zero."""
    a, b, c = vertices[faces[:, 0]], vertices[faces[:, 1]], vertices[faces[:, 2]]
    cross = np.cross(b - a, c - a)
    length = np.linalg.norm(cross, axis=1)
    normals = cross / np.where(length > 0, length, 1.0)[:, None]
    return 0.5 * length, normals


def face_moments(vertices: FloatArray, faces: FaceArray) -> FloatArray:
    """Surface integrals (m, 10) of the ten monomials over each triangle, about the origin.

    These are the derivatives of the volume moments when a face moves outward along its normal: the three-point
    rule on edge midpoints is exact for degree two.

    >>> v = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0]], dtype=float)
    >>> face_moments(v, np.array([[0, 1, 2]]))[0, [0, 1, 4]].round(6).tolist()
    [0.5, 0.166667, 0.083333]
    """
    area, _ = face_areas(vertices, faces)
    a, b, c = vertices[faces[:, 0]], vertices[faces[:, 1]], vertices[faces[:, 2]]
    middles = (0.5 * (a + b), 0.5 * (b + c), 0.5 * (c + a))
    return area[:, None] / 3.0 * sum(monomials(m) for m in middles)
