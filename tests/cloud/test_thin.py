"""Thinning: against brute force, whatever the blocks, far from the origin, many points in little memory."""

from __future__ import annotations

import numpy as np
import pytest

from scanmass.cloud.thin import thin
from scanmass.errors import ScanFault
from scanmass.scans.scan import Block, Scan, ViewHead


def scan_of(points, view, size: int, heads=None, name="a.ply", **more) -> Scan:
    heads = tuple(ViewHead(f"v{i}") for i in range(int(view.max()) + 1)) if heads is None else heads

    def blocks():
        for v in np.unique(view):
            own = np.flatnonzero(view == v)
            for at in range(0, len(own), size):
                part = own[at : at + size]
                yield Block(int(v), points[part], **{key: value[part] for key, value in more.items()})

    return Scan(name, "0" * 64, "ply", heads, blocks, len(points), unit="m")


def sphere(n: int, seed: int = 0) -> np.ndarray:
    points = np.random.default_rng(seed).normal(size=(n, 3))
    return points / np.linalg.norm(points, axis=1)[:, None]


def test_few_points_stay_as_they_are():
    points, view = sphere(900), np.repeat([0, 1, 2], 300)
    thinned = thin([scan_of(points, view, 100)], limit=1000)
    assert thinned.cell is None
    np.testing.assert_array_equal(thinned.cloud.points, points)
    np.testing.assert_array_equal(thinned.cloud.view, view)
    assert (thinned.cloud.count == 1).all()


def test_cells_are_the_means_that_brute_force_gives():
    points = sphere(20_000)
    view = np.repeat([0, 1], 10_000)
    normals = points * 3.0
    thinned = thin([scan_of(points, view, 777, normals=normals)], limit=3000)
    cell, cloud = thinned.cell, thinned.cloud
    assert cell is not None
    assert 3000 / 8 < len(cloud.points) <= 3000
    keys = np.column_stack([np.floor((points - points[0]) / cell), view]).astype(int)
    expected: dict[tuple[int, ...], list[int]] = {}
    for i, key in enumerate(map(tuple, keys)):
        expected.setdefault(key, []).append(i)
    assert len(expected) == len(cloud.points)
    assert thinned.covariance is not None
    assert cloud.file_normals is not None
    for at, members in enumerate(expected.values()):
        # Running means and merges of 8 differ from the plain mean by rounding alone.
        np.testing.assert_allclose(cloud.points[at], points[members].mean(axis=0), atol=1e-13)
        assert cloud.count[at] == len(members)
        assert cloud.view[at] == view[members[0]]
        mean = points[members].mean(axis=0)
        np.testing.assert_allclose(cloud.file_normals[at], mean / np.linalg.norm(mean), atol=1e-12)
        if len(members) > 1:
            full = np.cov(points[members].T)
            six = [full[0, 0], full[1, 1], full[2, 2], full[0, 1], full[1, 2], full[2, 0]]
            np.testing.assert_allclose(thinned.covariance[at], six, atol=1e-13)


@pytest.mark.parametrize("limit", [500, 5000, 40_000])
def test_blocks_do_not_matter(limit):
    points, view = sphere(30_000), np.repeat([0, 1, 2], 10_000)
    one, other = (thin([scan_of(points, view, size)], limit=limit) for size in (97, 10_000))
    np.testing.assert_array_equal(one.cloud.points, other.cloud.points)
    assert one.cell == other.cell


def test_far_from_the_origin_nothing_is_lost():
    # Coordinates of 1e6 m hold 1e-10 m; the mean of a cell keeps that.
    points, view = sphere(20_000), np.zeros(20_000, int)
    shift = np.array([1e6, -2e6, 5e5])
    far = thin([scan_of(points + shift, view, 5000)], limit=2000)
    near = thin([scan_of((points + shift) - shift, view, 5000)], limit=2000)
    np.testing.assert_allclose(far.cloud.points - shift, near.cloud.points, atol=1e-9)
    np.testing.assert_array_equal(far.cloud.count, near.cloud.count)


def test_views_are_numbered_over_all_scans():
    points = sphere(600)
    heads = (ViewHead("left", np.array([5.0, 0, 0])), ViewHead("right"))
    first = scan_of(points, np.repeat([0, 1], 300), 200, heads, "a.e57")
    second = scan_of(points + 3, np.repeat([0, 1], 300), 200, heads, "b.e57")
    cloud = thin([first, second]).cloud
    assert cloud.view_names == ("a.e57: left", "a.e57: right", "b.e57: left", "b.e57: right")
    np.testing.assert_array_equal(np.bincount(cloud.view), [300] * 4)
    np.testing.assert_array_equal(np.isfinite(cloud.scanners).all(axis=1), [True, False, True, False])


def test_a_box_picks_the_object_out():
    points = np.concatenate([sphere(5000), 50 * sphere(50_000)])
    scan = scan_of(points, np.zeros(len(points), int), 4000)
    whole = thin([scan], limit=6000)
    part = thin([scan], limit=6000, within=(np.full(3, -2.0), np.full(3, 2.0)))
    assert whole.cell is not None
    assert part.cell is None
    assert part.points == 5000


def test_points_at_one_place_count_once():
    points = np.repeat(sphere(300), 2, axis=0)
    thinned = thin([scan_of(points, np.zeros(600, int), 100)])
    assert len(thinned.cloud.points) == 300
    assert (thinned.cloud.count == 2).all()
    assert [note.code for note in thinned.warnings] == ["duplicate-points"]
    assert thinned.cloud.spacing > 0


def test_grid_edges_are_marked_before_thinning():
    rows, columns = (a.ravel().astype(np.int32) for a in np.mgrid[0:40, 0:40])
    points = np.stack([columns * 0.01, rows * 0.01, np.where(columns < 20, 0.0, 0.5)], axis=1).astype(float)
    heads = (ViewHead("v", np.array([0.2, 0.2, 10.0]), (40, 40)),)
    scan = scan_of(points, np.zeros(1600, int), 130, heads, rows=rows, columns=columns)
    cloud = thin([scan]).cloud
    assert cloud.at_edge is not None
    np.testing.assert_array_equal(cloud.at_edge, (columns >= 18) & (columns < 22))


def test_nothing_is_refused():
    with pytest.raises(ScanFault, match=r"^no usable point in a\.ply; at least 500 points are needed$"):
        thin([scan_of(np.empty((0, 3)), np.zeros(0, int), 1, (ViewHead("v"),))])
