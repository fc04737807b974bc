"""PCD files of open3d, and by hand from the format's published description (version 0.7)."""

from __future__ import annotations

import struct
from pathlib import Path

import numpy as np
import pytest

from scanmass.errors import ScanFault
from scanmass.scans.load import load
from scanmass.scans.lzf import unpacked
from scanmass.scans.table import read

HEADER = """# .PCD v0.7 - Point Cloud Data file format
VERSION 0.7
FIELDS {fields}
SIZE {size}
TYPE {type}
COUNT {count}
WIDTH {width}
HEIGHT {height}
VIEWPOINT {viewpoint}
POINTS {points}
DATA {data}
"""


def header(data: str, width: int, height: int = 1, **changed: object) -> bytes:
    plain = {"fields": "x y z", "size": "4 4 4", "type": "F F F", "count": "1 1 1", "viewpoint": "0 0 0 1 0 0 0"}
    return HEADER.format(
        **plain | {"data": data, "width": width, "height": height, "points": width * height} | changed
    ).encode()


@pytest.mark.parametrize("name", ["binary.pcd", "compressed.pcd", "ascii.pcd"])
def test_all_forms_of_open3d(open3d_files: Path, ball, name: str) -> None:
    scan = read(open3d_files / name)
    # Single precision: 100 x 6e-8.
    np.testing.assert_allclose(scan.points(), ball.points, rtol=0, atol=6e-6)
    (block,) = scan.blocks()
    np.testing.assert_allclose(block.normals, ball.normals, rtol=0, atol=6e-8)
    np.testing.assert_array_equal(block.colours, ball.colours)
    assert scan.views[0].scanner is None
    assert scan.views[0].grid_shape is None


def test_organised_cloud_keeps_its_grid_and_counts_no_returns(tmp_path: Path) -> None:
    rows, columns = 30, 40
    grid = np.stack(np.meshgrid(np.arange(rows), np.arange(columns), indexing="ij"), axis=-1).reshape(-1, 2)
    points = np.column_stack([grid, np.cos(grid[:, 0] / 9.0)]).astype("<f4")
    empty = np.zeros(rows * columns, bool)
    empty[::5] = True  # a fifth: far above what a cloud without a grid may lack
    points[empty] = np.nan
    points[0] = 0  # how other writers put it
    path = tmp_path / "grid.pcd"
    path.write_bytes(header("binary", columns, rows, viewpoint="1 2 3 1 0 0 0") + points.tobytes())
    (scan,) = load([path], "mm")
    assert (scan.total, scan.no_return) == (1200, 240)
    assert scan.views[0].grid_shape == (rows, columns)
    np.testing.assert_allclose(scan.views[0].scanner, [0.001, 0.002, 0.003])
    (block,) = scan.blocks()
    np.testing.assert_array_equal(block.rows, grid[~empty, 0])
    np.testing.assert_array_equal(block.columns, grid[~empty, 1])
    assert [note.code for note in scan.assumptions] == ["viewpoint-is-scanner"]


def test_fields_of_all_kinds(tmp_path: Path) -> None:
    dtype = np.dtype(
        [("z", "<f8"), ("y", "<i2"), ("histogram", "<f4", 3), ("x", "<u1"), ("view", "<u4"), ("rgb", "<u4")]
    )
    rows = np.zeros(3, dtype)
    rows["x"], rows["y"], rows["z"] = [1, 2, 250], [-3, 4, 5], [0.1, 0.2, 0.3]
    rows["view"], rows["rgb"] = [2, 1, 2], [0x0A141E, 0, 0xFFFFFF]
    fields = {
        "fields": "z y histogram x view rgb",
        "size": "8 2 4 1 4 4",
        "type": "F I F U U U",
        "count": "1 1 3 1 1 1",
    }
    binary = tmp_path / "b.pcd"
    binary.write_bytes(header("binary", 3, **fields) + rows.tobytes())
    text = "0.1 -3 0 0 0 1 2 660510\n0.2 4 0 0 0 2 1 0\n0.3 5 0 0 0 250 2 16777215\n"
    ascii_form = tmp_path / "a.pcd"
    ascii_form.write_bytes(header("ascii", 3, **fields) + text.encode())
    for path in (binary, ascii_form):
        first, second = read(path).blocks()
        np.testing.assert_array_equal(first.points, [[2, 4, 0.2]])
        np.testing.assert_array_equal(second.points, [[1, -3, 0.1], [250, 5, 0.3]])
        np.testing.assert_array_equal(second.colours, [[10, 20, 30], [255, 255, 255]])
        assert (first.view, second.view) == (0, 1)


def test_unpacking_against_a_slow_twin() -> None:
    rng = np.random.default_rng(1)
    for _ in range(50):
        packed, out = bytearray(), bytearray()
        while len(out) < 3000:
            if rng.random() < 0.5 or not out:
                literal = rng.integers(0, 256, rng.integers(1, 33), dtype=np.uint8).tobytes()
                packed += bytes([len(literal) - 1]) + literal
                out += literal
            else:
                run, back = int(rng.integers(3, 265)), int(rng.integers(1, min(len(out), 8192) + 1))
                high, low = divmod(back - 1, 256)
                packed += (
                    bytes([(min(run - 2, 7) << 5) | high]) + (bytes([run - 9]) if run >= 9 else b"") + bytes([low])
                )
                for _ in range(run):
                    out.append(out[-back])
        raw = np.frombuffer(bytes(packed), np.uint8)
        found = unpacked(raw, len(out))
        assert found is not None
        assert found.tobytes() == bytes(out)
        assert unpacked(raw, len(out) + 1) is None
        assert unpacked(raw[:-1], len(out)) is None


def test_nothing_is_made_from_a_promise(tmp_path: Path) -> None:
    many = 10**12
    path = tmp_path / "bad.pcd"
    path.write_bytes(header("binary", many) + b"\0" * 120)
    with pytest.raises(ScanFault, match="promises 1000000000000 points of 12 bytes, but the file ends before"):
        read(path)
    path.write_bytes(header("binary_compressed", 10**8) + struct.pack("<II", 4, 1_200_000_000) + b"\0\0\0\0")
    with pytest.raises(ScanFault, match="cannot be unpacked"):
        read(path).points()
    path.write_bytes(header("ascii", 3) + b"1.25 2 3\n4.25 5 6\n")
    with pytest.raises(ScanFault, match="promises 3 points, but 1 are missing"):
        read(path).points()


@pytest.mark.parametrize(
    ("changed", "message"),
    [
        ({"points": 7}, "the header does not fit together; FIELDS, SIZE"),
        ({"size": "4 4"}, "the header does not fit together"),
        ({"size": "4 4 3"}, "the header does not fit together"),
        ({"fields": "x y q"}, "the points have the fields x, y, q; x, y and z are needed"),
        ({"data": "zip"}, "the header says DATA zip; allowed are ascii, binary and binary_compressed"),
        ({"width": "many"}, "the header does not fit together"),
    ],
)
def test_faults_of_the_header(tmp_path: Path, changed: dict[str, object], message: str) -> None:
    path = tmp_path / "bad.pcd"
    arguments = {"data": "ascii", "width": 2, **changed}
    path.write_bytes(header(**{"points": 2, **arguments}) + b"1 2 3\n4 5 6\n")
    with pytest.raises(ScanFault, match=message):
        read(path)
