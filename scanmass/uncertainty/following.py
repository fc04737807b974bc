"""How closely the surface follows each view, and residuals without that."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from numba import njit
from scipy.sparse import csr_matrix

from scanmass.cloud.cloud import Cloud
from scanmass.geometry.triangles import closest, row
from scanmass.surface.mesh import FaceArray
from scanmass.surface.refine import ROUNDS, mean_pulls, ring_of, vertex_areas

FloatArray = npt.NDArray[np.float64]
IndexArray = npt.NDArray[np.int64]

_OWN = 0.6
"""Where the surface follows a view by more (0: as far as its share, 1: wholly), its residuals there say nothing."""
_FAINT = 0.05
"""Differences between views of which less than this share is left are not raised again."""


def weights_of_views(
    vertices: FloatArray,
    faces: FaceArray,
    cloud: Cloud,
    points: FloatArray,
    face: IndexArray,
) -> FloatArray:
    """Weight (n, V) that each view has in the surface at each sample ``points`` (n, 3) on its nearest ``face`` (n,).

    The refinement is run on the views' marks instead of on distances: mark 1 on the samples of one view, 0 on the
    others. What the surface then holds of a view's mark, it holds of that view's error.
    """
    n, views = len(points), len(cloud.view_names)
    corners = _corner_weights(points, vertices, faces, face)
    at = csr_matrix((corners.ravel(), faces[face].ravel(), 3 * np.arange(n + 1)), shape=(n, len(vertices)))
    marks = np.zeros((n, views))
    marks[np.arange(n), cloud.view] = 1.0
    weight = cloud.count.astype(np.float64)
    ring, area = ring_of(faces, len(vertices)), vertex_areas(vertices, faces)
    total, seen = at.T @ weight, at.T @ np.ones(n)
    held = np.zeros((len(vertices), views))
    # The reconstruction itself is one more smoothing of the same kind.
    for _ in range(ROUNDS + 1):
        held = held + mean_pulls(ring, area, at.T @ (weight[:, None] * (marks - at @ held)), total, seen)
    result: FloatArray = at @ held
    return result


def unfollowed(residuals: FloatArray, counts: FloatArray, weights: FloatArray) -> FloatArray:
    """Residuals (J, V) against the mean of the views by their shares, from those to a surface that follows them.

    Parameters
    ----------
    residuals : (J, V), NaN where unseen
    counts : (J, V), scan points behind them
    weights : (J, V, V), mean weight of the last view in the surface at the samples of the middle one

    Notes
    -----
    With e the views' errors, r = (I - A) e for the surface at hand and u = (I - 1 a^T) e for shares a. As A's rows
    sum to one, (I - A) u = (I - A) e: u solves (I - A + 1 a^T) u = r - 1 (a . r). NaN where A follows a view so
    closely that nothing is left of it.
    """
    seen = np.isfinite(residuals)
    own = np.einsum("jvv->jv", weights)
    share = shares_of(np.where(seen, counts, 0.0))
    seen &= own - share <= _OWN * (1.0 - share)
    share, about = against_mean(np.where(seen, residuals, np.nan), counts)
    both = seen[:, :, None] & seen[:, None, :]
    a = np.where(both, weights, 0.0)
    total = a.sum(axis=2, keepdims=True)
    a = np.divide(a, total, out=np.zeros_like(a), where=total > 0)
    identity = np.eye(residuals.shape[1])
    system = np.where(both, identity - a + share[:, None, :], identity)
    # Groups of views that follow one another and no other leave a direction that nothing tells of.
    solved: FloatArray = (np.linalg.pinv(system, rcond=_FAINT) @ about[:, :, None])[:, :, 0]
    return np.where(seen, solved, np.nan)


def shares_of(counts: FloatArray) -> FloatArray:
    """(J, V): each view's share of its patch's points; zero where no view has any."""
    total = counts.sum(axis=1, keepdims=True)
    result: FloatArray = np.divide(counts, total, out=np.zeros_like(counts), where=total > 0)
    return result


def against_mean(residuals: FloatArray, counts: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Shares (J, V) of the views with a residual (J, V), and their residuals against their mean by those shares.

    What all views of a patch have alike is gone from them; NaN residuals have no share and come out as 0.
    """
    seen = np.isfinite(residuals)
    share = shares_of(np.where(seen, counts, 0.0))
    r = np.where(seen, residuals, 0.0)
    return share, np.where(seen, r - (share * r).sum(axis=1)[:, None], 0.0)


def _corner_weights(points: FloatArray, vertices: FloatArray, faces: FaceArray, face: IndexArray) -> FloatArray:
    """Barycentric weights (n, 3) of the place on ``face`` nearest to each point."""
    result: FloatArray = _closest(np.ascontiguousarray(points), vertices, faces, face)
    return result


@njit(cache=True)
def _closest(points, vertices, faces, face):  # type: ignore[no-untyped-def]
    result = np.empty((len(points), 3))
    for k in range(len(points)):
        f = row(faces, face[k])
        weights = closest(row(points, k), row(vertices, f[0]), row(vertices, f[1]), row(vertices, f[2]))
        for i in range(3):
            result[k, i] = weights[i]
    return result
