"""OBJ, STL, OFF and glTF: written by trimesh, and by hand from the formats' descriptions."""

from __future__ import annotations

import base64
import json
import struct
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import trimesh

from scanmass.errors import ScanFault
from scanmass.geometry.edges import count_edges
from scanmass.scans.corners import shared
from scanmass.scans.table import read


def volume(scan) -> float:
    return float(trimesh.Trimesh(scan.points(), scan.faces, process=False).volume)


@pytest.mark.parametrize("name", ["m.obj", "m.stl", "m.off", "m.glb", "model.gltf", "ascii.stl"])
def test_mesh_of_trimesh(tmp_path: Path, name: str) -> None:
    mesh = trimesh.creation.icosphere(subdivisions=2, radius=50)
    if name == "model.gltf":
        for part, content in trimesh.exchange.gltf.export_gltf(trimesh.Scene(mesh)).items():
            (tmp_path / part).write_bytes(content)
    elif name == "ascii.stl":
        (tmp_path / name).write_text(trimesh.exchange.stl.export_stl_ascii(mesh))
    else:
        mesh.export(tmp_path / name)
    scan = read(tmp_path / name)
    assert scan.faces is not None
    assert (scan.total, len(scan.faces)) == (len(mesh.vertices), len(mesh.faces))
    assert count_edges(scan.faces).closed
    # Single precision of coordinates: three times 6e-8 at most.
    assert volume(scan) == pytest.approx(mesh.volume, rel=2e-7)
    assert scan.unit == ("m" if scan.format == "gltf" else None)


OBJ = """# a unit cube in every way the format allows
mtllib some.mtl
o cube
v 0 0 0
v 1 0 0
v 1 1 0
v 0 1 0
vt 0 0
vn 0 0 1
f 4/1/1 3/1/1 2/1/1 1/1/1
v 0 0 1
v 1 0 1
v 1 1 1
v 0 1 1
f -4 -3 -2 -1
f 1//1 2//1 6//1 5//1
f 2 3 \\
  7 6
s off
f 3/1 4/1 8/1
f 3/1 8/1 7/1
f -8 -4 -1
f -8 -1 -5
l 1 2
"""


def test_obj_with_polygons_and_backward_numbers(tmp_path: Path) -> None:
    path = tmp_path / "cube.obj"
    path.write_text(OBJ)
    scan = read(path)
    assert scan.faces is not None
    assert count_edges(scan.faces).closed
    assert volume(scan) == pytest.approx(1.0, abs=1e-12)
    assert "4 faces with more than three corners" in scan.assumptions[0].text


def test_obj_cloud_with_colours_and_normals(tmp_path: Path) -> None:
    path = tmp_path / "cloud.obj"
    path.write_text("v 1 2 3 0 0.5 1\nvn 0 0 1\nv 4 5 6 1 1 1\nvn 1 0 0\n")
    scan = read(path)
    (block,) = scan.blocks()
    assert scan.faces is None
    np.testing.assert_array_equal(block.colours, [[0, 128, 255], [255, 255, 255]])
    np.testing.assert_array_equal(block.normals, [[0, 0, 1], [1, 0, 0]])


OFF = "OFF # a tetrahedron\n4 4 6\n\n0 0 0\n6 0 0\n0 3 0\n0 0 2\n3 0 2 1\n3 0 1 3 255 0 0\n3 0 3 2\n3 1 2 3\n"


def test_off_with_comments_and_face_colours(tmp_path: Path) -> None:
    path = tmp_path / "t.off"
    path.write_text(OFF)
    assert volume(read(path)) == pytest.approx(6.0, abs=1e-12)
    path.write_text("COFF 2 0 0\n0 0 0 255 128 0 255\n1 2 3 0 0 9 255\n")
    (block,) = read(path).blocks()
    np.testing.assert_array_equal(block.colours, [[255, 128, 0], [0, 0, 9]])


def test_off_that_begins_with_comments(tmp_path: Path) -> None:
    path = tmp_path / "t.off"
    comments = "# made by some tool\n" * 40
    path.write_text(comments + "\nOFF\n4 4 6\n0 0 0\n1 0 0\n0 1 0\n0 0 1\n3 0 2 1\n3 0 1 3\n3 1 2 3\n3 0 3 2\n")
    assert volume(read(path)) == pytest.approx(1 / 6, rel=1e-12)


