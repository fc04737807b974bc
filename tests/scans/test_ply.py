"""PLY files by hand, from the format's own description, and from two other writers."""

from __future__ import annotations

import struct
from pathlib import Path

import numpy as np
import pytest
import trimesh

from scanmass.errors import ScanFault
from scanmass.scans.table import read

CUBE = """ply
format ascii 1.0
comment made by hand, after the cube of Turk, The PLY Polygon File Format (1994)
element vertex 8
property float x
property float y
property float z
element face 6
property list uchar int vertex_index
end_header
0 0 0
0 0 1
0 1 1
0 1 0
1 0 0
1 0 1
1 1 1
1 1 0
4 0 1 2 3
4 7 6 5 4
4 0 4 5 1
4 1 5 6 2
4 2 6 7 3
4 3 7 4 0
"""


def written(path: Path, header: str, body: bytes) -> Path:
    path.write_bytes(("ply\n" + header.strip() + "\nend_header\n").encode() + body)
    return path


def columns(scan, name: str) -> np.ndarray:
    return np.concatenate([getattr(block, name) for block in scan.blocks()])


def test_ascii_cube_has_unit_volume(tmp_path: Path) -> None:
    path = tmp_path / "cube.ply"
    path.write_text(CUBE)
    scan = read(path)
    assert scan.faces is not None
    assert scan.faces.shape == (12, 3)
    assert trimesh.Trimesh(scan.points(), scan.faces, process=False).volume == pytest.approx(1.0, abs=1e-12)
    assert [note.code for note in scan.assumptions] == ["polygons-fanned"]


@pytest.mark.parametrize("ending", ["\r\n", "\r"])
def test_line_endings_of_other_systems(tmp_path: Path, ending: str) -> None:
    path = tmp_path / "cube.ply"
    path.write_bytes(CUBE.replace("\n", ending).encode())
    assert read(path).total == 8


@pytest.mark.parametrize("name", ["binary.ply", "ascii.ply"])
def test_cloud_of_open3d(open3d_files: Path, ball, name: str) -> None:
    scan = read(open3d_files / name)
    assert scan.faces is None
    assert scan.unit is None
    # open3d writes %g in ascii: six digits of 100.
    np.testing.assert_allclose(scan.points(), ball.points, rtol=0, atol=0 if name == "binary.ply" else 6e-5)
    np.testing.assert_allclose(columns(scan, "normals"), ball.normals, rtol=0, atol=0 if name == "binary.ply" else 6e-7)
    np.testing.assert_array_equal(columns(scan, "colours"), ball.colours)


@pytest.mark.parametrize("encoding", ["binary", "ascii"])
def test_mesh_of_trimesh(tmp_path: Path, encoding: str) -> None:
    mesh = trimesh.creation.icosphere(subdivisions=2, radius=50)
    path = tmp_path / "m.ply"
    path.write_bytes(trimesh.exchange.ply.export_ply(mesh, encoding=encoding))
    scan = read(path)
    np.testing.assert_array_equal(scan.faces, mesh.faces)
    # Single precision, or eight digits: 50 x 6e-8.
    np.testing.assert_allclose(scan.points(), mesh.vertices, rtol=0, atol=4e-6)


HEADER_WITH_STRANGERS = """format binary_{order}_endian 1.0
element camera 2
property double focus
property list ushort short readings
element vertex 3
property uchar quality
property float x
property float y
property float z
property list uchar float weights
property int scan_id
element face 2
property list uint ushort vertex_indices
property uchar material"""


@pytest.mark.parametrize(("order", "mark"), [("little", "<"), ("big", ">")])
def test_strange_elements_and_lists_are_passed_over_by_their_sizes(tmp_path: Path, order: str, mark: str) -> None:
    points = [(1.5, 2.5, 3.5), (4, 5, 6), (7, 8, -9)]
    body = struct.pack(mark + "dH3h", 1.0, 3, 1, 2, 3) + struct.pack(mark + "dH", 2.0, 0)
    for k, point in enumerate(points):
        body += struct.pack(mark + f"B3fB{k}fi", 7, *point, k, *range(k), 5)
    body += struct.pack(mark + "I3HB", 3, 0, 1, 2, 9) + struct.pack(mark + "I4HB", 4, 2, 1, 0, 1, 9)
    path = written(tmp_path / "s.ply", HEADER_WITH_STRANGERS.format(order=order), body)
    scan = read(path)
    np.testing.assert_array_equal(scan.points(), points)
    np.testing.assert_array_equal(scan.faces, [[0, 1, 2], [2, 1, 0], [2, 0, 1]])
    assert [note.code for note in scan.warnings] == ["view-numbers-unused"]


