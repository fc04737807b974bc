"""The depth sensor: exact when perfect, and each error as stated when switched on."""

from __future__ import annotations

import ast
from pathlib import Path

import numpy as np
import pytest

import scanmass
from scanmass.studies.bodies import box, turned
from scanmass.studies.ray_casting import Scene
from scanmass.studies.scanner import STRAY, Pose, Sensor, View, look
from scanmass.studies.sensor_errors import SensorErrors, image_field, lattice_field
from scanmass.studies.stations import ring

WALL = box("wall", (20.0, 1.0, 20.0), (0.0, 1.5, 0.0))
FACING = Pose((0.0, 0.0, 0.0), (0.0, 1.0, 0.0))
"""A sensor 1 m in front of the wall's face y = 1."""


def looked(errors: SensorErrors, *, seed: int = 0, index: int = 0, pose: Pose = FACING) -> View:
    return look(Scene([WALL]), Sensor(100, 100, 0.1, errors), pose, seed=seed, index=index)


def test_a_perfect_sensor_meets_the_body() -> None:
    rotation = turned((20.0, 30.0, 40.0))
    body = box("crate", (1.0, 0.8, 0.6)).moved(rotation, (3.0, -2.0, 1.0))
    for pose in ring((3.0, -2.0, 1.0), 4.0, 25.0, (0.0, 70.0, 200.0)):
        view = look(Scene([body]), Sensor(60, 80, 0.4), pose)
        local = (view.points - (3.0, -2.0, 1.0)) @ rotation
        beyond = np.max(np.abs(local) - (0.5, 0.4, 0.3), axis=1)
        # Double precision on the planes; where a ray meets an edge, single precision chose which plane.
        assert np.abs(beyond).max() < 1e-6
        assert np.median(np.abs(beyond)) < 1e-14
        assert len(view.points) > 500


def test_what_is_behind_is_hidden() -> None:
    screen = box("screen", (0.2, 0.01, 0.2), (0.0, 0.5, 0.0))
    view = look(Scene([WALL, screen]), Sensor(101, 101, np.radians(90.0)), FACING)
    on_wall = view.points[view.part == 0]
    # The screen's front at 0.495 m throws a shadow 0.1 / 0.495 wide on each side of the middle of the wall at 1 m.
    shadow = np.all(np.abs(on_wall[:, [0, 2]]) < 0.1 / 0.495, axis=1)
    assert not shadow.any()
    assert set(view.part) == {0, 1}
    assert np.all(view.points[view.part == 1, 1] < 0.51)


def test_rows_run_down_and_columns_to_the_right() -> None:
    view = looked(SensorErrors())
    first = view.points[(view.rows == 0) & (view.columns == 0)][0]
    last = view.points[(view.rows == 99) & (view.columns == 99)][0]
    assert first[2] > 0 > last[2]
    assert first[0] < 0 < last[0]
    np.testing.assert_allclose(view.in_sensor_frame()[:, 2], 1.0, rtol=1e-13)


@pytest.mark.parametrize(("degrees", "growth"), [(0.0, 0.0), (60.0, 0.0), (60.0, 1.0), (60.0, 2.0)])
def test_white_noise_grows_with_incidence(degrees: float, growth: float) -> None:
    away = np.radians(degrees)
    pose = Pose((float(np.tan(away)), 0.0, 0.0), (0.0, 1.0, 0.0))
    perfect = looked(SensorErrors(), pose=pose)
    noisy = looked(SensorErrors(white_std=1e-3, incidence_growth=growth), pose=pose)
    along = np.linalg.norm(noisy.points - pose.position, axis=1) - np.linalg.norm(
        perfect.points - pose.position, axis=1
    )
    # 10 000 pixels: the standard deviation is good to 0.7 %; incidence varies over the image by some 5 degrees.
    assert along.std() == pytest.approx(1e-3 * 2.0 ** (growth if degrees else 0.0), rel=0.03)
    assert abs(along.mean()) < 4 * along.std() / 100


