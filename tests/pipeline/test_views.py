"""Several views through the whole chain: in frames of their own, by given poses, shared; and what is refused."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.spatial.transform import Rotation

import scanmass
from scanmass.errors import Declined, ScanFault
from scanmass.report.rows import rows
from scanmass.report.schema import validate
from scanmass.studies.bodies import Body, from_solid, solid_modeller
from scanmass.studies.ray_casting import Scene
from scanmass.studies.scanner import Pose, Sensor, look
from scanmass.studies.sensor_errors import SensorErrors
from tests.pipeline import pebble

FloatArray = NDArray[np.float64]

ERRORS = SensorErrors(white_std=0.00005, incidence_growth=0.5, footprint=0.5, steepest=np.radians(80.0))
STATIONS = np.array(
    [[1, 0.2, 0.5], [-0.6, 1, 0.4], [-0.6, -1, 0.45], [0.7, 0.9, -0.7], [-1, 0.1, -0.75], [0.5, -1, -0.6]]
)
NO_FIT = (
    "do not overlap",
    "do not fit together",
    "contradict each other",
    "fit in two ways",
    "can slide on each other",
    "overlap in only",
)
"""What is seen of views that do not belong together depends on their shapes."""


def lump() -> Body:
    """A rounded body of 160 mm whose sides all differ: balls of three sizes and a leg in one skin, and a bore."""
    m = solid_modeller()

    def ball(radius: float, place: Sequence[float]) -> Any:
        return m.Manifold.sphere(radius, 48).translate(tuple(place))

    trunk = m.Manifold.batch_hull(
        [ball(0.03, (-0.05, 0, 0)), ball(0.02, (0.05, 0.01, 0.0)), ball(0.015, (0.0, -0.03, 0.03))]
    )
    leg = m.Manifold.batch_hull([ball(0.012, (0.03, 0.0, 0.0)), ball(0.01, (0.045, 0.05, -0.03))])
    ear = m.Manifold.batch_hull([ball(0.01, (-0.05, 0.0, 0.02)), ball(0.007, (-0.075, -0.02, 0.045))])
    bore = m.Manifold.cylinder(0.06, 0.008, 0.008, 48).translate((-0.03, 0.0, 0.005))
    return from_solid("lump", trunk + leg + ear - bore)


def seen_from(body: Body, stations: FloatArray = STATIONS, pixels: int = 110, seed: int = 0) -> list[FloatArray]:
    """The points (n, 3) that a scanner sees from each station, in the body's frame."""
    scene, sensor = Scene([body]), Sensor(pixels, pixels, 0.5, ERRORS)
    places = 0.36 * stations / np.linalg.norm(stations, axis=1, keepdims=True)
    poses = [Pose(tuple(float(x) for x in place), (0.0, 0.0, 0.0)) for place in places]  # type: ignore[arg-type]
    return [look(scene, sensor, pose, seed=seed, index=k).points for k, pose in enumerate(poses)]


def moves(n: int, seed: int = 1) -> FloatArray:
    """Motions (n, 4, 4) by any turn and up to some 0.2 m; the first none."""
    rng = np.random.default_rng(seed)
    found = np.tile(np.eye(4), (n, 1, 1))
    found[1:, :3, :3] = Rotation.random(n - 1, random_state=rng).as_matrix()
    found[1:, :3, 3] = rng.normal(0.0, 0.1, (n - 1, 3))
    return found


def moved(points: FloatArray, motion: FloatArray) -> FloatArray:
    result: FloatArray = points @ motion[:3, :3].T + motion[:3, 3]
    return result


def written(folder: Path, views: Sequence[FloatArray]) -> list[Path]:
    """Each view as a file in mm: v0.ply and on."""
    return [pebble.write_ply(folder / f"v{k}.ply", 1000.0 * points) for k, points in enumerate(views)]


def settings(**scan: Any) -> dict[str, Any]:
    result = pebble.settings()
    result["scan"] |= scan
    return result


@pytest.fixture(scope="module")
def shared_views() -> list[FloatArray]:
    return seen_from(lump())


@pytest.fixture(scope="module")
def motions() -> FloatArray:
    return moves(6)


@pytest.fixture(scope="module")
def own_views(shared_views: list[FloatArray], motions: FloatArray) -> list[FloatArray]:
    return [moved(points, motion) for points, motion in zip(shared_views, motions, strict=True)]


def test_own_frames_end_where_shared_ones_do(
    shared_views: list[FloatArray], own_views: list[FloatArray], motions: FloatArray, tmp_path: Path
) -> None:
    (tmp_path / "s").mkdir()
    shared = scanmass.measure(written(tmp_path / "s", shared_views), settings())
    own = scanmass.measure(written(tmp_path, own_views), settings(frames="own"))
    validate(own.document)
    validate(shared.document)
    assert (own["views"]["frames"], shared["views"]["frames"]) == ("own", "shared")
    assert own["views"]["symmetric"] is None
    assert shared["views"]["poses"] is None
    # Any turn and place is found to a tenth of a degree and 0.3 mm: noise of 0.05 mm over thousands of samples, and
    # what the normals of 90 x 90 pixels are off by.
    for found, motion in zip(np.array(own["views"]["poses"]), motions, strict=True):
        left = found @ motion
        assert np.degrees(Rotation.from_matrix(left[:3, :3]).magnitude()) < 0.15
        assert np.abs(moved(shared_views[0], left) - shared_views[0]).max() < 3e-4
    # 0.1 mm all over would be 0.8 % of the volume; what is left of the alignment is a tenth of that.
    assert own["volume_m3"]["value"] == pytest.approx(shared["volume_m3"]["value"], rel=1e-3)
    true = lump().moments()
    for result in (own, shared):
        volume, centre = result["volume_m3"], result["center_of_mass_m"]
        # The bore is seen to a third of its depth: its 5 cm3 of 367 are the greater part of what is missed.
        assert volume["value"] == pytest.approx(true[0], rel=0.015)
        np.testing.assert_allclose(centre["value"], true[1:4] / true[0], atol=4e-4)
    pairs = own["views"]["pairs"]
    assert {(p["first"], p["second"]) for p in pairs} >= {("v0.ply", "v1.ply")}
    assert all(0.05 <= p["overlap"] <= 1.0 and p["rms_m"] < 2e-4 for p in pairs)
    scan = next(section for section in rows(own.document) if section.title == "Measured: the scan")
    said = next(row.remark for row in scan.rows if row.label == "views")
    assert said.startswith(f"aligned to the first; {len(pairs)} pairs overlap, at most ")


