"""What several views tell of the noise: poses, a correlated field, and the jackknife as the floor under both."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Literal

import numpy as np
import numpy.typing as npt
from scipy.spatial.distance import cdist
from scipy.stats import f as fisher

from scanmass.errors import Note
from scanmass.seeds import stream
from scanmass.uncertainty import resample, weightings
from scanmass.uncertainty.field import Field, correlation, fit_field, kept, scatter
from scanmass.uncertainty.intervals import welch_satterthwaite
from scanmass.uncertainty.patches import Patches
from scanmass.uncertainty.pose_check import Alternative, alternatives
from scanmass.uncertainty.rigid import RigidFit, fit_rigid, shrunk, without_motion
from scanmass.uncertainty.sources import factor

FloatArray = npt.NDArray[np.float64]
Basis = Literal["views", "declared", "upper_bound", "none"]

LEAST_VIEWS = 3
_MOST_DEGREES = 60.0
_ROUNDS = 2
_DRAWS = 2000
_THIRD = 4.0 / 3.0
COMMON_ERROR = "pose-or-incidence-error"
_LEAST_SHARED = 0.2
"""Below this share of the seen area in common, between-view differences say little of the whole."""


@dataclass(frozen=True)
class NoiseModel:
    """What is known of the random noise, and its effect on the ten volume moments about the patches' centre.

    ``std`` and ``length`` of the correlated part in metres; ``shift_std`` metres and ``rotation_std`` radians of a
    view's pose; None where not known. ``parts``: (name, rows (k, 10), degrees of freedom or None) for each source.
    ``alternatives``: what errors common to all views would change; ``weightings``: changes (10,) by other weights of
    the views; ``resampled``: errors (n, 10) drawn from residuals, by views and by blocks of their patches.
    """

    basis: Basis
    std: float | None = None
    length: float | None = None
    shape: str | None = None
    shift_std: float | None = None
    rotation_std: float | None = None
    views: int = 0
    parts: tuple[tuple[str, FloatArray, float | None], ...] = ()
    alternatives: tuple[Alternative, ...] = ()
    weightings: dict[str, FloatArray] = field(default_factory=dict)
    resampled: tuple[FloatArray, FloatArray] | None = None
    assumptions: tuple[Note, ...] = ()
    warnings: tuple[Note, ...] = ()


def shared_fraction(patches: Patches) -> float:
    """Share of the seen area that two views or more saw."""
    seen_by = patches.seen.sum(axis=1)
    seen = patches.areas[seen_by >= 1].sum()
    return float(patches.areas[seen_by >= 2].sum() / seen) if seen > 0 else 0.0


def enough_views(patches: Patches) -> bool:
    """Three views or more that share enough of the surface to say what noise they hold."""
    seen_by_pairs = patches.seen & (patches.seen.sum(axis=1) >= 2)[:, None]
    return int((seen_by_pairs.sum(axis=0) >= 12).sum()) >= LEAST_VIEWS and shared_fraction(patches) >= _LEAST_SHARED


def from_views(patches: Patches, seed: int = 0) -> NoiseModel:
    """Noise of the moments from what differs between views (design 5.4 to 5.7).

    An error common to all views cannot be seen: this is the random part, between views.

    Raises
    ------
    ValueError
        With fewer than three views that share patches.
    """
    if not enough_views(patches):
        raise ValueError(f"{LEAST_VIEWS} views that share patches are needed, got {patches.views}")
    patches = patches.some_seen()
    fixed = fit_rigid(patches)
    own_field = fit_field(patches, fixed.left)
    for _ in range(_ROUNDS):
        rigid = shrunk(patches, fixed, *_of_one_view(patches, own_field))
        own_field = fit_field(patches, rigid.left)
    if own_field.std > 0:
        found = kept(patches, own_field, lambda r: without_motion(patches, rigid, r), stream(seed, "field kept"))
        own_field = replace(own_field, std=own_field.std / found**0.5)
    share, v = patches.shares(), patches.views
    covariances = (field_covariance(patches, own_field, share), *_pose_covariances(patches, rigid, share))
    degrees = (min(_MOST_DEGREES, own_field.degrees_of_freedom), v - 1.0, v - 1.0)
    stretch = _stretch(resample.covariance(patches), v - 1.0, covariances, degrees)
    names = ("scan noise", "view shifts", "view turns")
    parts = tuple(
        (name, factor(covariance) * stretch, nu)
        for name, covariance, nu in zip(names, covariances, degrees, strict=True)
    )
    others = alternatives(patches, rigid, *_of_one_view(patches, own_field))
    weighed = weightings.changes(patches)
    drawn = resample.by_views(patches, _DRAWS, seed), resample.by_patches(patches, own_field.length, _DRAWS, seed)
    return NoiseModel(
        "views",
        std=own_field.std,
        length=own_field.length,
        shape=own_field.shape,
        shift_std=rigid.shift_std,
        rotation_std=rigid.turn_std,
        views=v,
        parts=parts,
        alternatives=others,
        weightings=weighed,
        resampled=drawn,
        assumptions=(
            Note(
                "errors-common-to-all-views-not-seen",
                "The random part comes from what differs between views; an error that all views share (a scale, an "
                "offset of the surface, a common pose error) does not show in it and counts only where declared.",
            ),
        ),
        warnings=_common_error(others) + _by_weights(weighed, parts) + _unlike(drawn[0], parts, stretch, v),
    )


def field_covariance(patches: Patches, field: Field, share: FloatArray) -> FloatArray:
    """Covariance (10, 10) of the moments from each view's own field, through its share (J, V) of the surface."""
    within_view, own = _of_one_view(patches, field)
    # Different views are independent: the sum over views of a_jv a_lv times what one view's patches have in common.
    together = within_view * (share @ share.T)
    result: FloatArray = patches.moments.T @ together @ patches.moments
    alone = (share**2 * own).sum(axis=1)
    result += (patches.moments * alone[:, None]).T @ patches.moments
    return result