def test_ranges_are_multiples_of_the_quantum() -> None:
    ranges = np.linalg.norm(looked(SensorErrors(white_std=1e-3, quantum=5e-4)).points, axis=1)
    steps = ranges / 5e-4
    np.testing.assert_allclose(steps, np.round(steps), atol=1e-9)


def test_mixed_pixels_float_between_both_depths_at_edges_only() -> None:
    screen = box("screen", (0.05, 0.01, 20.0), (0.0, 0.5, 0.0))
    sensor = Sensor(100, 100, 0.2, SensorErrors(footprint=1.0, mixing_jump=0.01))
    view = look(Scene([WALL, screen]), sensor, FACING)
    depth = view.points[:, 1]
    floating = (depth > 0.496) & (depth < 0.999)
    # The edges are two columns of 100 pixels each; the spot's second half crosses one in up to half of the cases.
    assert 20 < floating.sum() < 200
    assert len(np.unique(view.columns[floating])) <= 4


def test_the_smooth_field_has_its_deviation_and_length() -> None:
    rng = np.random.default_rng(2)
    length = 0.02
    places = rng.uniform(0.0, 1.0, (20_000, 3))
    step = rng.standard_normal((20_000, 3))
    step *= length / np.linalg.norm(step, axis=1, keepdims=True)
    both = lattice_field(np.concatenate([places, places + step, places + 0.1 * step]), length, rng).reshape(3, -1)
    # 20 000 places in 50**3 cells of the field: correlations are good to 0.007. Splines are no exact bell: 0.02.
    assert both[0].std() == pytest.approx(1.0, abs=0.02)
    assert np.mean(both[0] * both[1]) == pytest.approx(np.exp(-0.5), abs=0.04)
    assert np.mean(both[0] * both[2]) == pytest.approx(np.exp(-0.005), abs=0.02)

    image = image_field((400, 400), 8.0, rng)
    # Some (400 / 14)**2 = 800 patches that are independent: 2.5 % for the deviation, 0.035 for the correlation.
    assert image.std() == pytest.approx(1.0, abs=0.08)
    assert np.mean(image * np.roll(image, 8, axis=1)) / image.var() == pytest.approx(np.exp(-0.5), abs=0.08)


@pytest.mark.parametrize("place", ["object", "image"])
def test_a_view_gets_the_smooth_field_it_was_promised(place: str) -> None:
    errors = SensorErrors(field_std=1e-3, field_length=0.004, field_on=place)  # type: ignore[arg-type]
    ranges = np.linalg.norm(looked(errors).points, axis=1) - np.linalg.norm(looked(SensorErrors()).points, axis=1)
    # The image is 0.1 m wide at 1 m: 100 pixels of 1 mm, and (0.1 / 0.007)**2 = 200 independent patches: 5 %.
    assert ranges.std() == pytest.approx(1e-3, rel=0.2)
    picture = ranges.reshape(100, 100)
    assert np.mean(picture[:, 4:] * picture[:, :-4]) / ranges.var() == pytest.approx(np.exp(-0.5), abs=0.15)


def test_registration_turns_and_moves_about_the_place_looked_at() -> None:
    perfect = looked(SensorErrors()).points
    shifts, angles = [], []
    for index in range(150):
        moved = looked(SensorErrors(rotation_std=1e-3, shift_std=2e-3), index=index).points
        centre, seen = np.array(FACING.look_at), moved - moved.mean(axis=0)
        u, _, vt = np.linalg.svd((perfect - perfect.mean(axis=0)).T @ seen)
        rotation = vt.T @ np.diag([1.0, 1.0, np.linalg.det(vt.T @ u.T)]) @ u.T
        angles.append(
            [rotation[2, 1] - rotation[1, 2], rotation[0, 2] - rotation[2, 0], rotation[1, 0] - rotation[0, 1]]
        )
        shifts.append(moved.mean(axis=0) - centre - rotation @ (perfect.mean(axis=0) - centre))
    # 450 numbers each: standard deviations good to 3.3 %; gates at three of that.
    assert np.std(np.array(angles) / 2) == pytest.approx(1e-3, rel=0.1)
    assert np.std(shifts) == pytest.approx(2e-3, rel=0.1)