def test_given_poses_lay_views_as_their_files_would(
    shared_views: list[FloatArray], own_views: list[FloatArray], motions: FloatArray, tmp_path: Path
) -> None:
    back = np.linalg.inv(motions)
    poses = {f"v{k}.ply": " ".join(f"{x:.9f}" for x in pose.ravel()) + " m" for k, pose in enumerate(back)}
    quaternion = Rotation.from_matrix(back[2][:3, :3]).as_quat()[[3, 0, 1, 2]]
    poses["v2.ply"] = " ".join(f"{x:.9f}" for x in (*quaternion, *(1000.0 * back[2][:3, 3]))) + " mm"
    files = written(tmp_path, own_views)
    given = scanmass.measure(files, settings(poses=poses))
    assert given["views"]["frames"] == "poses"
    np.testing.assert_allclose(given["views"]["poses"], back, atol=1e-7)
    assert given["volume_m3"]["value"] == pytest.approx(lump().moments()[0], rel=0.015)
    with pytest.raises(ScanFault, match=r"no pose is given for the view v5\.ply"):
        scanmass.measure(files, settings(poses={name: poses[name] for name in list(poses)[:5]}))


def texts(poses: FloatArray, kind: str) -> dict[str, str]:
    """Poses as text under the names of the files: a matrix in m, or a quaternion in the wrong order."""
    result = {}
    for k, pose in enumerate(poses):
        q = Rotation.from_matrix(pose[:3, :3]).as_quat()
        numbers = pose.ravel() if kind == "matrix" else np.append(q, pose[:3, 3])
        result[f"v{k}.ply"] = " ".join(f"{x:.9f}" for x in numbers) + " m"
    return result


def test_poses_in_the_wrong_convention_are_recognised(
    own_views: list[FloatArray], motions: FloatArray, tmp_path: Path
) -> None:
    files = written(tmp_path, own_views)
    back = np.linalg.inv(motions)
    longer = back.copy()
    longer[:, :3, 3] *= 1000.0
    cases = (
        (texts(motions, "matrix"), r"taken the other way round, from the object to the view \(the inverse\)"),
        (texts(back, "x y z w"), "with their quaternions read as x y z w"),
        (texts(longer, "matrix"), r"with their translations 0\.001 times as long \(another unit\)"),
    )
    for poses, words in cases:
        with pytest.raises(
            Declined, match=rf"^with the poses given, the views v\d\.ply and v\d\.ply .*they fit {words}"
        ):
            scanmass.measure(files, settings(poses=poses))


def test_own_frames_taken_for_shared_are_refused(own_views: list[FloatArray], tmp_path: Path) -> None:
    near = [points - points.mean(axis=0) for points in own_views]
    with pytest.raises(Declined, match=r"^the views v\d\.ply and v\d\.ply are not in one frame: .*scan\.frames to own"):
        scanmass.measure(written(tmp_path, near), settings())


def refusal(folder: Path, views: Sequence[FloatArray], fault: type[Exception]) -> str:
    with pytest.raises(fault) as caught:
        scanmass.measure(written(folder, views), settings(frames="own"))
    return str(caught.value)


def test_what_cannot_be_aligned_is_refused_in_words(own_views: list[FloatArray], tmp_path: Path) -> None:
    # From two stations that face each other nothing is seen twice but slivers.
    apart = seen_from(lump(), np.array([[0.0, 0.05, 1.0], [0.0, 0.05, -1.0]]), pixels=70)
    said = refusal(tmp_path, apart, Declined)
    assert "the views v0.ply and v1.ply" in said
    assert any(words in said for words in NO_FIT)
    copy = own_views[0] @ Rotation.random(random_state=5).as_matrix().T
    said = refusal(tmp_path, [own_views[0], own_views[1], np.round(copy[::-1], 5)], ScanFault)
    assert said.startswith("v2.ply holds the same points as v0.ply, at most moved or rounded")
    inch = [own_views[0], own_views[1] / 25.4, own_views[2]]
    said = refusal(tmp_path, inch, Declined)
    assert "v1.ply differ in size" in said
    assert "near 25.4, as if one were in inch and read in mm; export all views in one unit" in said


def test_a_mirrored_view_is_recognised(own_views: list[FloatArray], tmp_path: Path) -> None:
    said = refusal(tmp_path, [own_views[2], own_views[5] * [1.0, -1.0, 1.0], own_views[4]], Declined)
    assert said.startswith("v1.ply fits v0.ply only as its mirror image: one of the two is mirrored; export it again")


def test_views_of_two_objects_are_refused(own_views: list[FloatArray], tmp_path: Path) -> None:
    from scanmass.studies.bodies import box

    other = seen_from(box("crate", (0.11, 0.07, 0.05)), STATIONS[3:4])[0]
    said = refusal(tmp_path, [own_views[0], own_views[1], other], Declined)
    assert "v2.ply" in said
    assert any(words in said for words in NO_FIT)
