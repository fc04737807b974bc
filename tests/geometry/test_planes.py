"""Neighbours, planes and occupancy against brute force and numpy."""

from __future__ import annotations

import numpy as np
import pytest

from scanmass.geometry.neighbours import nearest, sample_areas
from scanmass.geometry.occupancy import directions, escape_shares, facing_sheets, occupancy
from scanmass.geometry.planes import fit_plane, largest_plane, local_planes, plane_axes


def cluster(kind: str, n: int) -> np.ndarray:
    rng = np.random.default_rng(n)
    if kind == "even":
        return rng.uniform(size=(n, 3))
    if kind == "line":
        return np.outer(rng.uniform(size=n), [1.0, 2.0, 3.0])
    if kind == "far":
        return rng.uniform(size=(n, 3)) + [1e6, -1e6, 0]
    return np.repeat(rng.uniform(size=(-(-n // 3), 3)), 3, axis=0)[:n]  # ties


@pytest.mark.parametrize("kind", ["even", "line", "far", "ties"])
@pytest.mark.parametrize("n", [2, 5, 300])
def test_nearest_is_what_brute_force_finds(kind, n):
    points = cluster(kind, n)
    distance, index = nearest(points, 7)
    full = np.linalg.norm(points[:, None] - points[None], axis=2)
    np.testing.assert_allclose(np.take_along_axis(full, index, axis=1), distance, atol=1e-12)
    assert (index != np.arange(n)[:, None]).all()
    np.fill_diagonal(full, np.inf)
    np.testing.assert_allclose(distance, np.sort(full, axis=1)[:, : min(7, n - 1)], atol=1e-12)


def test_areas_add_up_to_the_surface():
    # 20 000 points on the unit square, k = 8: each area has a spread of 1/sqrt(8), the sum 0.25 %; borders add 2 %.
    points = np.column_stack([np.random.default_rng(0).uniform(size=(20_000, 2)), np.zeros(20_000)])
    assert sample_areas(nearest(points, 8)[0]).sum() == pytest.approx(1.0, rel=0.04)


def test_local_planes_are_eigenvectors():
    rng = np.random.default_rng(2)
    points = rng.normal(size=(400, 3)) * [1.0, 0.6, 0.2] + 1e3
    _, index = nearest(points, 10)
    normals, deviation = local_planes(points, index)
    for i in range(len(points)):
        near = points[[i, *index[i]]]
        values, axes = np.linalg.eigh(np.cov(near.T, bias=True))
        # The closed form loses half the digits where eigenvalues nearly meet; these do not.
        assert deviation[i] == pytest.approx(np.sqrt(values[0] * 11 / 8), rel=1e-5)
        if values[1] > 1.2 * values[0]:
            assert abs(normals[i] @ axes[:, 0]) > 1 - 1e-8


def test_the_largest_plane_by_area_not_by_number():
    rng = np.random.default_rng(3)
    wide = np.column_stack([rng.uniform(size=(500, 2)), 0.001 * rng.normal(size=500)])
    dense = np.column_stack([0.2 + 0.001 * rng.normal(size=3000), 0.2 * rng.uniform(size=(3000, 2)) + 0.5])
    points = np.concatenate([wide, dense])
    distance, index = nearest(points, 12)
    normals, _ = local_planes(points, index)
    found = largest_plane(points, normals, sample_areas(distance), 0.005, np.random.default_rng(0))
    assert found is not None
    assert abs(found[0][2]) > np.cos(0.01)
    assert abs(found[1]) < 0.001


def test_plane_of_a_plane():
    rng = np.random.default_rng(4)
    normal = np.array([2.0, -1.0, 2.0]) / 3.0
    points = rng.uniform(size=(50, 2)) @ plane_axes(normal) + 7.0 * normal
    got, offset = fit_plane(points)
    np.testing.assert_allclose(got, normal, atol=1e-12)
    assert offset == pytest.approx(7.0, abs=1e-12)


def sphere(n: int, radius: float, seed: int = 0) -> np.ndarray:
    points = np.random.default_rng(seed).normal(size=(n, 3))
    return radius * points / np.linalg.norm(points, axis=1)[:, None]


def test_rays_escape_outside_and_count_walls_inside():
    shells = np.concatenate([sphere(40_000, 1.0), sphere(20_000, 0.5, 1)])
    outward = shells / np.linalg.norm(shells, axis=1)[:, None]
    grid = occupancy(shells, 0.05)
    asked = np.arange(0, len(shells), 100)
    free, odd = escape_shares(grid, shells[asked], outward[asked], directions(48))
    outer = asked < 40_000
    assert free[outer, 0].min() == 1.0  # nothing beyond a sphere
    assert free[outer, 1].max() == 0.0
    # Material is left through one wall or three, the cavity through two; rays that graze a wall miscount.
    assert odd[outer, 1].mean() > 0.7
    assert odd[~outer, 0].mean() > 0.7
    assert odd[~outer, 1].mean() < 0.3


def test_facing_sheets_are_found_at_their_distance():
    rng = np.random.default_rng(5)
    flat = rng.uniform(size=(8000, 2))
    points = np.column_stack([flat, np.where(np.arange(8000) < 4000, 0.0, 0.08)])
    normals = np.tile([0.0, 0.0, 1.0], (8000, 1))
    grid = occupancy(points, 0.04)
    gaps = facing_sheets(grid, points, normals, np.array([10, 7000]), own=0.01, reach=0.12)
    np.testing.assert_allclose(gaps, [[0.08, np.inf], [np.inf, 0.08]])