def test_common_errors_are_the_same_in_every_view() -> None:
    for index in (0, 1):
        perfect, off = looked(SensorErrors()), looked(SensorErrors(axial_shift=3e-4, incidence_bias=1e-4), index=index)
        along = np.linalg.norm(off.points, axis=1) - np.linalg.norm(perfect.points, axis=1)
        cosine = perfect.points[:, 1] / np.linalg.norm(perfect.points, axis=1)
        np.testing.assert_allclose(along, 3e-4 + 1e-4 * cosine, atol=1e-12)


def test_lost_and_false_returns() -> None:
    view = looked(SensorErrors(drop_out=0.1, strays=25))
    assert np.sum(view.part == STRAY) == 25
    # Of 10 000, binomial with 30 as standard deviation.
    assert np.sum(view.part == 0) == pytest.approx(9000, abs=150)
    steep = Pose((5.0, 0.0, 0.0), (0.0, 1.0, 0.0))
    assert len(looked(SensorErrors(steepest=np.radians(60.0)), pose=steep).points) == 0
    assert len(looked(SensorErrors(), pose=steep).points) == 10_000


def test_a_sensor_that_sees_nothing_says_so() -> None:
    away = Pose((0.0, 0.0, 0.0), (0.0, -1.0, 0.0))
    errors = SensorErrors(white_std=1e-3, field_std=1e-3, footprint=1.0, quantum=1e-3)
    assert len(looked(errors, pose=away).points) == 0


def test_errors_come_from_streams_of_their_own() -> None:
    first, again = looked(SensorErrors(white_std=1e-3), seed=5), looked(SensorErrors(white_std=1e-3), seed=5)
    np.testing.assert_array_equal(first.points, again.points)
    assert np.abs(first.points - looked(SensorErrors(white_std=1e-3), seed=5, index=1).points).max() > 1e-4
    both = looked(SensorErrors(white_std=1e-3, axial_shift=0.25, drop_out=0.5), seed=5)
    kept = np.isin(first.rows * 100 + first.columns, both.rows * 100 + both.columns)
    moved = np.linalg.norm(both.points, axis=1) - np.linalg.norm(first.points[kept], axis=1)
    np.testing.assert_allclose(moved, 0.25, atol=1e-12)


@pytest.mark.parametrize("up", [(0.0, 0.0, 1.0), (0.0, 1.0, 0.0)])
def test_a_pose_is_a_rotation(up: tuple[float, float, float]) -> None:
    rotation = Pose((1.0, 2.0, 3.0), (0.0, 0.5, -1.0), up).rotation_scene_from_sensor()
    np.testing.assert_allclose(rotation @ rotation.T, np.eye(3), atol=1e-15)
    assert np.linalg.det(rotation) == pytest.approx(1.0)
    with pytest.raises(ValueError, match=r"cannot look at \(0\.0, 0\.0, 1\.0\) with up \(0\.0, 0\.0, 1\.0\)"):
        Pose((0.0, 0.0, 0.0), (0.0, 0.0, 1.0)).rotation_scene_from_sensor()


@pytest.mark.parametrize("module", ["scanner", "sensor_errors", "ray_casting", "stations", "bodies"])
def test_the_simulator_shares_nothing_with_the_fit(module: str) -> None:
    tree = ast.parse((Path(scanmass.__file__).parent / "studies" / f"{module}.py").read_text(encoding="utf-8"))
    named = [node.module or "" for node in ast.walk(tree) if isinstance(node, ast.ImportFrom)]
    allowed = ("scanmass.studies", "scanmass.geometry.edges", "scanmass.geometry.polyhedron")
    assert all(name.startswith(allowed) or name == "scanmass" for name in named if name.startswith("scanmass"))
