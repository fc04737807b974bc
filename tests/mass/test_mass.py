"""Mass properties and the two routes, against printed worked answers."""

from __future__ import annotations

import numpy as np
import pytest

from scanmass.density.fill import fill_uniform
from scanmass.doubt import Figure
from scanmass.errors import Declined
from scanmass.geometry import solids
from scanmass.geometry.moments import rotated, translated
from scanmass.geometry.tensors import principal
from scanmass.mass.properties import mass_properties
from scanmass.mass.routes import compare_routes, mass_moments_by_integrals
from tests.geometry.test_polyhedron import TURN, bodies


@pytest.mark.parametrize("name", bodies())
def test_two_routes_agree(name: str) -> None:
    vertices, faces = bodies()[name]
    filled = fill_uniform("body", "iron", Figure.exact(7200.0), vertices @ TURN.T, faces)
    difference = compare_routes(mass_moments_by_integrals(filled), filled.mass_moments())
    # The figure. A body a thousand sizes from the origin keeps ten digits less six of the second moments.
    limit = 1e-6 if name == "far away" else 1e-9
    assert max(difference.mass, difference.center_of_mass, difference.inertia) < limit


def test_openstax_composite_bodies() -> None:
    """OpenStax University Physics Volume 1, chapter 10: worked answers of composite moments of inertia."""
    # Disc 500 kg, R 2.0 m, child 25 kg at 1.0 m: 1025 kg m2.
    disc = solids.frustum(2.0, 2.0, 0.1)
    disc *= 500 / disc[0]
    about_axis = disc[4] + disc[5] + 25 * 1.0**2
    assert about_axis == pytest.approx(1025, abs=0.5)
    # Rod 2.0 kg, 0.5 m about its end + sphere 1.0 kg, R 0.20 m beyond its tip: 0.673; centred R from the axis 0.223.
    rod = solids.box(1e-4, 1e-4, 0.5)
    rod *= 2.0 / rod[0]
    sphere = solids.ellipsoid(0.2, 0.2, 0.2)
    sphere *= 1.0 / sphere[0]
    tip = rod + translated(sphere, np.array([0, 0, 0.7]))
    assert tip[4] + tip[6] == pytest.approx(0.673, abs=0.0005)
    near = rod + translated(sphere, np.array([0, 0, 0.2]))
    assert near[4] + near[6] == pytest.approx(0.223, abs=0.0005)
    # Four blades 4.00 m, 50.0 kg about their ends: 1067.
    blade = solids.box(1e-4, 1e-4, 4.0)
    blade *= 50.0 / blade[0]
    assert 4 * (blade[4] + blade[6]) == pytest.approx(1067, abs=0.5)


def test_earth_and_moon() -> None:
    """OpenStax University Physics Volume 1: centre printed as 4.64e6 m from the data 5.97e24, 7.36e22 kg, 3.82e8 m."""
    earth, moon = np.zeros(10), np.zeros(10)
    earth[0], moon[0] = 5.97e24, 7.36e22
    pair = earth + translated(moon, np.array([3.82e8, 0, 0]))
    assert pair[1] / pair[0] == pytest.approx(4.64e6, abs=0.02e6)


def test_six_washers() -> None:
    """OpenStax University Physics Volume 1: 20 g, 10 cm apart: 0.0035, without the inner two 0.0034."""
    washer = np.zeros(10)
    washer[0] = 0.020
    row = [translated(washer, np.array([x, 0, 0])) for x in (-0.25, -0.15, -0.05, 0.05, 0.15, 0.25)]
    assert sum(row)[4] == pytest.approx(0.0035, abs=5e-5)
    assert sum(row[:2] + row[4:])[4] == pytest.approx(0.0034, abs=5e-5)


def test_principal_axes_follow_the_rule() -> None:
    moments = rotated(solids.box(1, 2, 3), TURN)
    found = mass_properties(moments)
    np.testing.assert_allclose(found.axes @ found.axes.T, np.eye(3), atol=1e-14)
    assert np.linalg.det(found.axes) == pytest.approx(1.0)
    assert (np.diff(found.principal_moments) > 0).all()
    for axis in found.axes[:2]:
        assert axis[np.argmax(np.abs(axis))] > 0
    expected = np.sort([6 * (4 + 9) / 12, 6 * (1 + 9) / 12, 6 * (1 + 4) / 12])
    np.testing.assert_allclose(found.principal_moments, expected, rtol=1e-12)
    np.testing.assert_allclose(np.abs(found.axes[0] @ TURN[:, 2]), 1.0, rtol=1e-12)  # least about the longest side


def test_ties_of_components_do_not_flip_an_axis() -> None:
    turn = np.array([[1, -1, 0], [1, 1, 0], [0, 0, np.sqrt(2)]]) / np.sqrt(2)
    for noise in (1e-13, -1e-13):
        tensor = turn @ np.diag([1.0, 2.0, 3.0]) @ turn.T
        tensor[0, 0] += noise
        np.testing.assert_allclose(principal(tensor)[1][0], [np.sqrt(0.5), np.sqrt(0.5), 0], atol=1e-9)


def test_nothing_weighs_nothing() -> None:
    with pytest.raises(Declined, match="mass came out as -1 kg; a closed surface"):
        mass_properties(-np.ones(10))
