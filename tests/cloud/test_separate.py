"""Support, clutter and pieces: what is the object's own stays, what is not goes, each with its reason."""

from __future__ import annotations

import numpy as np
import pytest

from scanmass.cloud.cloud import REASONS
from scanmass.cloud.separate import separate
from scanmass.errors import ScanFault
from tests.cloud.bodies import SHIFT, TURN, body, cloud_of, sampled, standing

BODIES = ("box", "short cylinder", "plate", "bracket", "plate with boss", "bowl", "casting", "torus")


@pytest.mark.parametrize("n", [500, 12_000])
@pytest.mark.parametrize("name", BODIES)
def test_an_own_face_is_never_removed(name, n):
    points, _ = sampled(body(name), n)
    done = separate(cloud_of(points @ TURN.T))
    assert len(done.cloud.points) == n
    assert done.up is None
    assert done.contact_height is None


@pytest.mark.parametrize("on", ["floor", "table", "disc"])
@pytest.mark.parametrize("name", BODIES)
def test_a_support_goes_and_the_object_stays(name, on):
    scene, own = standing(name, on, 5000 if on == "floor" else 16_000)
    done = separate(cloud_of(scene))
    kept = np.isin(scene[:, 0], done.cloud.points[:, 0])
    # What is lost of the object lies within four sigma (0.8 % of the size) of the support.
    assert ((scene - SHIFT) @ TURN)[own & ~kept, 2].max(initial=0.0) < 0.03
    assert kept[~own].mean() < 0.01
    assert len(done.removed.points) == (~kept).sum()
    reason = "turntable" if on == "disc" else "support plane"
    assert np.mean(done.removed.reason == REASONS.index(reason)) > 0.9
    assert done.up is not None
    assert done.contact_height is not None
    # Thousands of samples at 0.2 % of the size, over more than the size: the normal within a fraction of a degree.
    assert done.up @ TURN[:, 2] > np.cos(np.radians(0.5))
    assert abs(done.contact_height - SHIFT @ done.up) < 0.01


def test_none_takes_nothing():
    scene, _ = standing("box", "table", 4000)
    done = separate(cloud_of(scene), support="none")
    assert len(done.cloud.points) == len(scene)


def test_a_declared_up_rules_out_other_planes():
    scene, own = standing("box", "table", 6000)
    upright = separate(cloud_of(scene), up=2.0 * TURN[:, 2])
    assert upright.up is not None
    assert upright.contact_height is not None
    np.testing.assert_allclose(upright.up, TURN[:, 2])
    assert abs(upright.contact_height - SHIFT @ TURN[:, 2]) < 0.002
    sideways = separate(cloud_of(scene), up=TURN[:, 0])
    assert len(sideways.cloud.points) == len(scene)
    assert sideways.contact_height is None
    assert own.any()


def test_clutter_goes_and_is_counted():
    points, _ = sampled(body("box"), 12_000)
    scrap = 0.1 * sampled(body("box"), 200, seed=1)[0] + (0.8, 0, 0)
    done = separate(cloud_of(np.concatenate([points, scrap])))
    assert len(done.cloud.points) == 12_000
    assert (done.removed.reason == REASONS.index("clutter")).all()
    assert [note.code for note in done.assumptions] == ["clutter-removed"]
    assert "1.6 % of the points" in done.assumptions[0].text


def test_pieces_of_one_object_stay_together():
    sphere = sampled(body("hollow sphere"), 20_000)[0]
    caps = sphere[(np.abs(sphere[:, 2]) > 0.1) & (np.linalg.norm(sphere, axis=1) > 0.4)]
    plate, normals = sampled(body("plate"), 20_000, noise=0.0)
    plate[:, 2] *= 5.0
    faces = plate[np.abs(normals[:, 2]) > 0.9]
    for points in (sphere, caps, faces):
        assert len(separate(cloud_of(points), support="none").cloud.points) == len(points)


def test_two_objects_are_refused():
    points, _ = sampled(body("box"), 12_000)
    with pytest.raises(
        ScanFault, match=r"^the scan holds 2 separate objects of similar size \(1\d\d\d mm, 1\d\d\d mm\)"
    ):
        separate(cloud_of(np.concatenate([points, points + (1.2, 0, 0)])))


def test_the_seed_settles_it():
    scene, _ = standing("casting", "disc", 6000)
    one, other = (separate(cloud_of(scene), seed=4) for _ in range(2))
    np.testing.assert_array_equal(one.cloud.points, other.cloud.points)
    np.testing.assert_array_equal(one.removed.reason, other.removed.reason)
