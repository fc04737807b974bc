"""Closed forms of the handbooks against triangulations: the error must fall with the square of the step."""

from __future__ import annotations

import numpy as np
import pytest

from scanmass.geometry import solids
from scanmass.geometry.moments import centroid
from scanmass.geometry.polyhedron import polyhedron_moments
from scanmass.geometry.tensors import central_inertia
from tests.geometry.shapes import block, half_profile, revolved, ring


def arc(n: int, radius: float, start: float) -> np.ndarray:
    """Profile of a sphere from the polar angle ``start`` above the south pole to the north pole."""
    angle = np.linspace(start, np.pi, n + 1)[:-1]
    angle = angle[angle > 1e-9]
    return np.stack([radius * np.sin(angle), -radius * np.cos(angle)], axis=1)


def sphere_profile(n: int, radius: float, start: float = 0.0) -> np.ndarray:
    curve = arc(n, radius, start)
    bottom = -radius * np.cos(start)
    return np.concatenate([[[0.0, bottom]], curve, [[0.0, radius]]])


def paraboloid_profile(n: int) -> np.ndarray:
    z = np.linspace(0, 1, n + 1)[1:] ** 2 * 1.3
    return np.concatenate([[[0.0, 0.0]], np.stack([0.7 * np.sqrt(z / 1.3), z], axis=1), [[0.0, 1.3]]])


CASES = {
    "cone": (solids.frustum(0.7, 0, 1.3), lambda n: revolved(np.array([[0, 0], [0.7, 0], [0, 1.3]]), n)),
    "frustum": (
        solids.frustum(0.7, 0.3, 1.3),
        lambda n: revolved(np.array([[0, 0], [0.7, 0], [0.3, 1.3], [0, 1.3]]), n),
    ),
    "cylinder": (solids.frustum(0.7, 0.7, 1.3), lambda n: revolved(half_profile(np.array([[0.7, 0], [0.7, 1.3]])), n)),
    "hemisphere": (solids.spherical_cap(0.7, 0.7), lambda n: revolved(sphere_profile(n, 0.7, np.pi / 2), n)),
    "cap": (solids.spherical_cap(0.7, 0.4), lambda n: revolved(sphere_profile(n, 0.7, np.arccos(-3 / 7)), n)),
    "sphere": (solids.ellipsoid(0.7, 0.7, 0.7), lambda n: revolved(sphere_profile(n, 0.7), n)),
    "paraboloid": (solids.paraboloid(0.7, 1.3), lambda n: revolved(paraboloid_profile(n), n)),
    "torus": (solids.torus(1.0, 0.3), lambda n: ring(1.0, 0.3, n)),
}


@pytest.mark.parametrize("name", CASES)
def test_triangulations_converge_to_the_closed_form_at_second_order(name: str) -> None:
    exact, mesh = CASES[name]
    errors = [np.abs(polyhedron_moments(*mesh(n)) - exact).max() / exact[0] for n in (64, 128)]
    # Chords of a circle in n steps miss it by (pi/n)^2 / 2 of the radius: second order, a factor 4 for half the step.
    # At 128 steps that is 3e-4 of a radius, up to five times over in second moments, doubled in both directions.
    assert errors[1] < 4e-3
    assert errors[0] / errors[1] == pytest.approx(4.0, rel=0.1)


def test_ellipsoid_is_a_stretched_sphere() -> None:
    vertices, faces = revolved(sphere_profile(256, 1.0), 256)
    moments = polyhedron_moments(vertices * [0.5, 0.8, 1.2], faces)
    # 256 steps: chord error (pi/256)^2 of the size, twice for both directions.
    np.testing.assert_allclose(moments, solids.ellipsoid(0.5, 0.8, 1.2), atol=4e-4 * moments[0])


def test_flat_sided_solids_are_exact() -> None:
    vertices, faces = block([-0.5, -1.0, 0.0], [0.5, 1.0, 3.0])
    np.testing.assert_allclose(polyhedron_moments(vertices, faces), solids.box(1, 2, 3), atol=1e-13)
    s = 0.6
    corners = np.array([[-s, -s, 0], [s, -s, 0], [s, s, 0], [-s, s, 0], [0, 0, 1.5]])
    sides = np.array([[0, 2, 1], [0, 3, 2], [0, 1, 4], [1, 2, 4], [2, 3, 4], [3, 0, 4]])
    np.testing.assert_allclose(polyhedron_moments(corners, sides), solids.square_pyramid(1.2, 1.5), atol=1e-13)
    tet = np.array([[1, 0, 0], [0, 2, 0], [0, 0, 1.5], [-1, -1, -1]], dtype=float)
    turned = np.array([[0, 1, 2], [0, 3, 1], [1, 3, 2], [2, 3, 0]])
    np.testing.assert_allclose(polyhedron_moments(tet, turned), solids.tetrahedron(tet), atol=1e-13)


