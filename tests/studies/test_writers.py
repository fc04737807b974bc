"""Writers: what they write is read back by other libraries, or by hand from the format's text."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import open3d as o3d
import pye57
import pytest
import trimesh

from scanmass.scans.load import load
from scanmass.studies.bodies import box, with_cavity
from scanmass.studies.ray_casting import Scene
from scanmass.studies.scanner import Sensor, View, look
from scanmass.studies.sensor_errors import SensorErrors
from scanmass.studies.stations import ring
from scanmass.studies.write_e57 import write_e57
from scanmass.studies.write_meshes import write_obj, write_stl
from scanmass.studies.write_points import merged, write_pcd, write_ply, write_range_ply, write_xyz

CRATE = with_cavity(box("crate", (0.3, 0.2, 0.1)), box("hollow", (0.1, 0.1, 0.05)))


@pytest.fixture(scope="module")
def views() -> list[View]:
    sensor = Sensor(60, 70, 0.5, SensorErrors(white_std=1e-4, drop_out=0.1))
    return [look(Scene([CRATE]), sensor, pose, index=k) for k, pose in enumerate(ring((0, 0, 0), 1.0, 30.0, (0, 90)))]


def test_ply_and_pcd_are_read_by_another_library(tmp_path: Path, views: list[View]) -> None:
    points, number, _ = merged(views)
    write_ply(tmp_path / "a.ply", 1000 * points, number, "unit mm")
    write_pcd(tmp_path / "a.pcd", 1000 * points)
    ply = o3d.t.io.read_point_cloud(str(tmp_path / "a.ply"))
    pcd = o3d.t.io.read_point_cloud(str(tmp_path / "a.pcd"))
    single = (1000 * points).astype(np.float32)
    np.testing.assert_array_equal(ply.point.positions.numpy(), single)
    np.testing.assert_array_equal(ply.point["view"].numpy().ravel(), number)
    np.testing.assert_array_equal(pcd.point.positions.numpy(), single)


def test_the_range_grid_tells_the_pixel_of_every_point(tmp_path: Path, views: list[View]) -> None:
    path = tmp_path / "grid.ply"
    write_range_ply(path, views[0], 0.001, "unit mm")
    head, body = path.read_bytes().split(b"end_header\n", 1)
    n = len(views[0].points)
    assert b"obj_info num_cols 70\nobj_info num_rows 60" in head
    points = np.frombuffer(body, ">f4", 3 * n).reshape(-1, 3)
    np.testing.assert_array_equal(points, (views[0].points * 1000).astype(">f4"))
    at, pixels = 12 * n, []
    for pixel in range(60 * 70):
        full = body[at]
        at += 1
        if full:
            assert int.from_bytes(body[at : at + 4], "big") == len(pixels)
            pixels.append(pixel)
            at += 4
    assert at == len(body)
    np.testing.assert_array_equal(pixels, views[0].rows * 70 + views[0].columns)


def test_the_package_reads_back_pixels_and_views(tmp_path: Path, views: list[View]) -> None:
    write_range_ply(tmp_path / "grid.ply", views[0], 0.001, "unit mm")
    points, number, _ = merged(views)
    write_xyz(tmp_path / "a.xyz", points / 0.0254, number, 6)
    (grid,), (text,) = load([tmp_path / "grid.ply"], "mm"), load([tmp_path / "a.xyz"], "inch")
    blocks = list(grid.blocks())
    np.testing.assert_array_equal(np.concatenate([block.rows for block in blocks]), views[0].rows)
    np.testing.assert_array_equal(np.concatenate([block.columns for block in blocks]), views[0].columns)
    # Six decimals of an inch: 13 nm; single precision of 1000 mm: 30 nm.
    np.testing.assert_allclose(grid.points(), views[0].points, atol=1e-7)
    assert len(text.views) == 2
    for k, view in enumerate(views):
        back = np.concatenate([block.points for block in text.blocks() if block.view == k])
        np.testing.assert_allclose(back, view.points, atol=2e-8)


def test_e57_keeps_poses_pixels_and_misses(tmp_path: Path, views: list[View]) -> None:
    path = tmp_path / "a.e57"
    write_e57(path, views, "crate")
    first = path.read_bytes()
    write_e57(path, views, "crate")
    assert path.read_bytes() == first
    file = pye57.E57(str(path))
    assert file.scan_count == 2
    for k, view in enumerate(views):
        raw = file.read_scan_raw(k)
        valid = raw["cartesianInvalidState"] == 0
        assert len(valid) == 60 * 70
        np.testing.assert_array_equal(raw["rowIndex"][valid], view.rows)
        np.testing.assert_array_equal(raw["columnIndex"][valid], view.columns)
        world = file.read_scan(k, transform=True, ignore_missing_fields=True)
        # Single precision within 1 m of the sensor: 6e-8.
        seen = np.stack([world[f"cartesian{axis}"] for axis in "XYZ"], axis=1)
        np.testing.assert_allclose(seen, view.points, atol=2e-7)
        np.testing.assert_allclose(file.get_header(k).translation, view.pose.position)
    file.close()


def test_meshes_are_read_by_another_library(tmp_path: Path) -> None:
    rounded = CRATE.rounded(0.001)
    write_stl(tmp_path / "a.stl", rounded, 0.001, "crate")
    write_obj(tmp_path / "a.obj", CRATE, 0.0254, "crate")
    for name, body, unit, rel in (("a.stl", rounded, 0.001, 1e-12), ("a.obj", CRATE, 0.0254, 1e-8)):
        mesh = trimesh.load(tmp_path / name, force="mesh")
        assert mesh.is_watertight
        # The rounded crate is kept exactly by STL; nine decimals of an inch are 1e-10 of its sides.
        assert mesh.volume * unit**3 == pytest.approx(body.moments()[0], rel=rel)
        # Rounding to single precision moves its faces by up to 6e-8 of their distance.
        assert mesh.volume * unit**3 == pytest.approx(0.3 * 0.2 * 0.1 - 0.1 * 0.1 * 0.05, rel=3e-7)
