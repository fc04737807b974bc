"""Where the centre of mass lies as people on the floor find it: from features they can touch, and above the base."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.stats import t as student

from scanmass.geometry.moments import centroid, translated
from scanmass.surface.surface import Closure
from scanmass.uncertainty.bounds import Bounds

FloatArray = npt.NDArray[np.float64]


def offsets(bounds: Bounds, points: Mapping[str, FloatArray]) -> list[dict[str, Any]]:
    """The centre of mass from each named point (3,), along the scan's axes, metres; the points are taken as exact."""
    com = bounds.com
    return [
        {
            "name": name,
            "offset_m": {
                "value": (com.value - point).tolist(),
                "std": None if com.std is None else com.std.tolist(),
                "low": None if com.low is None else (com.low - point).tolist(),
                "high": None if com.high is None else (com.high - point).tolist(),
            },
        }
        for name, point in points.items()
    ]


def height(bounds: Bounds, closures: Sequence[Closure], up: FloatArray, base: float) -> dict[str, float | None]:
    """The centre of mass above the plane ``up . r = base``, metres; the plane is taken as exact.

    The ends are those of every shape the unseen part could have, each with the random and declared half-width.
    """
    value = float(up @ bounds.com.value) - base
    heights = [value, *(float(up @ centre) - base for centre in _centres(bounds, closures))]
    if bounds.com_covariance is None:
        return {"value": value, "std": None, "low": None, "high": None}
    std = float(np.sqrt(up @ bounds.com_covariance @ up))
    degrees = bounds.com.degrees_of_freedom
    nu = np.inf if degrees is None else float(np.min(degrees))
    reach = float(student.ppf(0.5 + 0.5 * bounds.level, nu)) * std
    return {"value": value, "std": std, "low": min(heights) - reach, "high": max(heights) + reach}


def _centres(bounds: Bounds, closures: Sequence[Closure]) -> list[FloatArray]:
    """Centres of mass (3,) under the other closures: the outer part gives or takes the difference."""
    parts = bounds.parts
    whole = parts.moments.sum(axis=0)
    outer = parts.density_values[0]
    return [
        centroid(parts.mass_moments + outer * (translated(c.moments, -bounds.centre) - whole)) + bounds.centre
        for c in closures
    ]
