"""Whether the views, laid on one another again, would say another volume: errors that they all share."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy.stats import t as student

from scanmass.uncertainty.patches import Patches
from scanmass.uncertainty.rigid import RigidFit, effects_of, least_squares, normal_equations, shrunk

FloatArray = npt.NDArray[np.float64]

SOURCE = "pose or incidence error common to all views"
_OUTWARD = 2.0
_RARE = 0.03
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
    found = [_alternative("views laid on one another again", patches, rigid, together, alone, with_incidence=False)]
    if np.isfinite(patches.towards[rigid.used]).all():
        found.append(
            _alternative("lean with incidence taken off", patches, rigid, together, alone, with_incidence=True)
        )
    return tuple(found)


def _alternative(
    name: str, patches: Patches, rigid: RigidFit, together: FloatArray, alone: FloatArray, *, with_incidence: bool
) -> Alternative:
    used, v = rigid.used, patches.views
    r = np.where(used, patches.residuals, 0.0)
    normal, per_view = normal_equations(patches, used, with_incidence)
    inverse = least_squares(normal)
    solution = inverse @ sum(k @ r[:, b] for b, k in enumerate(per_view))
    share = patches.shares()
    to_moments = np.stack([_moments_of(patches, used, share, unit, with_incidence) for unit in np.eye(len(normal))], 1)
    change = -to_moments @ solution
    noise = sum(k @ together @ k.T + (k * alone[:, b]) @ k.T for b, k in enumerate(per_view))
    covariance = inverse @ noise @ inverse
    by_noise = to_moments @ covariance @ to_moments.T
    outward = np.sign(change[0]) * _OUTWARD * by_noise[:, 0] / np.sqrt(by_noise[0, 0]) if by_noise[0, 0] > 0 else 0.0
    felt = inverse @ normal

    def with_poses(fit: RigidFit) -> FloatArray:
        poses = np.zeros(len(normal))
        poses[: 3 * v] = float(fit.shift_std or 0.0) ** 2
        poses[3 * v : 6 * v] = (float(fit.turn_std or 0.0) * patches.size) ** 2
        return covariance + (felt * poses) @ felt.T

    # An error that all views share feigns motions of single views: how large those are is asked without the part of
    # the solution that changes the volume.
    cause = with_poses(rigid) @ to_moments[0]
    shared = cause * (to_moments[0] @ solution) / (to_moments[0] @ cause)
    motions, lean = (shared[:-1], float(shared[-1])) if with_incidence else (shared, 0.0)
    rest = replace(patches, residuals=patches.residuals - effects_of(patches, used, motions, lean))
    expected = to_moments @ with_poses(shrunk(rest, rigid, together, alone)) @ to_moments.T
    return Alternative(name, change, change + outward, expected, _beyond(change, expected, v))


def _moments_of(
    patches: Patches, used: npt.NDArray[np.bool_], share: FloatArray, unknowns: FloatArray, with_incidence: bool
) -> FloatArray:
    lean = float(unknowns[-1]) if with_incidence else 0.0
    motions = unknowns[:-1] if with_incidence else unknowns
    moved = effects_of(patches, share > 0, motions, lean)
    result: FloatArray = patches.moments.T @ (share * np.nan_to_num(moved)).sum(axis=1)
    return result


def _beyond(change: FloatArray, expected: FloatArray, views: int) -> bool:
    reach = student.ppf(1.0 - 0.5 * _RARE / 4, 3.0 * (views - 1.0) - 1.0) * np.sqrt(np.diag(expected)[:4])
    return bool(np.any(np.abs(change[:4]) > reach))
