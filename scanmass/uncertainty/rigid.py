"""How far each view's pose is off, from what views say of the same patches."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.uncertainty.patches import Patches

FloatArray = npt.NDArray[np.float64]

_ROUNDS = 5
_CUT = 3.0 * 1.4826
_WEAK = 1e-4
"""Motions that the patches feel less than this share of the strongest are left at zero (a ball can turn freely)."""


@dataclass(frozen=True)
class RigidFit:
    """Motion of each view against their mean. ``shift`` (V, 3) metres, ``turn`` (V, 3) radians about the centre.

    ``incidence``: metres per unit cosine of incidence, common to all views, 0 where scanner places are unknown;
    ``left`` (J, V): residuals with each view's motion taken off, NaN where not used.
    """

    shift: FloatArray
    turn: FloatArray
    incidence: float
    left: FloatArray

    def field(self, patches: Patches) -> FloatArray:
        """(J, V): how far each view's motion moves each patch outward."""
        return patches.normals @ self.shift.T + np.cross(patches.centres, patches.normals) @ self.turn.T


def fit_rigid(patches: Patches) -> RigidFit:
    """Least squares of r_jv = s_j + n.t_v + (x cross n).w_v + a cos(incidence), the shape s_j eliminated.

    Weights n/(n + 3), then five rounds without what is beyond 3 median absolute deviations; the sums of shifts and
    turns over the views are zero. Only patches seen by two views or more take part.

    Raises
    ------
    ValueError
        With fewer than two views that share a patch.
    """
    used = patches.seen & np.isfinite(patches.residuals)
    used[used.sum(axis=1) < 2] = False
    if not used.any():
        raise ValueError("no patch was seen by two views: their motion cannot be told from the shape")
    with_incidence = bool(np.isfinite(patches.towards[used]).all())
    for _ in range(_ROUNDS):
        solution, misfit = _solve(patches, used, with_incidence)
        spread = np.median(np.abs(misfit[used]))
        kept = used & (np.abs(misfit) <= _CUT * spread) if spread > 0 else used
        kept[kept.sum(axis=1) < 2] = False
        if not kept.any() or np.array_equal(kept, used):
            break
        used = kept
    v = patches.views
    shift, turn = solution[: 3 * v].reshape(v, 3), solution[3 * v : 6 * v].reshape(v, 3) / patches.size
    fit = RigidFit(shift, turn, float(solution[6 * v]), patches.residuals)
    left = patches.residuals - fit.field(patches)
    if with_incidence:
        left = left - fit.incidence * patches.towards
    seen = patches.seen & np.isfinite(left)
    return RigidFit(shift, turn, fit.incidence, np.where(seen, left, np.nan))


def _solve(patches: Patches, used: npt.NDArray[np.bool_], with_incidence: bool) -> tuple[FloatArray, FloatArray]:
    """Solution (6 V + 1,) with turns times the size, and what is left (J, V)."""
    v, at = patches.views, patches.centres / patches.size
    arms = np.hstack([patches.normals, np.cross(at, patches.normals)])
    weight = np.where(used, patches.counts / (patches.counts + 3.0), 0.0)
    total = weight.sum(axis=1)
    share = np.divide(weight, total[:, None], out=np.zeros_like(weight), where=total[:, None] > 0)
    r = np.where(used, patches.residuals, 0.0)
    cosine = np.where(used, patches.towards, 0.0) if with_incidence else np.zeros_like(r)
    # Eliminating s_j takes the weighted mean over its views off each row: (diag(w) - w w^T / sum w) on views.
    normal = np.zeros((6 * v + 1, 6 * v + 1))
    right = np.zeros(6 * v + 1)
    r0, c0 = r - (share * r).sum(axis=1)[:, None], cosine - (share * cosine).sum(axis=1)[:, None]
    for a in range(v):
        rows_a = _columns(a, v)
        for b in range(v):
            between = (weight[:, a] if a == b else 0.0) - weight[:, a] * share[:, b]
            normal[np.ix_(rows_a, _columns(b, v))] = (arms * between[:, None]).T @ arms
        right[rows_a] = arms.T @ (weight[:, a] * r0[:, a])
        normal[rows_a, -1] = normal[-1, rows_a] = arms.T @ (weight[:, a] * c0[:, a])
    normal[-1, -1], right[-1] = (weight * c0 * c0).sum(), (weight * c0 * r0).sum()
    # The mean motion of all views is the object's own; six directions of zero, and a ball has more.
    gauge = np.zeros((6, 6 * v + 1))
    for k in range(3):
        gauge[k, k : 3 * v : 3] = gauge[3 + k, 3 * v + k : 6 * v : 3] = 1.0
    normal += np.trace(normal) / (6 * v) * gauge.T @ gauge
    values, vectors = np.linalg.eigh(normal)
    strong = values > _WEAK * values[-1]
    solution = vectors[:, strong] @ ((vectors[:, strong].T @ right) / values[strong])
    motion = np.stack([arms @ solution[_columns(a, v)] for a in range(v)], axis=1)
    misfit = r - motion - solution[-1] * cosine
    misfit -= (share * misfit).sum(axis=1)[:, None]
    return solution, misfit


def _columns(view: int, views: int) -> npt.NDArray[np.int64]:
    return np.concatenate([3 * view + np.arange(3), 3 * views + 3 * view + np.arange(3)])
