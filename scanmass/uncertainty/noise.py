"""What several views tell of the noise: poses, a correlated field, and the jackknife as the floor under both."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt
from scipy.spatial.distance import cdist
from scipy.stats import f as fisher

from scanmass.errors import Note
from scanmass.uncertainty.field import Field, correlation, fit_field, scatter
from scanmass.uncertainty.following import shares_of
from scanmass.uncertainty.intervals import welch_satterthwaite
from scanmass.uncertainty.patches import Patches
from scanmass.uncertainty.rigid import RigidFit, fit_rigid, shrunk
from scanmass.uncertainty.sources import factor

FloatArray = npt.NDArray[np.float64]
Basis = Literal["views", "declared", "upper_bound", "none"]

LEAST_VIEWS = 3
_MOST_DEGREES = 60.0
_ROUNDS = 2
_LEAST_SHARED = 0.2
"""Below this share of the seen area in common, between-view differences say little of the whole."""


@dataclass(frozen=True)
class NoiseModel:
    """What is known of the random noise, and its effect on the ten volume moments about the patches' centre.

    ``std`` and ``length`` of the correlated part in metres; ``shift_std`` metres and ``rotation_std`` radians of a
    view's pose; None where not known. ``parts``: (name, rows (k, 10), degrees of freedom or None) for each source.
    """

    basis: Basis
    std: float | None = None
    length: float | None = None
    shape: str | None = None
    shift_std: float | None = None
    rotation_std: float | None = None
    views: int = 0
    parts: tuple[tuple[str, FloatArray, float | None], ...] = ()
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


def from_views(patches: Patches) -> NoiseModel:
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
    field = fit_field(patches, fixed.left)
    for _ in range(_ROUNDS):
        rigid = shrunk(patches, fixed, *_of_one_view(patches, field))
        field = fit_field(patches, rigid.left)
    share, v = patches.shares(), patches.views
    covariances = (field_covariance(patches, field, share), *_pose_covariances(patches, rigid, share))
    degrees = (min(_MOST_DEGREES, field.degrees_of_freedom), rigid.shift_degrees, rigid.turn_degrees)
    stretch = _stretch(between_views(patches, share), v - 1.0, covariances, degrees)
    names = ("scan noise", "view shifts", "view turns")
    return NoiseModel(
        "views",
        std=field.std,
        length=field.length,
        shape=field.shape,
        shift_std=rigid.shift_std,
        rotation_std=rigid.turn_std,
        views=v,
        parts=tuple(
            (name, factor(covariance) * stretch, nu)
            for name, covariance, nu in zip(names, covariances, degrees, strict=True)
        ),
        assumptions=(
            Note(
                "errors-common-to-all-views-not-seen",
                "The random part comes from what differs between views; an error that all views share (a scale, an "
                "offset of the surface, a common pose error) does not show in it and counts only where declared.",
            ),
        ),
        warnings=_incidence_warning(patches, rigid, share, covariances[0]),
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


def between_views(patches: Patches, share: FloatArray) -> FloatArray:
    """Covariance (10, 10) of the moments by what each view adds, whatever the kind of its error.

    q_v = sum_j G_j a_jv u_jv / sqrt(1 - a_jv), u the residual against the shares' mean; the covariance is
    sum_v q_v q_v^T: the jackknife by views with its leverages (MacKinnon & White 1985). With equal shares it is
    V/(V - 1) sum q_v q_v^T, the variance of a mean of V views. Where a view alone saw a patch it says nothing, so this
    is a floor and not the whole.
    """
    seen = patches.seen & np.isfinite(patches.residuals)
    own = shares_of(np.where(seen, share, 0.0))
    r = np.where(seen, np.nan_to_num(patches.residuals), 0.0)
    about = np.where(seen, r - (own * r).sum(axis=1)[:, None], 0.0)
    able = own < 1.0 - 1e-9
    each = np.where(able, own * about / np.sqrt(np.where(able, 1.0 - own, 1.0)), 0.0)
    q = patches.moments.T @ each
    result: FloatArray = q @ q.T
    return result


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


def _incidence_warning(patches: Patches, rigid: RigidFit, share: FloatArray, noise: FloatArray) -> tuple[Note, ...]:
    """A lean of the residuals with incidence that, if an error, outweighs the noise of the volume."""
    if rigid.incidence == 0.0:
        return ()
    lean = rigid.incidence * np.where(share > 0, np.nan_to_num(patches.towards), 0.0)
    volume = float((patches.moments[:, 0] * (share * lean).sum(axis=1)).sum())
    if abs(volume) <= 2.0 * np.sqrt(noise[0, 0]):
        return ()
    text = (
        f"Residuals change by {1000 * abs(rigid.incidence):.2f} mm between grazing and square sight. If that is an "
        f"error of the scanner, the volume is off by up to {1e6 * abs(volume):.3g} cm3, more than its random part."
    )
    return (Note("incidence-bias", text),)
