"""How far each view's pose is off, from what views say of the same patches."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy.optimize import nnls

from scanmass.uncertainty.patches import Patches

FloatArray = npt.NDArray[np.float64]

_ROUNDS = 5
_CUT = 3.0 * 1.4826
_WEAK = 1e-4
"""Motions that the patches feel less than this share of the strongest are left at zero (a ball can turn freely)."""
_FAINT = 0.05


@dataclass(frozen=True)
class RigidFit:
    """Motion of each view against their mean. ``shift`` (V, 3) metres, ``turn`` (V, 3) radians about the centre.

    ``shift_std``, ``turn_std``: standard deviation per axis of a view's motion, None from least squares alone;
    ``incidence``: metres per unit cosine of incidence, common to all views, 0 where scanner places are unknown;
    ``solving`` (6 V, 6 V): from the right side of the normal equations to the motions, turns times the size;
    ``used`` (J, V): what took part; ``left`` (J, V): residuals without each view's motion, NaN where unseen.
    """

    shift: FloatArray
    turn: FloatArray
    incidence: float
    used: npt.NDArray[np.bool_]
    left: FloatArray
    shift_std: float | None = None
    turn_std: float | None = None
    solving: FloatArray | None = None

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
    incidence = float(solution[-1])
    return _fit(patches, solution[:-1], incidence, used)


def _fit(patches: Patches, motion: FloatArray, incidence: float, used: npt.NDArray[np.bool_]) -> RigidFit:
    """From motions (6 V,), turns times the size."""
    v = patches.views
    shift, turn = motion[: 3 * v].reshape(v, 3), motion[3 * v :].reshape(v, 3) / patches.size
    fit = RigidFit(shift, turn, incidence, used, patches.residuals)
    left = patches.residuals - fit.field(patches)
    if incidence != 0.0:
        left = left - incidence * patches.towards
    return replace(fit, left=np.where(patches.seen, left, np.nan))


def shrunk(patches: Patches, fit: RigidFit, together: FloatArray, alone: FloatArray) -> RigidFit:
    """Motions as random effects: how large they are beyond what noise alone would feign, and each one's share of that.

    Parameters
    ----------
    together : (J, J), covariance of patch means of one view that noise brings, without what is a patch's own
    alone : (J, V), variance of what is a patch's own

    Notes
    -----
    Least squares where views share little gives large motions from noise alone. With normal equations N m = b and
    noise covariance M of b, the motion along an eigenvector u of N has the expected square
    shift_std^2 |u_t|^2 + turn_std^2 |u_w|^2 + u.M u / lambda^2: two variances by weighted least squares without
    negative parts; then each motion is shrunk by its signal's share (best linear prediction).
    """
    v = patches.views
    r = np.where(fit.used, patches.residuals, 0.0)
    if fit.incidence != 0.0:
        r = r - fit.incidence * np.where(fit.used, patches.towards, 0.0)
    normal, per_view = normal_equations(patches, fit.used, with_incidence=False)
    right = sum(k @ r[:, b] for b, k in enumerate(per_view))
    noise = sum(k @ together @ k.T + (k * alone[:, b]) @ k.T for b, k in enumerate(per_view))
    values, vectors = np.linalg.eigh(normal)
    strong = values > _WEAK * values[-1]
    values, vectors = values[strong], vectors[:, strong]
    found = (vectors.T @ right) / values
    feigned = np.einsum("ik,ij,jk->k", vectors, noise, vectors) / values**2
    parts = np.stack([(vectors[: 3 * v] ** 2).sum(axis=0), (vectors[3 * v :] ** 2).sum(axis=0)], axis=1)
    # A direction with next to no turn in it says nothing of turns (a ball's are never seen).
    parts[parts < _FAINT] = 0.0
    variances = np.zeros(2)
    for _ in range(10):
        weight = 1.0 / np.maximum(feigned + parts @ variances, 1e-300)
        variances, _ = nnls(parts * weight[:, None], (found**2 - feigned) * weight)
    signal = parts @ variances
    share = np.divide(signal, signal + feigned, out=np.zeros_like(signal), where=signal > 0)
    result = _fit(patches, vectors @ (share * found), fit.incidence, fit.used)
    shift, turn = np.sqrt(variances)
    return replace(
        result,
        shift_std=float(shift),
        turn_std=float(turn) / patches.size,
        solving=(vectors * (share / values)) @ vectors.T,
    )


def without_motion(patches: Patches, fit: RigidFit, residuals: FloatArray) -> FloatArray:
    """What other residuals (J, V) would leave of themselves, had they been taken through the same fit."""
    if fit.solving is None:
        raise ValueError("the fit is not one of shrunk motions")
    r = np.where(fit.used, residuals, 0.0)
    right = sum(k @ r[:, b] for b, k in enumerate(_right_side(patches, fit.used)))
    return residuals - effects_of(patches, fit.used, fit.solving @ right)


def _solve(patches: Patches, used: npt.NDArray[np.bool_], with_incidence: bool) -> tuple[FloatArray, FloatArray]:
    """Solution (6 V + 1,) with turns times the size, and what is left (J, V)."""
    r = np.where(used, patches.residuals, 0.0)
    normal, per_view = normal_equations(patches, used, with_incidence)
    solution = least_squares(normal) @ sum(k @ r[:, b] for b, k in enumerate(per_view))
    motions = np.append(solution, [] if with_incidence else [0.0])
    misfit = r - effects_of(patches, used, motions[:-1], float(motions[-1]))
    _, share = _weights(patches, used)
    return motions, np.where(used, misfit - (share * misfit).sum(axis=1)[:, None], 0.0)


def normal_equations(
    patches: Patches, used: npt.NDArray[np.bool_], with_incidence: bool
) -> tuple[FloatArray, list[FloatArray]]:
    """Normal matrix (k, k), and for each view the matrix (k, J) from its residuals to the right side.

    Unknowns: shifts (3 V), turns times the size (3 V), and ``with_incidence`` a metres per unit cosine; the shape s_j
    is eliminated. Motions common to all views are free: see :func:`least_squares`.
    """
    per_view = _right_side(patches, used)
    arms = _arms(patches)
    columns = [_per_view(arms, b, patches.views) for b in range(patches.views)]
    if with_incidence:
        weight, share = _weights(patches, used)
        cosine = np.where(used, patches.towards, 0.0)
        about = weight * (cosine - (share * cosine).sum(axis=1)[:, None])
        per_view = [np.vstack([k, about[:, b]]) for b, k in enumerate(per_view)]
        columns = [np.hstack([c, cosine[:, b, None]]) for b, c in enumerate(columns)]
    normal: FloatArray = np.sum([k @ c for k, c in zip(per_view, columns, strict=True)], axis=0)
    return normal, per_view


def least_squares(normal: FloatArray) -> FloatArray:
    """The inverse (k, k) of a normal matrix on what it feels; the smallest solution, so common motions are zero."""
    values, vectors = np.linalg.eigh(0.5 * (normal + normal.T))
    strong = values > _WEAK * values[-1]
    result: FloatArray = (vectors[:, strong] / values[strong]) @ vectors[:, strong].T
    return result


def effects_of(
    patches: Patches, used: npt.NDArray[np.bool_], motions: FloatArray, incidence: float = 0.0
) -> FloatArray:
    """(J, V): how far motions (6 V,) and a lean with incidence move each view's patch outward."""
    arms, v = _arms(patches), patches.views
    moved: FloatArray = np.stack([arms @ motions[_columns(a, v)] for a in range(v)], axis=1)
    return moved + incidence * np.where(used, patches.towards, 0.0) if incidence else moved


