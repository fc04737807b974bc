"""Outliers: strays go, edges and the sparse side of an uneven scan stay; grid edges go where others cover them."""

from __future__ import annotations

import numpy as np
import pytest

from scanmass.cloud.clean import drop_edges
from scanmass.cloud.cloud import REASONS
from scanmass.cloud.outliers import outliers
from scanmass.geometry.neighbours import nearest
from tests.cloud.bodies import body, cloud_of, sampled


def with_strays(points: np.ndarray, n: int) -> tuple[np.ndarray, np.ndarray]:
    strays = np.random.default_rng(7).uniform(-1, 1, (n, 3))
    distance, _ = nearest(points, 1, strays)
    strays = strays[distance[:, 0] > 0.06]
    return np.concatenate([points, strays]), np.arange(len(points) + len(strays)) >= len(points)


@pytest.mark.parametrize("n", [500, 5000, 40_000])
@pytest.mark.parametrize("name", ["box", "casting", "bowl"])
def test_a_clean_scan_loses_next_to_nothing(name, n):
    cloud, removed, notes = outliers(cloud_of(sampled(body(name), n)[0]))
    assert len(removed.points) <= 0.001 * n
    assert len(cloud.points) + len(removed.points) == n
    assert notes == ()


@pytest.mark.parametrize(("n", "strays", "caught"), [(500, 3, 1.0), (5000, 10, 0.9), (40_000, 200, 0.95)])
def test_strays_go(n, strays, caught):
    points, stray = with_strays(sampled(body("casting"), n)[0], strays)
    cloud, removed, _ = outliers(cloud_of(points))
    gone = ~np.isin(points[:, 0], cloud.points[:, 0])
    assert gone[stray].mean() >= caught
    assert gone[~stray].mean() < 0.002
    assert (removed.reason == REASONS.index("outlier")).all()


@pytest.mark.parametrize("distance", [0.05, 0.5, 5.0, 500.0])
def test_one_stray_goes_whatever_its_distance(distance):
    points, _ = sampled(body("box"), 10_000)
    stray = np.array([[0.1, 0.05, 0.25 + distance]])
    cloud, removed, _ = outliers(cloud_of(np.concatenate([points, stray])))
    assert len(removed.points) == 1
    np.testing.assert_array_equal(removed.points, stray)
    assert cloud.size < 1.02


def test_the_sparse_side_stays():
    points, _ = sampled(body("box"), 60_000)
    sparse = points[:, 0] < 0
    keep = ~sparse | (np.random.default_rng(99).random(len(points)) < 0.04)
    points = points[keep]
    _, removed, _ = outliers(cloud_of(points))
    # Only samples at the very border, with all their neighbours beyond it, can be taken.
    assert (removed.points[:, 0] < 0).sum() < 0.03 * (points[:, 0] < 0).sum()


def test_scale_and_place_do_not_matter():
    points, _ = with_strays(sampled(body("casting"), 5000)[0], 10)
    here = outliers(cloud_of(points))[0].points
    there = outliers(cloud_of(1000.0 * points + 77.0))[0].points
    np.testing.assert_allclose((there - 77.0) / 1000.0, here, atol=1e-12)


def test_many_are_said():
    points, _ = with_strays(sampled(body("box"), 5000)[0], 400)
    _, _, notes = outliers(cloud_of(points))
    assert [note.code for note in notes] == ["many-outliers"]


def test_edges_go_only_where_another_view_covers_them():
    points, _ = sampled(body("box"), 20_000)
    view = (np.random.default_rng(99).random(len(points)) < 0.5).astype(int)
    alone = (points[:, 0] > 0.2) & (view == 1)
    points, view = points[~alone], view[~alone]  # beyond x = 0.2 only view 0 looked
    at_edge = (view == 0) & (np.abs(points[:, 1]) < 0.05)
    cloud, removed, notes = drop_edges(cloud_of(points, view, np.full((2, 3), np.nan), at_edge=at_edge))
    assert (removed.reason == REASONS.index("grid edge")).all()
    assert removed.points[:, 0].max() < 0.25
    assert cloud.at_edge is not None
    # Samples fall at random: a few have no sample of the other view within three spacings.
    assert (cloud.points[cloud.at_edge, 0] < 0.2).sum() < 0.1 * (points[at_edge, 0] < 0.2).sum()
    assert (points[at_edge, 0] > 0.25).sum() == (cloud.points[cloud.at_edge, 0] > 0.25).sum()
    assert [note.code for note in notes] == ["edges-kept"]