def _of_one_view(patches: Patches, field: Field) -> tuple[FloatArray, FloatArray]:
    """Covariance (J, J) of patch means of one view by its field, and variances (J, V) of what is a patch's own."""
    rho = correlation(cdist(patches.centres, patches.centres), field.length, field.shape)
    return field.std**2 * rho, scatter(patches) + field.own**2


def _pose_covariances(patches: Patches, rigid: RigidFit, share: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Covariances (10, 10) of the moments from independent shifts, and from independent turns, of every view."""

    def summed(std: float | None, arm: FloatArray) -> FloatArray:
        moved = [patches.moments.T @ (share[:, v, None] * arm) for v in range(patches.views)]
        result: FloatArray = float(std or 0.0) ** 2 * np.sum([m @ m.T for m in moved], axis=0)
        return result

    turning = np.cross(patches.centres, patches.normals)
    return summed(rigid.shift_std, patches.normals), summed(rigid.turn_std, turning)


def _stretch(
    floor: FloatArray, floor_degrees: float, covariances: Sequence[FloatArray], degrees: Sequence[float | None]
) -> FloatArray:
    """(10,) factors, 1 or more, that bring each moment's variance up to where the floor no longer contradicts it.

    The floor has few degrees of freedom: by chance alone it exceeds the model's variance F-fold, F the 95 % point of
    their ratio, one time in twenty. What exceeds that is taken as true (an error of a kind the model does not know).
    """
    variances = np.array([np.diag(c) for c in covariances])
    nu = welch_satterthwaite(variances, np.array(degrees, np.float64))
    total = variances.sum(axis=0)
    by_chance = fisher.ppf(0.95, floor_degrees, np.minimum(nu, 1e6))
    ratio = np.divide(np.diag(floor), by_chance * total, out=np.ones(10), where=total > 0)
    result: FloatArray = np.sqrt(np.maximum(ratio, 1.0))
    return result


def _common_error(others: Sequence[Alternative]) -> tuple[Note, ...]:
    beyond = [other.name for other in others if other.beyond]
    if not beyond:
        return ()
    text = (
        f"The views fit each other better another way ({' or '.join(beyond)}), by more than chance explains: they "
        "seem to share an error of pose or of incidence. Which is right, these views cannot tell, so the bounds reach "
        "from one to the other. One known length on the object, or a weighing, settles it."
    )
    return (Note(COMMON_ERROR, text),)


def _by_weights(
    weighed: dict[str, FloatArray], parts: Sequence[tuple[str, FloatArray, float | None]]
) -> tuple[Note, ...]:
    """Other weights of grazing and square sight that say more than the random half-width, about two deviations."""
    spread = weightings.half_spread(weighed)[:4]
    half = 2.0 * np.sqrt(np.sum([(rows[:, :4] ** 2).sum(axis=0) for _, rows, _ in parts], axis=0))
    if not (spread > half).any():
        return ()
    text = (
        "Volume or centre of mass change by more than the random half-width when grazing sight counts for less or "
        f"more (volume by up to {1e6 * spread[0]:.3g} cm3): something goes wrong where the scanner looks along the "
        "surface. Scan such places squarely as well."
    )
    return (Note("grazing-sight-decides", text),)


def ratios(drawn: FloatArray, parts: Sequence[tuple[str, FloatArray, float | None]]) -> FloatArray:
    """(4,): standard deviation of resampled over that of modelled errors, of the volume and the first moments."""
    variance = np.sum([(rows[:, :4] ** 2).sum(axis=0) for _, rows, _ in parts], axis=0)
    result: FloatArray = np.divide(drawn[:, :4].std(axis=0), np.sqrt(variance), out=np.ones(4), where=variance > 0)
    return result


def _unlike(
    drawn: FloatArray, parts: Sequence[tuple[str, FloatArray, float | None]], stretch: FloatArray, views: int
) -> tuple[Note, ...]:
    """The two bootstraps beside each other: unlike by more than a third, and by more than so few views explain."""
    ratio = ratios(drawn, parts)
    most, least = float(ratio.max()), float(ratio.min())
    few = float(np.sqrt(fisher.ppf(0.01 / 4, views - 1.0, _MOST_DEGREES)))
    more = most > _THIRD and bool((stretch[:4] > 1.0).any())
    if not more and least > min(1.0 / _THIRD, few):
        return ()
    most = most if more else least
    why = (
        "a view is worse than the others, or its error is of a kind the model does not know (a bend, stripes)"
        if more
        else "the model holds more noise than the views show, which few or little overlapping views allow"
    )
    text = (
        f"Errors drawn anew from the views and patches themselves are {most:.2g} times as large as those of the "
        f"fitted noise. The likely reason: {why}. The bounds are those of the fitted noise."
    )
    return (Note("bootstraps-disagree", text),)
