"""The nearest point of a triangle against another library, in every region of its plane."""

from __future__ import annotations

import numpy as np
import trimesh

from scanmass.geometry.triangles import closest, mixed


def test_closest_point_agrees_with_trimesh() -> None:
    rng = np.random.default_rng(3)
    triangles = rng.normal(size=(2000, 3, 3))
    points = 2.0 * rng.normal(size=(2000, 3))
    expected = trimesh.triangles.closest_point(triangles, points)
    for (a, b, c), p, nearest in zip(triangles, points, expected, strict=True):
        weights = closest(tuple(p), tuple(a), tuple(b), tuple(c))
        assert min(weights) >= 0.0
        assert abs(sum(weights) - 1.0) < 1e-12
        np.testing.assert_allclose(mixed(weights, tuple(a), tuple(b), tuple(c)), nearest, atol=1e-9)


def test_a_triangle_without_area_gives_one_of_its_points() -> None:
    corner = (1.0, 2.0, 3.0)
    assert mixed(closest((0.0, 0.0, 0.0), corner, corner, corner), corner, corner, corner) == corner
