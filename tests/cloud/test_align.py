"""Alignment by itself: where scanners stood, symmetric bodies, ways that are as good, the same answer every time."""

from __future__ import annotations

import subprocess
import sys
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

from scanmass.cloud.align import align
from scanmass.cloud.align_eye import density, find_eye
from scanmass.cloud.align_samples import ViewSamples, view_samples
from scanmass.cloud.align_votes import votes
from scanmass.cloud.normals import raw_normals
from scanmass.errors import Declined
from scanmass.geometry.neighbours import median_spacing
from scanmass.studies.bodies import Body, box, from_solid, solid_modeller
from scanmass.studies.ray_casting import Scene
from scanmass.studies.scanner import Pose, Sensor, look
from scanmass.studies.sensor_errors import SensorErrors

FloatArray = NDArray[np.float64]

SENSOR = Sensor(90, 90, 0.5, SensorErrors(white_std=0.00005, steepest=np.radians(80.0)))
ROUND = np.array([[1, 0.1, 0.5], [-0.5, 1, 0.4], [-0.5, -1, 0.6], [0.4, 0.3, -1]])


def vase() -> Body:
    m = solid_modeller()
    profile = np.array([[0, 0], [0.05, 0], [0.06, 0.03], [0.04, 0.08], [0.045, 0.12], [0, 0.12]])
    return from_solid("vase", m.Manifold.revolve(m.CrossSection([profile]), 180)).moved(np.eye(3), (0.0, 0.0, -0.06))


@cache
def views(name: str) -> tuple[ViewSamples, ...]:
    """Four views, each turned and moved at random."""
    scene, rng = Scene([vase() if name == "vase" else box("crate", (0.1, 0.07, 0.05))]), np.random.default_rng(3)
    found = []
    for k, direction in enumerate(ROUND / np.linalg.norm(ROUND, axis=1, keepdims=True)):
        points = look(scene, SENSOR, Pose(tuple(0.32 * direction), (0.0, 0.0, 0.0)), index=k).points
        points = Rotation.random(random_state=rng).apply(points) + rng.normal(0.0, 0.1, 3)
        found.append(view_samples(f"v{k}", points, np.ones(len(points), np.int32), 0.15))
    return tuple(found)


def test_the_place_of_a_scanner_is_told_from_the_density() -> None:
    place = np.array([0.25, 0.1, 0.2])
    points = look(Scene([vase()]), SENSOR, Pose(tuple(place), (0.0, 0.0, 0.0))).points
    raw, asked = raw_normals(points), np.arange(0, len(points), 2)
    found = find_eye(
        points[asked],
        raw.normals[asked],
        density(points, np.ones(len(points), np.int32), asked),
        1.4 * median_spacing(points),
    )
    assert found is not None
    # A thousand densities of 16 neighbours, each off by a tenth: a degree or two; the range tells itself less well.
    middle = points.mean(axis=0)
    a, b = found - middle, place - middle
    assert np.degrees(np.arccos(a @ b / np.linalg.norm(a) / np.linalg.norm(b))) < 6.0
    assert 0.7 < np.linalg.norm(a) / np.linalg.norm(b) < 1.4
    # What was sampled evenly was seen from no one place.
    rng = np.random.default_rng(0)
    ball = rng.normal(size=(6000, 3))
    ball = 0.1 * ball[ball[:, 2] > 0] / np.linalg.norm(ball[ball[:, 2] > 0], axis=1, keepdims=True)
    asked = np.arange(0, len(ball), 2)
    dense = density(ball, np.ones(len(ball), np.int32), asked)
    assert find_eye(ball[asked], ball[asked] / 0.1, dense, 1.4 * median_spacing(ball)) is None


def test_votes_find_a_motion_without_any_draw() -> None:
    rng = np.random.default_rng(0)
    points = rng.uniform(-1.0, 1.0, (60, 3))
    normals = rng.normal(size=(60, 3))
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    turn, shift = Rotation.random(random_state=1), np.array([3.0, -2.0, 1.0])
    scene = np.concatenate([turn.apply(points) + shift, turn.apply(normals)], axis=1)
    found = votes(np.concatenate([points, normals], axis=1), scene, 0.1)
    # Bins of 12 degrees about each normal: within 12 of the truth, since each vote's normals are exact.
    left = found.poses[0][:3, :3] @ turn.as_matrix()
    assert np.degrees(Rotation.from_matrix(left).magnitude()) < 12.0
    again = votes(np.concatenate([points, normals], axis=1), scene, 0.1)
    np.testing.assert_array_equal(found.poses, again.poses)


def test_a_body_of_revolution_is_named() -> None:
    found = align(views("vase"))
    assert found.symmetric is not None
    assert found.symmetric.startswith("views can turn freely about an axis through (")
    note = next(note for note in found.warnings if note.code == "views-slide")
    assert "Their relative turn or place along it is not known; mass and centre of mass are hardly touched" in note.text
    # Whatever their turn, the views lie on one vase: noise of 0.05 mm twice, and what its facets differ by.
    assert len(found.pairs) >= 4
    assert max(pair.rms for pair in found.pairs) < 2e-4


def test_what_fits_in_several_ways_is_refused() -> None:
    # A crate without a mark fits itself four ways round.
    with pytest.raises(
        Declined, match=r"^the views v\d and v\d (fit in two ways|do not fit|contradict|do not overlap)"
    ):
        align(views("crate"))


def test_the_same_poses_again_and_in_another_process() -> None:
    code = (
        "import sys; sys.path.insert(0, sys.argv[1]); from tests.cloud.test_align import align, views; "
        "print(align(views('vase')[:2]).poses.tobytes().hex())"
    )
    root = str(Path(__file__).parents[2])
    here = align(views("vase")[:2]).poses
    np.testing.assert_array_equal(align(views("vase")[:2]).poses, here)
    there = subprocess.run([sys.executable, "-c", code, root], capture_output=True, text=True, check=True, cwd=root)
    np.testing.assert_array_equal(np.frombuffer(bytes.fromhex(there.stdout.strip())).reshape(-1, 4, 4), here)
