"""Signed distances of points to a triangle mesh, and evenly spread seeds."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from numba import njit
from scipy.spatial import cKDTree

from scanmass.geometry.polyhedron import face_areas
from scanmass.geometry.triangles import between, closest, dot, mixed, row

FloatArray = npt.NDArray[np.float64]
IndexArray = npt.NDArray[np.int64]

_LARGE = 3.0
"""A triangle this many times longer than the median one is searched for in a tree of its own."""


@njit(cache=True)
def _farthest_seeds(features, count):  # type: ignore[no-untyped-def]
    n, width = features.shape
    seeds = np.empty(count, np.int64)
    nearest = np.full(n, np.inf)
    at = 0
    for s in range(count):
        seeds[s] = at
        best, far = -1.0, 0
        for i in range(n):
            d = 0.0
            for k in range(width):
                d += (features[i, k] - features[at, k]) ** 2
            if d < nearest[i]:
                nearest[i] = d
            if nearest[i] > best:
                best, far = nearest[i], i
        if best <= 0.0:
            return seeds[: s + 1]
        at = far
    return seeds


def farthest_seeds(features: FloatArray, count: int) -> IndexArray:
    """Rows of ``features`` (n, k), each the farthest from those before it, the first being row 0; at most ``count``.

    >>> farthest_seeds(np.array([[0.0], [1.0], [10.0], [4.0]]), 3).tolist()
    [0, 2, 3]
    """
    seeds: IndexArray = _farthest_seeds(np.ascontiguousarray(features), min(count, len(features)))
    return seeds


@njit(cache=True)
def _nearest_of(points, candidates, vertices, faces, normals):  # type: ignore[no-untyped-def]
    n = points.shape[0]
    signed = np.zeros(n)
    chosen = np.full(n, -1, np.int64)
    for i in range(n):
        p = row(points, i)
        best, value = np.inf, 0.0
        for f in candidates[i]:
            if f < 0:
                continue
            a, b, c = row(vertices, faces[f, 0]), row(vertices, faces[f, 1]), row(vertices, faces[f, 2])
            away = between(mixed(closest(p, a, b, c), a, b, c), p)
            square = dot(away, away)
            along = dot(away, row(normals, f))
            # Faces that share the nearest edge tie: the one the point faces most squarely tells the side.
            tied = square <= best * (1 + 1e-9) and square >= best * (1 - 1e-9)
            if square < best * (1 - 1e-9) or (tied and abs(along) > abs(value)):
                best, value, chosen[i] = square, along, f
        signed[i] = value
    return signed, chosen


def split_long(vertices: FloatArray, faces: IndexArray, longest: float) -> tuple[FloatArray, IndexArray, IndexArray]:
    """The same surface with no edge over ``longest``: vertices, faces, and the face each piece came from.

    Halves the longest edge of each triangle again and again; neighbours need not match, so it is for sums over
    faces and for searching, not for meshes.
    """
    owner = np.arange(len(faces))
    points, pieces = vertices, faces
    done_faces: list[IndexArray] = []
    done_owner: list[IndexArray] = []
    while len(pieces):
        corners = points[pieces]
        length = np.linalg.norm(np.roll(corners, -1, axis=1) - corners, axis=2)
        which = length.argmax(axis=1)
        over = length.max(axis=1) > longest
        done_faces.append(pieces[~over])
        done_owner.append(owner[~over])
        turn = (which[over][:, None] + np.arange(3)) % 3
        a, b, c = np.take_along_axis(pieces[over], turn, axis=1).T
        middle = len(points) + np.arange(len(a))
        points = np.concatenate([points, 0.5 * (points[a] + points[b])])
        pieces = np.concatenate([np.stack([a, middle, c], 1), np.stack([middle, b, c], 1)])
        owner = np.tile(owner[over], 2)
    return points, np.concatenate(done_faces), np.concatenate(done_owner)


def signed_distances(points: FloatArray, vertices: FloatArray, faces: IndexArray) -> tuple[FloatArray, IndexArray]:
    """Distance of points (n, 3) from a mesh along its outward normal, (n,), and the nearest face of each, (n,).

    The nearest triangle is sought among the six whose centres are nearest, with long triangles in a tree of their
    own: exact for meshes whose triangles are alike in size nearby, else right to a fraction of an edge.
    A point beyond a convex edge counts its distance along the normal of the face it faces most squarely.
    """
    corners = vertices[faces]
    centres = corners.mean(axis=1)
    reach = np.sqrt(((corners - centres[:, None]) ** 2).sum(axis=2).max(axis=1))
    large = reach > _LARGE * np.median(reach)
    # Neighbouring points in turn keep the tree's nodes in cache: half the time.
    step = max(np.ptp(points, axis=0).max() / 64.0, 1e-300)
    order = np.lexsort(np.floor((points - points.min(axis=0)) / step).T)
    candidates = np.concatenate(
        [_candidates(points[order], centres, np.flatnonzero(part)) for part in (~large, large) if part.any()], axis=1
    )
    _, normals = face_areas(vertices, faces)
    signed, face = _nearest_of(points[order], candidates, vertices, faces, normals)
    distances, nearest = np.empty(len(points)), np.empty(len(points), np.int64)
    distances[order], nearest[order] = signed, face
    return distances, nearest


def _candidates(points: FloatArray, centres: FloatArray, faces: IndexArray) -> IndexArray:
    k = min(6, len(faces))
    tree = cKDTree(centres[faces], balanced_tree=False, compact_nodes=False)
    _, found = tree.query(points, k=k)
    result: IndexArray = faces[np.asarray(found).reshape(len(points), k)]
    return result
