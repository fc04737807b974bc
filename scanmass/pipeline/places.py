"""Where the centre of mass lies as people on the floor find it: from features they can touch, and above the base."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.stats import norm
from scipy.stats import t as student

from scanmass.doubt import Figure
from scanmass.uncertainty.bounds import Bounds

FloatArray = npt.NDArray[np.float64]


def offsets(bounds: Bounds, points: Mapping[str, FloatArray], scale: Figure | None = None) -> list[dict[str, Any]]:
    """The centre of mass from each named point (3,), along the scan's axes, metres.

    The points are taken as exact, but a distance grows with the scan's ``scale``, so its doubt counts here.
    """
    return [{"name": name, "offset_m": _offset(bounds, point, scale)} for name, point in points.items()]


def _offset(bounds: Bounds, point: FloatArray, scale: Figure | None) -> dict[str, Any]:
    com = bounds.com
    value = com.value - point
    if com.std is None or com.low is None or com.high is None or com.random_low is None or com.random_high is None:
        return {"value": value.tolist(), "std": None, "low": None, "high": None}
    stretch = _growth(scale) * np.abs(value)
    reach = float(norm.ppf(0.5 + 0.5 * bounds.level)) * stretch
    # Scale and the rest are independent: half-widths add as squares, on the random part of each side.
    below, above = com.value - com.random_low, com.random_high - com.value
    return {
        "value": value.tolist(),
        "std": np.hypot(com.std, stretch).tolist(),
        "low": (com.low - point - (np.hypot(below, reach) - below)).tolist(),
        "high": (com.high - point + (np.hypot(above, reach) - above)).tolist(),
    }


def _growth(scale: Figure | None) -> float:
    """Standard deviation of a length for each metre of it."""
    return 0.0 if scale is None or scale.std is None else float(scale.std) / float(scale.value)


def height(bounds: Bounds, up: FloatArray, base: float, scale: Figure | None = None) -> dict[str, float | None]:
    """The centre of mass above the plane ``up . r = base``, metres; the plane is taken as exact, its distance scales.

    The ends are those of every shape in the bounds' bracket, each with the random and declared half-width.
    """
    value = float(up @ bounds.com.value) - base
    heights = bounds.centres @ up - base
    if bounds.com_covariance is None:
        return {"value": value, "std": None, "low": None, "high": None}
    stretch = _growth(scale) * float(np.abs(heights).max())
    std = float(np.sqrt(up @ bounds.com_covariance @ up + stretch**2))
    degrees = bounds.com.degrees_of_freedom
    nu = np.inf if degrees is None else float(np.min(degrees))
    reach = float(student.ppf(0.5 + 0.5 * bounds.level, nu)) * std
    return {"value": value, "std": std, "low": float(heights.min()) - reach, "high": float(heights.max()) + reach}
