"""What several views tell of the noise: poses, a correlated field, and the jackknife as the floor under both."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt
from scipy.spatial.distance import cdist
from scipy.stats import t as student

from scanmass.errors import Note
from scanmass.uncertainty.field import Field, correlation, fit_field
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


def from_views(patches: Patches, level: float = 0.95) -> NoiseModel:
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
    poses = _pose_covariance(patches, rigid, share)
    noise = field_covariance(patches, field, share)
    degrees = (float(v - 1), min(_MOST_DEGREES, field.degrees_of_freedom))
    jack, jack_degrees = jackknife(patches, share), float(v - 1)
    stretch = _stretch(jack, jack_degrees, (poses, noise), degrees, level)
    return NoiseModel(
        "views",
        std=field.std,
        length=field.length,
        shape=field.shape,
        shift_std=rigid.shift_std,
        rotation_std=rigid.turn_std,
        views=v,
        parts=(
            ("scan noise", factor(noise) * stretch, degrees[1]),
            ("view poses", factor(poses) * stretch, degrees[0]),
        ),
        assumptions=(
            Note(
                "errors-common-to-all-views-not-seen",
                "The random part comes from what differs between views; an error that all views share (a scale, an "
                "offset of the surface, a common pose error) does not show in it and counts only where declared.",
            ),
        ),
        warnings=_incidence_warning(patches, rigid, share, noise),
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
    return field.std**2 * rho, _own(patches, field)


def _own(patches: Patches, field: Field) -> FloatArray:
    """(J, V): scatter within a patch over its points, and what was found beyond it."""
    typical = np.nanmedian(patches.within) if np.isfinite(patches.within).any() else 0.0
    within = np.where(np.isfinite(patches.within), patches.within, typical)
    result: FloatArray = within / np.maximum(patches.counts, 1.0) + field.own**2
    return result


def _pose_covariance(patches: Patches, rigid: RigidFit, share: FloatArray) -> FloatArray:
    """Covariance (10, 10) of the moments from independent motions of every view."""
    arms = (patches.normals, np.cross(patches.centres, patches.normals))
    covariance = np.zeros((10, 10))
    for std, arm in zip((rigid.shift_std, rigid.turn_std), arms, strict=True):
        for v in range(patches.views):
            moved = patches.moments.T @ (share[:, v, None] * arm)
            covariance += float(std or 0.0) ** 2 * (moved @ moved.T)
    return covariance


def jackknife(patches: Patches, share: FloatArray) -> FloatArray:
    """Covariance (10, 10) of the moments by leaving one view out, linearised by patch means (Tukey 1958).

    Where a view alone saw a patch, leaving it out changes nothing there, so this is a floor and not the whole.
    """
    r = np.where(patches.seen, np.nan_to_num(patches.residuals), 0.0)
    share = np.where(patches.seen, share, 0.0)
    mean = (share * r).sum(axis=1)
    views = patches.views
    moved = []
    for v in range(views):
        rest = 1.0 - share[:, v]
        able = rest > 1e-9
        without = np.divide(mean - share[:, v] * r[:, v], rest, out=mean.copy(), where=able)
        moved.append(patches.moments.T @ (without - mean))
    about = np.array(moved) - np.mean(moved, axis=0)
    result: FloatArray = (views - 1.0) / views * about.T @ about
    return result


def _stretch(
    jack: FloatArray,
    jack_degrees: float,
    covariances: tuple[FloatArray, FloatArray],
    degrees: tuple[float, float],
    level: float,
) -> FloatArray:
    """(10,) factors, 1 or more, that bring each moment's half-width up to the jackknife's."""
    variances = [np.diag(c) for c in covariances]
    total = variances[0] + variances[1]
    spread = variances[0] ** 2 / degrees[0] + variances[1] ** 2 / degrees[1]
    nu = np.divide(total**2, spread, out=np.full(10, degrees[0]), where=spread > 0)
    tail = 0.5 * (1.0 + level)
    own = student.ppf(tail, nu) * np.sqrt(total)
    floor = student.ppf(tail, jack_degrees) * np.sqrt(np.diag(jack))
    ratio = np.divide(floor, own, out=np.ones(10), where=own > 0)
    result: FloatArray = np.maximum(ratio, 1.0)
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
