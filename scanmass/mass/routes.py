"""Two routes to the same mass properties, and how far apart they come out."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from scanmass.density.fill import DensityMap, FloatArray
from scanmass.mass.properties import mass_properties


@dataclass(frozen=True)
class RoutesDifference:
    """Relative differences of the two routes: of the mass, of the centre of mass and of the inertia tensor.

    The centre is compared in units of the radius of gyration, the tensor in units of its largest moment.
    """

    mass: float
    center_of_mass: float
    inertia: float


def mass_moments_by_integrals(parts: DensityMap) -> FloatArray:
    """Ten mass moments (10,) about the scan's origin by the polyhedral integrals, part by part."""
    total: FloatArray = sum((float(p.density.value) * p.moments() for p in parts.parts), start=np.zeros(10))
    return total


def compare_routes(by_integrals: FloatArray, by_cells: FloatArray) -> RoutesDifference:
    """How far the mass moments (10,) of the two routes differ.

    >>> cube = 1000 * np.array([1, 0.5, 0.5, 0.5, 1/3, 1/3, 1/3, 0.25, 0.25, 0.25])
    >>> compare_routes(cube, cube)
    RoutesDifference(mass=0.0, center_of_mass=0.0, inertia=0.0)
    """
    one, other = mass_properties(by_integrals), mass_properties(by_cells)
    gyration = np.sqrt(np.trace(one.inertia) / (2 * one.mass))
    return RoutesDifference(
        abs(other.mass / one.mass - 1),
        float(np.linalg.norm(other.center_of_mass - one.center_of_mass) / gyration),
        float(np.abs(other.inertia - one.inertia).max() / one.principal_moments[-1]),
    )
