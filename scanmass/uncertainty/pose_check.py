"""Whether the views, laid on one another again, would say another volume: errors that they all share."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy.stats import t as student

from scanmass.uncertainty.patches import Patches
from scanmass.uncertainty.rigid import RigidFit, effects_of, least_squares, normal_equations, shrunk

FloatArray = npt.NDArray[np.float64]
IndexArray = npt.NDArray[np.int64]

SOURCE = "pose or incidence error common to all views"
_OUTWARD = 2.0
"""Standard deviations of its own noise that a change is taken beyond itself: the bracket is to hold the truth."""
_FACING = 0.3
"""Length of the mean normal of a view's points; half a ball seen from afar has 2/3, all of a ball 0."""
_RARE = 0.02
"""Chance that independent errors of the views alone would show as one that they share."""


@dataclass(frozen=True)
class Alternative:
    """The surface if an error common to all views were taken off. ``change`` (10,) of the volume moments about the
    patches' centre; ``far`` (10,): the change with its own noise, two standard deviations of the volume outward, where
    a bracket ends; ``expected`` (10, 10): covariance of the change if there is no such error; ``beyond``: chance does
    not explain it."""

    name: str
    change: FloatArray
    far: FloatArray
    expected: FloatArray
    beyond: bool


def alternatives(patches: Patches, rigid: RigidFit, together: FloatArray, alone: FloatArray) -> tuple[Alternative, ...]:
    """Moments with the views laid on one another again, and with a lean with incidence taken off too.

    Parameters
    ----------
    rigid : with ``shift_std`` and ``turn_std`` of independent motions
    together : (J, J), covariance of one view's patch means
    alone : (J, V), variance of what is a patch's own

    Notes
    -----
    Least squares of the views against each other gives motions m; the moments then change by -sum_j G_j sum_v a_jv
    (arm_j . m_v). Errors of single views make such a change too, of a size that their noise and their own motions
    tell; an error that all views share (each moved along its own line of sight, or leaning with incidence) adds up
    over the views. The test is on the volume and the first moments, each at a quarter of the chance.
    """
    patches = replace(patches, towards=_sight(patches))
    v, known = patches.views, bool(np.isfinite(patches.towards[rigid.used]).all())
    motions = np.arange(6 * v)
    kinds = {"views laid on one another again": motions}
    if known:
        kinds["views laid on one another again, without a lean with incidence"] = np.append(motions, 6 * v)
        kinds["all ranges longer or shorter alike"] = np.array([6 * v])
    return tuple(_alternative(name, patches, rigid, together, alone, asked) for name, asked in kinds.items())


def _sight(patches: Patches) -> FloatArray:
    """(J, V) cosines of incidence; of a view whose scanner's place is not known, against the mean normal of its points.

    One scanner's points are dense where it looks squarely, so their mean normal points to it. NaN where they look all
    ways: such a view was made from several places.
    """
    counts = np.where(patches.seen, patches.counts, 0.0)
    total = counts.T @ patches.normals
    length = np.linalg.norm(total, axis=1)
    told = np.where(length > _FACING * counts.sum(axis=0), 1.0, np.nan)
    direction = total / np.where(length > 0, length, 1.0)[:, None] * told[:, None]
    return np.where(np.isfinite(patches.towards), patches.towards, patches.normals @ direction.T)


def _alternative(
    name: str, patches: Patches, rigid: RigidFit, together: FloatArray, alone: FloatArray, asked: IndexArray
) -> Alternative:
    """``asked`` (k,): which of the unknowns of :func:`normal_equations` are fitted, the lean being the last."""
    used, v = rigid.used, patches.views
    r = np.where(used, patches.residuals, 0.0)
    normal, per_view = normal_equations(patches, used, with_incidence=bool(asked[-1] == 6 * v))
    per_view = [k[asked] for k in per_view]
    inverse = least_squares(normal[np.ix_(asked, asked)])
    solution = inverse @ sum(k @ r[:, b] for b, k in enumerate(per_view))
    share = patches.shares()
    to_moments = np.stack([_moments_of(patches, share, unit) for unit in np.eye(6 * v + 1)[asked]], axis=1)
    change = -to_moments @ solution
    noise = sum(k @ together @ k.T + (k * alone[:, b]) @ k.T for b, k in enumerate(per_view))
    covariance = inverse @ noise @ inverse
    by_noise = to_moments @ covariance @ to_moments.T
    outward = np.sign(change[0]) * _OUTWARD * by_noise[:, 0] / np.sqrt(by_noise[0, 0]) if by_noise[0, 0] > 0 else 0.0
    felt = inverse @ normal[asked, : 6 * v]

    def with_poses(fit: RigidFit) -> FloatArray:
        poses = np.zeros(6 * v)
        poses[: 3 * v] = float(fit.shift_std or 0.0) ** 2
        poses[3 * v :] = (float(fit.turn_std or 0.0) * patches.size) ** 2
        return covariance + (felt * poses) @ felt.T

    # An error that all views share feigns motions of single views: how large those are is asked without the part of
    # the solution that changes the volume.
    cause = with_poses(rigid) @ to_moments[0]
    shared = np.zeros(6 * v + 1)
    shared[asked] = cause * (to_moments[0] @ solution) / (to_moments[0] @ cause)
    rest = replace(patches, residuals=patches.residuals - effects_of(patches, used, shared[:-1], float(shared[-1])))
    expected = to_moments @ with_poses(shrunk(rest, rigid, together, alone)) @ to_moments.T
    return Alternative(name, change, change + outward, expected, _beyond(change, expected, v))


def _moments_of(patches: Patches, share: FloatArray, unknowns: FloatArray) -> FloatArray:
    """(10,): what unknowns (6 V + 1,) change of the moments of the surface."""
    moved = effects_of(patches, share > 0, unknowns[:-1], float(unknowns[-1]))
    result: FloatArray = patches.moments.T @ (share * np.nan_to_num(moved)).sum(axis=1)
    return result


def _beyond(change: FloatArray, expected: FloatArray, views: int) -> bool:
    reach = student.ppf(1.0 - 0.5 * _RARE / 4, 3.0 * (views - 1.0) - 1.0) * np.sqrt(np.diag(expected)[:4])
    return bool(np.any(np.abs(change[:4]) > reach))
