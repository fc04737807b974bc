"""The ellipsoid that holds the centre of mass."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.stats import chi2
from scipy.stats import f as fisher

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Region:
    """Ellipsoid: ``center`` (3,), ``radii`` (3,) descending, ``axes`` (3, 3), row i the unit vector of radius i."""

    center: FloatArray
    radii: FloatArray
    axes: FloatArray
    level: float

    def holds(self, points: FloatArray) -> npt.NDArray[np.bool_]:
        """Which of points (..., 3) lie inside."""
        along = (points - self.center) @ self.axes.T
        flat = self.radii <= 0
        inside: npt.NDArray[np.bool_] = (along[..., ~flat] ** 2 / self.radii[~flat] ** 2).sum(axis=-1) <= 1.0
        return inside & (np.abs(along[..., flat]) <= 0).all(axis=-1)


def quantile(dimensions: int, level: float, degrees_of_freedom: float | None) -> float:
    """Squared radius in standard deviations: k F(k, nu), or chi-square with k where nothing was estimated.

    >>> round(quantile(3, 0.95, None), 2), round(quantile(3, 0.95, 5.0), 2)
    (7.81, 16.23)
    """
    if degrees_of_freedom is None or not np.isfinite(degrees_of_freedom):
        return float(chi2.ppf(level, dimensions))
    return float(dimensions * fisher.ppf(level, dimensions, min(degrees_of_freedom, 1e9)))


def region(center: FloatArray, covariance: FloatArray, level: float, degrees_of_freedom: float | None) -> Region:
    """Ellipsoid of a covariance (3, 3): radii are root eigenvalues times the root of 3 F(3, nu) (JCGM 102:2011)."""
    values, vectors = np.linalg.eigh(0.5 * (covariance + covariance.T))
    values, axes = np.clip(values[::-1], 0.0, None), vectors.T[::-1].copy()
    if np.linalg.det(axes) < 0:
        axes[2] = -axes[2]
    return Region(center, np.sqrt(values * quantile(3, level, degrees_of_freedom)), axes, level)
