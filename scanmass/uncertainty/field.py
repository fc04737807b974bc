"""The part of the noise that goes together over a length, from products between views."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt
from scipy.optimize import nnls
from scipy.spatial.distance import cdist

from scanmass.uncertainty.patches import Patches

FloatArray = npt.NDArray[np.float64]
Shape = Literal["gaussian", "exponential"]

_REACH = 0.35
_BINS = 24
_LENGTHS = np.geomspace(0.01, 0.35, 16)
_OUTLYING = 6.0 * 1.4826


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


def fit_field(patches: Patches, left: FloatArray) -> Field:
    """Field and own noise from residuals ``left`` (J, V) without each view's motion, NaN where unseen.

    For patches j, l and the set S of views that saw both, m = |S|:
    Y = (m sum r_ja r_la - sum r_ja sum r_la) / 2 has the expectation m (m - 1)/2 x covariance, whatever the shape:
    what all views share cancels. Y is binned by distance below 0.35 of the size; one field of each shape and length
    is fitted without negative parts, and the best kept. Taking off each view's motion takes some of a long field with
    it: in simulations lengths of 0.07 of the size came out at 0.05 to 0.07, of 0.2 at 0.08, the poses holding the rest.
    """
    clean = _clean(left)
    with_view = np.isfinite(clean).astype(np.float64)
    r = np.nan_to_num(clean)
    common = with_view @ with_view.T
    product = 0.5 * (common * (r @ r.T) - (r @ with_view.T) * (with_view @ r.T))
    distance = cdist(patches.centres, patches.centres)
    edges = np.concatenate([[-1.0], np.linspace(0.0, _REACH * patches.size, _BINS + 1)])
    place = np.searchsorted(edges, distance, side="left") - 1
    usable = (common >= 2) & (place <= _BINS)
    place, common, product, distance = place[usable], common[usable], product[usable], distance[usable]
    # Weight (m - 1) per unit of covariance: with it Y / (m (m - 1) / 2) sums to 2 Y / m.
    weight = np.bincount(place, common - 1.0, _BINS + 1)
    filled = weight > 0
    value = np.bincount(place, 2.0 * product / common, _BINS + 1)[filled] / weight[filled]
    middle = np.bincount(place, (common - 1.0) * distance, _BINS + 1)[filled] / weight[filled]
    trust = np.sqrt(weight[filled])
    alone = (middle == 0).astype(np.float64)
    best = None
    for shape in ("gaussian", "exponential"):
        for length in _LENGTHS * patches.size:
            columns = np.stack([correlation(middle, float(length), shape), alone], axis=1)
            amounts, misfit = nnls(columns * trust[:, None], value * trust)
            if best is None or misfit < best[0]:
                best = (misfit, amounts, float(length), shape)
    assert best is not None
    _, amounts, length, shape = best
    white = _white(patches, clean)
    own = max(float(amounts[1]) - white, 0.0)
    nu = _degrees(patches, with_view, length, shape)
    return Field(float(np.sqrt(amounts[0])), length, shape, float(np.sqrt(own)), nu)  # type: ignore[arg-type]


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


def _white(patches: Patches, clean: FloatArray) -> float:
    """Mean variance of a patch's mean from the scatter within it."""
    used = np.isfinite(clean) & np.isfinite(patches.within) & (patches.counts > 0)
    return float(np.mean(patches.within[used] / patches.counts[used])) if used.any() else 0.0


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