def test_strips_are_unrolled_turning_every_second(tmp_path: Path) -> None:
    header = """format binary_little_endian 1.0
element vertex 5
property float x
property float y
property float z
element tristrips 1
property list int int vertex_indices"""
    strip = [0, 1, 2, 3, -1, 2, 3, 4]
    body = np.arange(15, dtype="<f4").tobytes() + struct.pack("<9i", 8, *strip)
    scan = read(written(tmp_path / "s.ply", header, body))
    np.testing.assert_array_equal(scan.faces, [[0, 1, 2], [2, 1, 3], [2, 3, 4]])


def test_range_grid_keeps_rows_and_columns_and_counts_empty_cells(tmp_path: Path) -> None:
    header = """format binary_big_endian 1.0
obj_info num_cols 3
obj_info num_rows 2
element vertex 4
property float x
property float y
property float z
element range_grid 6
property list uchar int vertex_indices"""
    cells = [None, 0, 1, 2, None, 3]
    body = np.arange(12, dtype=">f4").tobytes()
    body += b"".join(b"\0" if cell is None else struct.pack(">Bi", 1, cell) for cell in cells)
    scan = read(written(tmp_path / "g.ply", header, body))
    assert scan.views[0].grid_shape == (2, 3)
    assert (scan.total, scan.no_return) == (6, 2)
    assert columns(scan, "rows").tolist() == [0, 0, 1, 1]
    assert columns(scan, "columns").tolist() == [1, 2, 0, 2]


def test_views_are_parted_and_kept_in_order(tmp_path: Path) -> None:
    header = """format binary_little_endian 1.0
element vertex 5
property double x
property double y
property double z
property uchar view_id"""
    rows = np.zeros(5, np.dtype([("p", "<f8", 3), ("view", "u1")]))
    rows["p"][:, 0] = [0, 1, 2, 3, 4]
    rows["view"] = [7, 3, 7, 3, 9]
    scan = read(written(tmp_path / "v.ply", header, rows.tobytes()))
    assert [view.name for view in scan.views] == ["view 3", "view 7", "view 9"]
    found = {block.view: block.points[:, 0].tolist() for block in scan.blocks()}
    assert found == {0: [1, 3], 1: [0, 2], 2: [4]}


XYZ = "property float x\nproperty float y\nproperty float z"


@pytest.mark.parametrize(
    ("header", "body", "message"),
    [
        (
            f"format binary_little_endian 1.0\nelement vertex 1000000000000\n{XYZ}",
            b"\0" * 24,
            "but the file ends before",
        ),
        (f"format ascii 1.0\nelement vertex 1000000000000\n{XYZ}", b"1 2 3\n", "promises 1000000000000 of the element"),
        (f"format ascii 1.0\nelement vertex 3\n{XYZ}", b"1 2 3\n4 5 6\n7.123 8", "line 10 holds 2 fields"),
        (f"format ascii 1.0\nelement vertex 2\n{XYZ}", b"1 2 3\n4 x 6\n", "line 9: 'x' is not a number"),
        (f"format binary_middle_endian 1.0\nelement vertex 1\n{XYZ}", b"\0" * 12, "names the format 'binary_middle"),
        ("format ascii 1.0\nelement vertex 1\nproperty float x\nproperty float y", b"1 2\n", "x, y and z are needed"),
        ("format ascii 1.0\nelement vertex 1\nproperty quad x", b"1\n", "line 4 of the header reads 'property quad x'"),
        ("format ascii 1.0\nelement face 0", b"", "holds no vertex element"),
        ("format ascii 1.0\nhello", b"", "line 3 of the header reads 'hello'"),
        (
            f"format ascii 1.0\nelement vertex 3\n{XYZ}\nelement face 1\nproperty list uchar int vertex_index",
            b"1 2 3\n4 5 6\n7 8 9\n3 0 1 3\n",
            "a face names point number 3, counted from 0, but the file holds 3 points",
        ),
    ],
)
def test_faults_say_what_was_seen(tmp_path: Path, header: str, body: bytes, message: str) -> None:
    path = written(tmp_path / "bad.ply", header, body)
    with pytest.raises(ScanFault) as fault:
        read(path).points()
    assert message in str(fault.value)
    assert str(fault.value).startswith("bad.ply: ")