def test_obj_that_is_cut(tmp_path: Path) -> None:
    # Faces end to end, so that a cut at the end of a line leaves a file that reads well: only its end tells.
    mesh = trimesh.creation.icosphere(subdivisions=3, radius=50)
    points = "".join(f"v {x:.9f} {y:.9f} {z:.9f}\n" for x, y, z in mesh.vertices)
    faces = [f"f {a} {b} {c}" for a, b, c in mesh.faces + 1]
    path = tmp_path / "a.obj"
    path.write_text(points + "\n".join(faces))
    assert len(read(path).faces) == len(faces)
    path.write_text(points + "\n".join(faces[:900]))
    with pytest.raises(ScanFault, match=r"a.obj: the last line does not end, and \d+ of 642 points belong to no face;"):
        read(path)
    path.write_text(points[: len(points) // 2] + "\nv")
    with pytest.raises(ScanFault, match=r"a.obj: a point or a face is begun and left empty; the file is cut or corrup"):
        read(path)


def test_a_mesh_file_without_faces_is_said_to_be_a_cloud(tmp_path: Path) -> None:
    path = tmp_path / "a.obj"
    path.write_text("v 0 0 0\nv 1 0 0\n")
    scan = read(path)
    assert scan.faces is None
    assert [note.code for note in scan.warnings] == ["no-faces"]


def test_stl_of_several_solids_and_binary_that_says_solid(tmp_path: Path) -> None:
    box = trimesh.creation.box()
    text = trimesh.exchange.stl.export_stl_ascii(box)
    path = tmp_path / "two.stl"
    path.write_text(text + "\n" + trimesh.exchange.stl.export_stl_ascii(box.copy().apply_translation([3, 0, 0])))
    assert volume(read(path)) == pytest.approx(2.0, abs=1e-12)
    binary = trimesh.exchange.stl.export_stl(box)
    path.write_bytes(b"solid box".ljust(80) + binary[80:])
    assert volume(read(path)) == pytest.approx(1.0, abs=1e-12)
    path.write_bytes(binary + b"more")
    assert read(path).warnings[0].text == "two.stl: 4 bytes after the last triangle were not read."


def test_stl_says_what_welding_left_out(tmp_path: Path) -> None:
    box = trimesh.creation.box()
    facets = np.frombuffer(trimesh.exchange.stl.export_stl(box)[84:], np.uint8).reshape(-1, 50).copy()
    sliver = facets[0].copy()
    sliver[24:36] = sliver[12:24]  # the second corner at the first
    path = tmp_path / "s.stl"
    path.write_bytes(bytes(80) + struct.pack("<I", 13) + facets.tobytes() + sliver.tobytes())
    scan = read(path)
    assert [note.code for note in scan.warnings] == ["faces-without-area"]
    assert volume(scan) == pytest.approx(1.0, abs=1e-12)


TETRAHEDRON = np.array([[0, 0, 0], [6, 0, 0], [0, 3, 0], [0, 0, 2]], "<f4")
FACES = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]], "<u2")


def gltf(default_nodes: list[dict[str, Any]], **changed: Any) -> dict[str, Any]:
    raw = TETRAHEDRON.tobytes() + FACES.tobytes()
    uri = "data:application/octet-stream;base64," + base64.b64encode(raw).decode()
    document: dict[str, Any] = {
        "asset": {"version": "2.0"},
        "buffers": [{"byteLength": len(raw), "uri": uri}],
        "bufferViews": [{"buffer": 0, "byteLength": 48}, {"buffer": 0, "byteOffset": 48, "byteLength": 24}],
        "accessors": [
            {"bufferView": 0, "componentType": 5126, "count": 4, "type": "VEC3"},
            {"bufferView": 1, "componentType": 5123, "count": 12, "type": "SCALAR"},
        ],
        "meshes": [{"primitives": [{"attributes": {"POSITION": 0}, "indices": 1}]}],
        "nodes": default_nodes,
        "scenes": [{"nodes": [0]}],
    }
    return document | changed


def test_gltf_nodes_place_and_mirror(tmp_path: Path) -> None:
    path = tmp_path / "t.gltf"
    half = float(np.sqrt(0.5))
    nodes = [
        {"children": [1, 2], "translation": [10, 0, 0], "scale": [2, 2, 2]},
        {"mesh": 0, "rotation": [0, 0, half, half]},  # a quarter turn about z
        {"mesh": 0, "matrix": [-1, 0, 0, 0, 0, 1, 0, 0, 0, 0, 1, 0, -20, 0, 0, 1]},
    ]
    path.write_text(json.dumps(gltf(nodes)))
    scan = read(path)
    # Both have volume 6 x 8 and face outward, the mirrored one too.
    assert volume(scan) == pytest.approx(96.0, rel=1e-6)
    points = scan.points()
    # Quarter turn: (6, 0, 0) to (0, 6, 0), doubled, moved by 10; the mirrored one reaches 10 + 2 (-20 - 6).
    for corner in ([10, 12, 0], [4, 0, 0], [-42, 0, 0]):
        assert np.abs(points - corner).max(axis=1).min() < 1e-6
    assert scan.warnings[0].text == "t.gltf: 1 of 2 meshes are placed by a transform that mirrors them."


def test_gltf_strips_and_fans(tmp_path: Path) -> None:
    path = tmp_path / "t.gltf"
    # Of the corners 0 2 1 0 1 3; in a strip every second triangle is turned. Two corners alike: no triangle.
    for mode, count, expected in ((5, 5, [[0, 2, 1], [1, 2, 0]]), (6, 6, [[0, 2, 1], [0, 1, 3]])):
        primitive = {"attributes": {"POSITION": 0}, "indices": 1, "mode": mode}
        document = gltf([{"mesh": 0}], meshes=[{"primitives": [primitive]}])
        document["accessors"][1]["count"] = count
        path.write_text(json.dumps(document))
        scan = read(path)
        np.testing.assert_array_equal(scan.points()[scan.faces], TETRAHEDRON[np.array(expected)])