def test_handbook_inertias() -> None:
    """Izz and Ixx as the handbook prints them (closed forms of any engineering handbook, recomputed)."""
    r, h, a, c = 0.7, 1.3, 0.3, 1.0
    rows = [
        (solids.frustum(r, 0, h), 0.3 * r * r, 3 / 80 * (4 * r * r + h * h), h / 4),
        (solids.frustum(r, a, h), 0.3 * (r**5 - a**5) / (r**3 - a**3), None, None),
        (solids.spherical_cap(r, r), 0.4 * r * r, 83 / 320 * r * r, 3 * r / 8),
        (solids.paraboloid(r, h), r * r / 3, (3 * r * r + h * h) / 18, 2 * h / 3),
        (solids.torus(c, a), c * c + 0.75 * a * a, (4 * c * c + 5 * a * a) / 8, 0.0),
        (solids.tube(r, a, h), (r * r + a * a) / 2, (3 * (r * r + a * a) + h * h) / 12, h / 2),
        (solids.square_pyramid(r, h), r * r / 10, r * r / 20 + 3 * h * h / 80, h / 4),
        (solids.box(r, h, a), (r * r + h * h) / 12, (h * h + a * a) / 12, a / 2),
    ]
    for moments, izz, ixx, z in rows:
        inertia = central_inertia(moments) / moments[0]
        assert inertia[2, 2] == pytest.approx(izz, rel=1e-13)
        assert ixx is None or inertia[0, 0] == pytest.approx(ixx, rel=1e-13)
        assert z is None or centroid(moments)[2] == pytest.approx(z, rel=1e-13, abs=1e-15)


def test_regular_tetrahedron_has_ma2_over_20_on_every_axis() -> None:
    corners = np.array([[1, 1, 1], [1, -1, -1], [-1, 1, -1], [-1, -1, 1]], dtype=float)
    moments = solids.tetrahedron(corners)
    np.testing.assert_allclose(central_inertia(moments), np.eye(3) * moments[0] * 8 / 20, atol=1e-14)


def test_quarter_disc_prism() -> None:
    """Centroid 4R/(3 pi) on both axes; centroidal area inertia 0.05488 R^4 (handbook tables of sections)."""
    n, r, h = 2000, 1.0, 0.5
    angle = np.linspace(0, np.pi / 2, n + 1)
    rim = np.concatenate([[[0, 0]], np.stack([np.cos(angle), np.sin(angle)], axis=1)])
    m = len(rim)
    vertices = np.concatenate([np.c_[rim, np.zeros(m)], np.c_[rim, np.full(m, h)]])
    k = np.arange(1, m - 1)
    i, j = np.arange(m), (np.arange(m) + 1) % m
    faces = np.concatenate(
        [
            np.stack([np.zeros_like(k), k + 1, k], 1),
            np.stack([np.full_like(k, m), m + k, m + k + 1], 1),
            np.stack([i, j, m + j], 1),
            np.stack([i, m + j, m + i], 1),
        ]
    )
    moments = polyhedron_moments(vertices, faces)
    # 2000 chords in a quarter: relative error (pi/4000)^2 / 3 = 2e-7.
    assert moments[0] == pytest.approx(np.pi / 4 * h, rel=1e-6)
    np.testing.assert_allclose(centroid(moments)[:2], 4 * r / (3 * np.pi), rtol=1e-6)
    central_area_xx = moments[4] / h - moments[0] / h * centroid(moments)[0] ** 2
    assert central_area_xx == pytest.approx(0.05488, abs=5e-6)  # printed to five digits


def test_triangular_prism_centroid_is_unchanged_by_shear() -> None:
    def prism(apex: float) -> np.ndarray:
        base = np.array([[0, 0, 0], [3, 0, 0], [apex, 1.5, 0]], dtype=float)
        vertices = np.concatenate([base, base + [0, 0, 1]])
        faces = np.array([[0, 2, 1], [3, 4, 5], [0, 1, 4], [0, 4, 3], [1, 2, 5], [1, 5, 4], [2, 0, 3], [2, 3, 5]])
        return polyhedron_moments(vertices, faces)

    upright, sheared = prism(0.0), prism(5.0)
    assert upright[0] == pytest.approx(3 * 1.5 / 2, rel=1e-14)
    assert centroid(upright)[:2] == pytest.approx([1.0, 0.5])  # one third in from each side
    assert centroid(sheared)[1] == pytest.approx(0.5)


def test_shell_volume_by_steiner() -> None:
    """V(t) = A t - M t^2 + K t^3 / 3 inward, for a sphere: A = 4 pi R^2, M = 4 pi R, K = 4 pi."""
    r, t = 0.7, 0.05
    shell = solids.ellipsoid(r, r, r)[0] - solids.ellipsoid(r - t, r - t, r - t)[0]
    assert shell == pytest.approx(4 * np.pi * (r * r * t - r * t * t + t**3 / 3), rel=1e-12)
