"""LAS, LAZ and E57, written by laspy and pye57."""

from __future__ import annotations

from pathlib import Path

import laspy
import numpy as np
import pye57
import pytest
from scipy.spatial.transform import Rotation

from scanmass.errors import ScanFault
from scanmass.scans.load import load
from scanmass.scans.table import read


def write_las(path: Path, ball, sources: np.ndarray, version: str = "1.2", point_format: int = 3) -> Path:
    header = laspy.LasHeader(point_format=point_format, version=version)
    header.scales, header.offsets = [1e-4] * 3, [500, -500, 0]
    las = laspy.LasData(header)
    las.x, las.y, las.z = ball.points.T
    las.red, las.green, las.blue = ball.colours.T.astype(np.uint16) * 257
    las.point_source_id = sources
    las.write(path)
    return path


@pytest.mark.parametrize("suffix", ["las", "laz"])
@pytest.mark.parametrize(("version", "point_format"), [("1.2", 3), ("1.4", 7)])
def test_las_with_setups(tmp_path: Path, ball, suffix: str, version: str, point_format: int) -> None:
    sources = np.arange(600) % 4 + 11
    path = write_las(tmp_path / f"a.{suffix}", ball, sources, version, point_format)
    scan = read(path)
    assert [head.name for head in scan.views] == ["view 11", "view 12", "view 13", "view 14"]
    assert [note.code for note in scan.assumptions] == ["views-from-source-numbers"]
    assert (scan.unit, scan.total) == (None, 600)
    for block in scan.blocks():
        chosen = sources == 11 + block.view
        # Half a step of the scale.
        np.testing.assert_allclose(block.points, ball.points[chosen], rtol=0, atol=5.001e-5)
        np.testing.assert_array_equal(block.colours, ball.colours[chosen])


def test_las_source_numbers_with_a_zero_are_no_setups(tmp_path: Path, ball) -> None:
    scan = read(write_las(tmp_path / "a.las", ball, np.arange(600) % 4))
    assert [head.name for head in scan.views] == ["view 0"]
    assert scan.assumptions == ()