@pytest.mark.parametrize(
    ("changed", "message"),
    [
        ({"asset": {"version": "1.0"}}, "the file is not glTF version 2"),
        ({"extensionsRequired": ["KHR_draco_mesh_compression"]}, "needs the extension KHR_draco_mesh_compression"),
        ({"accessors": [{"sparse": {}}]}, "sparse arrays, which are not read; export it again without"),
        ({"buffers": [{"byteLength": 72, "uri": "gone.bin"}]}, "its buffer gone.bin is missing"),
        ({"buffers": [{"byteLength": 72, "uri": "../up.bin"}]}, "a buffer lies elsewhere"),
        ({"buffers": [{"byteLength": 99999, "uri": "data:;base64,AAAA"}]}, "99999 bytes is promised, 3 are there"),
        ({"bufferViews": [{"buffer": 0, "byteLength": 48, "byteOffset": 40}]}, "ends after its buffer of 72 bytes"),
        ({"nodes": [{"mesh": 5}]}, "the description names entry 5 of its meshes"),
        ({"nodes": [{"children": [0]}]}, "node 0 is placed twice"),
        ({"nodes": [{"mesh": 0, "scale": [1, 0, 1]}]}, "a node flattens its mesh"),
        ({"meshes": [{"primitives": [{"attributes": {}}]}]}, "its description does not fit together (KeyError"),
        ({"meshes": []}, "the description names entry 0 of its meshes"),
        ({"nodes": [{}]}, "the scene holds neither triangles nor points"),
    ],
)
def test_gltf_faults(tmp_path: Path, changed: dict[str, Any], message: str) -> None:
    path = tmp_path / "bad.gltf"
    path.write_text(json.dumps(gltf([{"mesh": 0}], **changed)))
    with pytest.raises(ScanFault) as fault:
        read(path)
    assert message in str(fault.value)


@pytest.mark.parametrize(
    ("name", "content", "message"),
    [
        ("a.obj", "v 0 0 0\nf 1 2 3\n", "a face names point number 2, counted from 0, but the file holds 1 points"),
        ("a.obj", "v 0 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 0\n", "a face names point number 0; OBJ counts points from 1"),
        ("a.obj", "v 0 0 0\nf -2 -1 1\n", "a face names point number -1"),
        ("a.obj", "v 0 0 0\nf 1 1\n", "a face has 2 corners; three at least"),
        ("a.obj", "v 0 0 0\nf 1 1 a\n", "something else than numbers"),
        ("a.obj", "v 0 0 0\nv 1 2\n", "v entry 2 holds 2 fields; every entry must hold 3"),
        ("a.obj", "hello\n", "the file holds no line of a point; a point is written: v x y z"),
        ("a.off", "OFF\n4 4 6\n0 0 0\n", "the head counts 4 points and 4 faces, but 1 lines follow"),
        ("a.off", "OFF\n3 1 0\n0 0 0\n1 0 0\n0 1 0\n3 0 1 7\n", "a face names point number 7"),
        ("a.off", "OFF\n3 1 0\n0 0 0\n1 0 0\n0 1 0\n3 0 1\n", "does not hold the corners it counts"),
        ("a.off", "OFF BINARY\n", "the file is binary; OFF is read as text only"),
        (
            "a.stl",
            "solid x\nfacet normal 0 0 1\nvertex 0 0 0\n",
            "holds 1 facets and 1 corners, and ends with 'vertex 0 0 0'",
        ),
        ("a.stl", "solid x" + "\0" * 77 + "\x02" + "\0" * 30, "the header promises 0 triangles"),
        ("a.stl", "hello", "the file ends within its header"),
        ("a.glb", "glTF" + "\2\0\0\0" + "\x7f" * 20, "the header promises 2139062143 bytes, the file holds 28"),
    ],
)
def test_faults(tmp_path: Path, name: str, content: str, message: str) -> None:
    path = tmp_path / name
    path.write_bytes(content.encode("latin-1"))
    with pytest.raises(ScanFault) as fault:
        read(path)
    assert message in str(fault.value)


def test_shared_corners_against_sorting() -> None:
    rng = np.random.default_rng(0)
    for points in (
        rng.integers(-3, 4, (5000, 3)) / 8.0,
        rng.normal(size=(5000, 3)).astype(np.float32).repeat(2, axis=0),
    ):
        found, which = shared(points.astype(float))
        np.testing.assert_array_equal(found[which], points)
        assert len(found) == len(np.unique(points, axis=0))
        assert (np.maximum.accumulate(which)[1:] - np.maximum.accumulate(which)[:-1] <= 1).all()
