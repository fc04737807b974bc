"""Variable density by the cells, against printed answers; the error must fall with the square of the cell."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

from scanmass.density.cells import cut_solid
from scanmass.geometry.moments import centroid
from scanmass.mass.properties import mass_properties
from tests.geometry.shapes import block

TETRAHEDRON = np.array([[0, 0, 0], [6, 0, 0], [0, 3, 0], [0, 0, 2]], dtype=float)
SIDES = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
Density = Callable[[np.ndarray, np.ndarray, np.ndarray], np.ndarray]


def weighed(vertices: np.ndarray, faces: np.ndarray, density: Density, cells: int) -> np.ndarray:
    """Mass moments with the density taken at the centroid of what each cell holds."""
    grid = cut_solid(vertices, faces, cells=cells)
    at = grid.centres(np.arange(grid.fraction.size))
    holds = grid.cut_moments[:, 0] > 0
    at[grid.cut[holds]] += centroid(grid.cut_moments[holds])
    return grid.moments(density(*at.T).reshape(grid.fraction.shape))


PRINTED = {
    "x2 y z": (lambda x, y, z: x * x * y * z, 108 / 35, [2.25, 0.75, 0.5], [117 / 35, 684 / 35, 729 / 35]),
    "x y2 z": (lambda x, y, z: x * y * y * z, 54 / 35, None, [99 / 35, 36 / 7, 243 / 35]),
}


@pytest.mark.parametrize("name", PRINTED)
def test_openstax_variable_density_tetrahedron(name: str) -> None:
    """x + 2y + 3z <= 6 in the first octant (OpenStax Calculus Volume 3, section 5.6)."""
    density, mass, centre, about_axes = PRINTED[name]
    errors = []
    for cells in (50, 100):
        m = weighed(TETRAHEDRON, SIDES, density, cells)
        about = np.array([m[5] + m[6], m[4] + m[6], m[4] + m[5]])
        errors.append(np.abs([m[0] / mass - 1, *(about / about_axes - 1)]).max())
        if centre is not None:
            # Second order in the cell: 0.06 or 0.03 of a size near 2, squared and divided by 12.
            np.testing.assert_allclose(centroid(m), centre, rtol=0.05 * (10 / cells))
    assert errors[1] < 2e-3
    assert errors[0] / errors[1] == pytest.approx(4.0, rel=0.15)


def test_rod_of_quadratic_density() -> None:
    """Density k x^2 on [0, L]: centre 3L/4, about x = 0 3/5 m L^2, about the centroid 3/80 m L^2 (recomputed)."""
    length = 2.0
    vertices, faces = block([0, -0.01, -0.01], [length, 0.01, 0.01])
    m = weighed(vertices, faces, lambda x, y, z: x * x, 400)
    # A cell of L/400: midpoint error 1/400^2 of the mass.
    assert centroid(m)[0] == pytest.approx(0.75 * length, rel=1e-5)
    assert m[4] / m[0] == pytest.approx(0.6 * length**2, rel=2e-5)
    assert mass_properties(m).inertia[2, 2] / m[0] == pytest.approx(3 / 80 * length**2, rel=3e-4)


def test_wrong_shape_of_density_is_refused() -> None:
    grid = cut_solid(TETRAHEDRON, SIDES, cells=4)
    with pytest.raises(ValueError, match="density must be"):
        grid.moments(np.ones((2, 2, 2)))