def test_las_faults(tmp_path: Path, ball) -> None:
    raw = write_las(tmp_path / "a.las", ball, np.zeros(600)).read_bytes()
    bad = tmp_path / "bad.las"
    bad.write_bytes(raw[:-10])
    with pytest.raises(ScanFault, match=r"bad.las: the header promises 600 points in \d+ bytes, the file holds \d+"):
        read(bad)
    many = bytearray(raw)
    many[107:111] = b"\xff\xff\xff\xff"
    bad.write_bytes(many)
    with pytest.raises(ScanFault, match="the header promises 4294967295 points"):
        read(bad)
    records = bytearray(raw)
    records[100:104] = b"\xff\xff\xff\x0f"
    bad.write_bytes(records)
    with pytest.raises(ScanFault, match="268435455 header records do not fit before the points"):
        read(bad)
    packed = write_las(tmp_path / "a.laz", ball, np.zeros(600)).read_bytes()
    (tmp_path / "bad.laz").write_bytes(packed[: len(packed) * 2 // 3])
    with pytest.raises(ScanFault, match=r"bad.laz: .*the file is cut or corrupt"):
        read(tmp_path / "bad.laz")


TURN = Rotation.from_rotvec([0.3, -0.5, 0.9])
PLACE = np.array([10.0, -20.0, 3.0])


def write_e57(path: Path, ball, invalid: np.ndarray) -> Path:
    """Two scans: one with pose, grid and colours, one with neither."""
    own = TURN.inv().apply(ball.points - PLACE)
    own[0] = 0  # no distance: no return, marked invalid or not
    x, y, z, w = TURN.as_quat()
    e57 = pye57.E57(str(path), "w")
    red, green, blue = (np.ascontiguousarray(part) for part in ball.colours.T)
    e57.write_scan_raw(
        {
            "cartesianX": own[:, 0].copy(), "cartesianY": own[:, 1].copy(), "cartesianZ": own[:, 2].copy(),
            "cartesianInvalidState": invalid.astype(np.int8), "colorRed": red, "colorGreen": green, "colorBlue": blue,
            "rowIndex": np.arange(600) // 30 + 5, "columnIndex": np.arange(600) % 30,
        },
        name="north", rotation=np.array([w, x, y, z]), translation=PLACE,
    )  # fmt: skip
    columns = {f"cartesian{axis}": ball.points[:, k].copy() for k, axis in enumerate("XYZ")}
    e57.write_scan_raw(columns, name="merged")
    e57.close()
    return path


def test_e57_applies_poses_and_counts_no_returns(tmp_path: Path, ball) -> None:
    invalid = np.arange(600) % 7 == 0
    scan = read(write_e57(tmp_path / "a.e57", ball, invalid))
    assert (scan.unit, scan.total, scan.faces) == ("m", 1200, None)
    assert [head.name for head in scan.views] == ["north", "merged"]
    np.testing.assert_allclose(scan.views[0].scanner, PLACE)
    assert scan.views[0].grid_shape == (20, 30)
    assert scan.views[1].scanner is None
    first, second = scan.blocks()
    # Single precision within 150 of the own origin.
    np.testing.assert_allclose(first.points, ball.points[~invalid], rtol=0, atol=3e-5)
    np.testing.assert_array_equal(first.rows, (np.arange(600) // 30)[~invalid])
    np.testing.assert_array_equal(first.columns, (np.arange(600) % 30)[~invalid])
    np.testing.assert_array_equal(first.colours, ball.colours[~invalid])
    np.testing.assert_allclose(second.points, ball.points, rtol=0, atol=6e-6)
    (loaded,) = load([tmp_path / "a.e57"])
    assert (loaded.no_return, loaded.unit_from, loaded.file_unit) == (int(invalid.sum()), "file", "m")
    assert loaded.warnings == ()


def test_e57_in_small_blocks_is_the_same(tmp_path: Path, ball, monkeypatch: pytest.MonkeyPatch) -> None:
    path = write_e57(tmp_path / "a.e57", ball, np.zeros(600, bool))
    whole = read(path).points()
    monkeypatch.setattr("scanmass.scans.e57.BLOCK_POINTS", 37)
    scan = read(path)
    assert [len(block.points) for block in scan.blocks()][:3] == [36, 37, 37]  # the first holds a point without return
    np.testing.assert_array_equal(scan.points(), whole)


def test_e57_spherical_points(tmp_path: Path, ball) -> None:
    from pye57 import libe57

    path = tmp_path / "s.e57"
    e57 = pye57.E57(str(path), "w")
    file = e57.image_file
    node, prototype = libe57.StructureNode(file), libe57.StructureNode(file)
    x, y, z = ball.points.T
    columns = {
        "sphericalRange": np.full(600, 100.0),
        "sphericalAzimuth": np.arctan2(y, x),
        "sphericalElevation": np.arcsin(z / 100),
    }
    buffers = libe57.VectorSourceDestBuffer()
    for name, column in columns.items():
        prototype.set(name, libe57.FloatNode(file, 0.0, libe57.E57_DOUBLE, -1e3, 1e3))
        buffers.append(libe57.SourceDestBuffer(file, name, column, 600, True, True))
    points = libe57.CompressedVectorNode(file, prototype, libe57.VectorNode(file, True))
    node.set("points", points)
    e57.data3d.append(node)
    writer = points.writer(buffers)
    writer.write(600)
    writer.close()
    e57.close()
    scan = read(path)
    # Angles to 1e-16 at a range of 100.
    np.testing.assert_allclose(scan.points(), ball.points, rtol=0, atol=1e-12)
    assert scan.views[0].name == "scan 0"


@pytest.mark.parametrize("keep", [10, 48, 3000, -1])
def test_e57_cut(tmp_path: Path, ball, keep: int) -> None:
    raw = write_e57(tmp_path / "a.e57", ball, np.zeros(600, bool)).read_bytes()
    (tmp_path / "bad.e57").write_bytes(raw[:keep])
    with pytest.raises(ScanFault, match=r"bad.e57: the file cannot be read \(.*\); the file is cut or corrupt"):
        read(tmp_path / "bad.e57").points()
