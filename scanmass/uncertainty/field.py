"""The part of the noise that goes together over a length, from products between views."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt
from scipy.optimize import nnls
from scipy.spatial.distance import cdist

from scanmass.uncertainty.following import against_mean
from scanmass.uncertainty.patches import Patches

FloatArray = npt.NDArray[np.float64]
Shape = Literal["gaussian", "exponential"]

_REACH = 0.35
_BINS = 24
_LENGTHS = np.geomspace(0.01, 0.35, 16)
_OUTLYING = 6.0 * 1.4826
_DRAWS = 6
"""Fields of each view that tell what motions take of them: with six views 36, some 6 % of a share of one half."""
_WEAK = 1e-6
"""Waves of a field below this share of the strongest are rounding."""
_LEAST_KEPT = 0.4
"""A field of which less than this is left beside the motions is a motion, and counts as one."""


def correlation(distance: FloatArray, length: float, shape: Shape) -> FloatArray:
    """rho(d) of distances of any shape: exp(-(d/l)^2/2) or exp(-d/l); at length 0 alike only with itself."""
    if length <= 0:
        return np.where(distance == 0, 1.0, 0.0)
    ratio = distance / length
    result: FloatArray = np.exp(-0.5 * ratio * ratio) if shape == "gaussian" else np.exp(-ratio)
    return result


@dataclass(frozen=True)
class Field:
    """Noise of one view: standard deviation ``std`` (m) alike over ``length`` (m), and what is a patch's own.

    ``own`` (m): standard deviation of a patch's mean beyond the field and the scatter within the patch.
    ``degrees_of_freedom``: how well the data know the size of it.
    """

    std: float
    length: float
    shape: Shape
    own: float
    degrees_of_freedom: float


@dataclass(frozen=True)
class _Bins:
    """Products of residuals by distance. ``value`` (b,): covariance; ``middle`` (b,): distance, the first bin 0;
    ``trust`` (b,): one over the standard deviation of ``value`` by patches' own noise; ``white``: variance that the
    scatter within patches brings to the first bin."""

    value: FloatArray
    middle: FloatArray
    trust: FloatArray
    white: float


def fit_field(patches: Patches, left: FloatArray) -> Field:
    """Field and own noise from residuals ``left`` (J, V) without each view's motion, NaN where unseen.

    One field of each shape and length is fitted to the products of residuals by distance, without negative parts,
    and the best kept. Taking off each view's motion takes some of a long field with it; the poses hold the rest.
    """
    clean = _clean(left)
    bins = _products(patches, clean)
    own = (bins.middle == 0).astype(np.float64)
    best = None
    for shape in ("gaussian", "exponential"):
        for length in _LENGTHS * patches.size:
            columns = np.stack([correlation(bins.middle, float(length), shape), own], axis=1)
            amounts, misfit = nnls(columns * bins.trust[:, None], bins.value * bins.trust)
            if best is None or misfit < best[0]:
                best = (misfit, amounts, float(length), shape)
    assert best is not None
    _, amounts, length, shape = best
    beyond = max(float(amounts[1]) - bins.white, 0.0)
    nu = _degrees(patches, np.isfinite(clean).astype(np.float64), length, shape)
    return Field(float(np.sqrt(amounts[0])), length, shape, float(np.sqrt(beyond)), nu)  # type: ignore[arg-type]


def kept(
    patches: Patches, field: Field, left_of: Callable[[FloatArray], FloatArray], rng: np.random.Generator
) -> float:
    """Share of a field's variance that is found again once each view's motion is taken off (``left_of``).

    Motions take long waves of the field with them. How much is seen on fields drawn from the fit and taken through the
    same steps (Gourieroux, Monfort & Renault 1993, J. Appl. Econometrics 8:S85).
    """
    rho = correlation(cdist(patches.centres, patches.centres), field.length, field.shape)
    values, vectors = np.linalg.eigh(rho)
    strong = values > _WEAK * values[-1]
    root = vectors[:, strong] * np.sqrt(values[strong])
    found = []
    for _ in range(_DRAWS):
        drawn = root @ rng.standard_normal((root.shape[1], patches.views))
        bins = _products(patches, np.where(patches.seen, left_of(np.where(patches.seen, drawn, 0.0)), np.nan))
        column = np.where(bins.middle > 0, correlation(bins.middle, field.length, field.shape), 0.0)
        found.append((bins.trust**2 * column) @ bins.value / ((bins.trust**2 * column) @ column))
    return float(np.clip(np.mean(found), _LEAST_KEPT, 1.0))


def _products(patches: Patches, clean: FloatArray) -> _Bins:
    """Between-view products of residuals, weighed as the surface weighs the views.

    With each view's share a_jv of its patch and u_jv = r_jv - sum_w a_jw r_jw, what all views share cancels, and
    sum_v a_jv a_lv u_jv u_lv has the expectation C_jl sum_v a_jv a_lv (1 - a_jv - a_lv + sum_w a_jw a_lw) for one
    covariance C in every view (leverages, as in MacKinnon & White 1985, J. Econometrics 29:305). Weighed by shares and
    areas like the surface itself, the variance found is the one that the surface feels, also where noise grows with
    incidence or one view is worse than the rest. Distances below 0.35 of the size.
    """
    used = np.isfinite(clean)
    share, about = against_mean(clean, patches.counts)
    weight = share * patches.areas[:, None]
    both = weight @ weight.T
    expected = both * (1.0 + share @ share.T) - (weight * share) @ weight.T - weight @ (weight * share).T
    product = (weight * about) @ (weight * about).T
    white = np.where(used, scatter(patches), 0.0)
    doubt = (weight**2 * white) @ (weight**2 * white).T
    edges = np.linspace(0.0, _REACH * patches.size, _BINS + 1)
    j, k = np.triu_indices(len(share))
    distance = np.linalg.norm(patches.centres[j] - patches.centres[k], axis=1)
    usable = (expected[j, k] > 0) & (distance <= edges[-1])
    j, k, distance = j[usable], k[usable], distance[usable]
    place = np.searchsorted(edges, distance, side="left")
    place[j == k] = 0

    def summed(each: FloatArray) -> FloatArray:
        return np.bincount(place, each, _BINS + 1).astype(np.float64)

    total = summed(expected[j, k])
    filled = total > 0
    total = total[filled]
    value, middle = summed(product[j, k])[filled] / total, summed(expected[j, k] * distance)[filled] / total
    spread = np.sqrt(summed(doubt[j, k])[filled])
    trust = total / np.where(spread > 0, spread, 1.0)
    seen = (weight**2 * white * (1.0 - 2.0 * share + (share**2).sum(axis=1)[:, None])).sum()
    return _Bins(value, middle, trust, float(seen / total[0]))


def _clean(left: FloatArray) -> FloatArray:
    """Residuals without those that disagree wildly with the other views of the patch."""
    seen = np.isfinite(left)
    some = seen.sum(axis=1) >= 2
    about = np.full_like(left, np.nan)
    about[some] = left[some] - np.nanmedian(left[some], axis=1, keepdims=True)
    spread = np.nanmedian(np.abs(about[some])) if some.any() else 0.0
    result: FloatArray = np.where((np.abs(about) <= _OUTLYING * spread) | (spread == 0), left, np.nan)
    result[~some] = np.nan
    return result


def scatter(patches: Patches) -> FloatArray:
    """(J, V): variance of a patch's mean from the scatter of points within it; typical where points are few."""
    known = np.isfinite(patches.within)
    typical = float(np.median(patches.within[known])) if known.any() else 0.0
    result: FloatArray = np.where(known, patches.within, typical) / np.maximum(patches.counts, 1.0)
    return result


def _degrees(patches: Patches, with_view: FloatArray, length: float, shape: str) -> float:
    """(m - 1) times the number of independent cells, (tr R)^2 / tr R^2 of the correlation R over seen patches."""
    seen_by = with_view.sum(axis=1)
    seen = seen_by >= 2
    if not seen.any():
        return 1.0
    at, area = patches.centres[seen], patches.areas[seen]
    rho = correlation(cdist(at, at), length, shape)  # type: ignore[arg-type]
    cells = area.sum() ** 2 / (area @ (rho * rho) @ area)
    return float(max((seen_by[seen].mean() - 1.0) * cells, 1.0))