def _per_view(arms: FloatArray, view: int, views: int) -> FloatArray:
    result = np.zeros((len(arms), 6 * views))
    result[:, _columns(view, views)] = arms
    return result


def _arms(patches: Patches) -> FloatArray:
    """(J, 6): how far unit shifts, and unit turns over the size, move each patch outward."""
    return np.hstack([patches.normals, np.cross(patches.centres / patches.size, patches.normals)])


def _weights(patches: Patches, used: npt.NDArray[np.bool_]) -> tuple[FloatArray, FloatArray]:
    """Weights n/(n + 3) (J, V), zero where not used, and each view's share of its patch's."""
    weight = np.where(used, patches.counts / (patches.counts + 3.0), 0.0)
    total = weight.sum(axis=1, keepdims=True)
    return weight, np.divide(weight, total, out=np.zeros_like(weight), where=total > 0)


def _right_side(patches: Patches, used: npt.NDArray[np.bool_]) -> list[FloatArray]:
    """For each view b the matrix (6 V, J) that takes its residuals to the right side of the normal equations.

    Eliminating s_j takes the weighted mean over its views off each row: diag(w) - w w^T / sum w between views.
    """
    v, arms = patches.views, _arms(patches)
    weight, share = _weights(patches, used)
    result = []
    for b in range(v):
        matrix = np.empty((6 * v, len(arms)))
        for a in range(v):
            between = (weight[:, a] if a == b else 0.0) - weight[:, a] * share[:, b]
            matrix[_columns(a, v)] = (arms * between[:, None]).T
        result.append(matrix)
    return result


def _columns(view: int, views: int) -> npt.NDArray[np.int64]:
    return np.concatenate([3 * view + np.arange(3), 3 * views + 3 * view + np.arange(3)])
