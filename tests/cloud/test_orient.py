"""Outward normals on bodies whose normals are known, by each method; refusals where they cannot be told."""

from __future__ import annotations

import numpy as np
import pytest

from scanmass.cloud.normals import raw_normals
from scanmass.cloud.orient import orient
from scanmass.cloud.separate import separate
from scanmass.errors import Declined
from tests.cloud.bodies import SHIFT, TURN, body, cloud_of, sampled, standing


def right(oriented, normals) -> float:
    assert oriented.cloud.normals is not None
    np.testing.assert_allclose(np.linalg.norm(oriented.cloud.normals, axis=1), 1.0, atol=1e-12)
    return float(np.mean(np.einsum("ij,ij->i", oriented.cloud.normals, normals) > 0))


@pytest.mark.parametrize(
    ("name", "n", "least"),
    # The shares DESIGN gives for rays and votes are 0.993-0.999; edges, where the true normal jumps, take the rest.
    [
        ("box", 500, 0.99),
        ("box", 20_000, 0.995),
        ("torus", 500, 0.99),
        ("torus", 20_000, 0.999),
        ("casting", 20_000, 0.995),
        ("open base", 20_000, 0.995),
        ("hollow sphere", 20_000, 0.999),
        ("bowl", 100_000, 0.995),
    ],
)
def test_escape_rays(name, n, least):
    points, normals = sampled(body(name), n)
    done = orient(cloud_of(points))
    assert done.method == "escape rays"
    assert done.undecided < 0.01
    assert right(done, normals) >= least


def test_uneven_sampling():
    points, normals = sampled(body("casting"), 40_000)
    keep = (points[:, 0] > 0) | (np.random.default_rng(99).random(len(points)) < 0.04)
    assert right(orient(cloud_of(points[keep])), normals[keep]) > 0.98


def test_a_floor_closes_an_unseen_underside():
    scene, own = standing("casting", "floor", 40_000)
    alone = separate(cloud_of(scene))
    assert alone.up is not None
    assert alone.contact_height is not None
    assert own.any()
    # Open below, rays from the bores' far side leave through the base: too many samples have no side, or the wrong one.
    done = orient(alone.cloud, floor=(alone.up, alone.contact_height))
    points = (done.cloud.points - SHIFT) @ TURN
    assert done.cloud.normals is not None
    normals = done.cloud.normals @ TURN
    top = (points[:, 2] > 0.2) & (np.hypot(*points[:, :2].T) > 0.14)
    bore = np.hypot(*points[:, :2].T) < 0.13
    axis = np.hypot(*points[:, :2].T)[:, None]
    inward = -np.einsum("ij,ij->i", normals[:, :2], points[:, :2] / axis)
    assert np.mean(normals[top, 2] > -0.3) > 0.99
    assert np.mean(inward[bore & (np.abs(normals[:, 2]) < 0.3)] > 0) > 0.97
    assert done.undecided < 0.02


def test_rotated_alike():
    points, normals = sampled(body("casting"), 8000)
    turn = np.linalg.qr(np.random.default_rng(3).normal(size=(3, 3)))[0]
    assert right(orient(cloud_of(points @ turn.T + 7.0)), normals @ turn.T) > 0.99


def test_scanner_positions_lead():
    points, normals = sampled(body("torus"), 10_000)
    scanners = 4.0 * np.array([[1.0, 0, 0.8], [-1, 0.5, 0.8], [0, -1, -0.9], [0, 1, -0.9]])
    sight = scanners[None] - points[:, None]
    cosine = np.einsum("ijk,ik->ij", sight, normals) / np.linalg.norm(sight, axis=2)
    view = cosine.argmax(axis=1)
    seen = cosine.max(axis=1) > 0.05
    done = orient(cloud_of(points[seen], view[seen], scanners))
    assert done.method == "scanner"
    # Real views: 99.5-99.8 % (DESIGN section 4).
    assert right(done, normals[seen]) > 0.995
    np.testing.assert_array_equal(done.cloud.view, view[seen])
    some = scanners.copy()
    some[1:3] = np.nan
    assert orient(cloud_of(points[seen], view[seen], some)).method == "mixed"


def test_scanners_inside_the_object_are_not_believed():
    points, normals = sampled(body("box"), 6000)
    done = orient(cloud_of(points, scanners=np.zeros((1, 3))))
    assert done.method == "escape rays"
    assert [note.code for note in done.warnings] == ["scanner-positions-doubtful"]
    assert right(done, normals) > 0.99


@pytest.mark.parametrize(
    ("kind", "method", "codes"),
    [
        ("good", "file", []),
        ("inverted", "file", ["file-normals-inverted"]),
        ("random side", "escape rays", ["file-normals-ignored"]),
        ("garbage", "escape rays", ["file-normals-ignored"]),
        ("zero", "escape rays", ["file-normals-ignored"]),
    ],
)
def test_file_normals_are_checked(kind, method, codes):
    points, normals = sampled(body("casting"), 10_000)
    rng = np.random.default_rng(5)
    given = {
        "good": normals,
        "inverted": -normals,
        "random side": normals * rng.choice([-1.0, 1.0], (len(normals), 1)),
        "garbage": rng.normal(size=normals.shape),
        "zero": np.zeros_like(normals),
    }[kind]
    done = orient(cloud_of(points, file_normals=given))
    assert done.method == method
    assert [note.code for note in done.warnings] == codes
    assert right(done, normals) > 0.995


@pytest.mark.parametrize(
    ("sides", "said"),
    [((1, 1, 0.001), "in one plane"), ((1, 0.5, 0.02), "in one plane"), ((1, 0.001, 0.001), "on a line")],
)
def test_a_sheet_and_a_line_are_called_so(sides, said):
    points = np.random.default_rng(99).uniform(-0.5, 0.5, size=(4000, 3)) * sides
    turn = np.linalg.qr(np.random.default_rng(98).normal(size=(3, 3)))[0]
    with pytest.raises(Declined, match=f"^but for noise all points lie {said}, so there is no inside to weigh; scan"):
        orient(cloud_of(points @ turn))


@pytest.mark.parametrize("case", ["walls too thin", "cavity too coarse"])
def test_refused_where_the_sides_cannot_be_told(case):
    name, n = {"walls too thin": ("thin closed box", 60_000), "cavity too coarse": ("hollow sphere", 500)}[case]
    points, _ = sampled(body(name), n)
    said = r"^for \d+ % of the points outside cannot be told from inside; give a scan with"
    with pytest.raises(Declined, match=said):
        orient(cloud_of(points))


def test_normals_take_more_neighbours_where_there_is_more_noise():
    clean, normals = sampled(body("torus"), 20_000, noise=0.0002)
    noisy, _ = sampled(body("torus"), 20_000, noise=0.004)
    few, many = raw_normals(clean), raw_normals(noisy)
    assert few.used < many.used
    # The aim is 0.07 rad about each axis: 4.7 degrees in all for the median, and as much for the bend of the tube.
    for raw in (few, many):
        turn = np.abs(np.einsum("ij,ij->i", raw.normals, normals))
        assert np.degrees(np.arccos(np.median(turn))) < 9.4
    assert many.noise == pytest.approx(0.004, rel=0.1)
