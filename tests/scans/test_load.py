"""The door: formats and names, units, twins, and what cannot be measured."""

from __future__ import annotations

import os
import tracemalloc
from pathlib import Path

import numpy as np
import pytest
import trimesh

from scanmass.errors import ScanFault, UserFault
from scanmass.scans.load import load
from scanmass.scans.table import SUFFIXES, read


def ply(path: Path, points: np.ndarray, dtype: str = "<f8") -> Path:
    kind = {"<f8": "double", "<f4": "float"}[dtype]
    properties = "".join(f"property {kind} {axis}\n" for axis in "xyz")
    head = f"ply\nformat binary_little_endian 1.0\nelement vertex {len(points)}\n{properties}end_header\n"
    path.write_bytes(head.encode() + points.astype(dtype).tobytes())
    return path


def refusal(*paths: Path, unit: str | None = "mm") -> str:
    with pytest.raises(ScanFault) as fault:
        load(paths, unit)
    return str(fault.value)


def test_metres(tmp_path: Path, ball) -> None:
    path = ply(tmp_path / "a.ply", ball.points)
    (scan,) = load([path], "mm")
    assert (scan.unit, scan.file_unit, scan.unit_from, scan.format) == ("m", "mm", "declared", "ply")
    np.testing.assert_allclose(scan.points(), ball.points / 1000, rtol=1e-15)
    (again,) = load([str(path)], None, "inch")
    np.testing.assert_allclose(again.points(), ball.points * 0.0254, rtol=1e-15)
    assert again.file_unit == "inch"
    assert load([path], "in", "inch")[0].unit == "m"


def test_no_unit_shows_the_size(tmp_path: Path) -> None:
    path = ply(tmp_path / "a.ply", np.random.default_rng(0).uniform(0, 1, (1000, 3)) * [412.3, 200, 100])
    text = refusal(path, unit=None)
    assert text.startswith("a.ply: the file does not say its unit; its largest side is 41")
    assert "mm if in mm, " in text
    assert "m if in m, " in text
    assert text.endswith("m if in inch; give --unit, or scan.unit in the pipeline file")


def test_units_that_differ_or_are_none(tmp_path: Path, ball) -> None:
    path = ply(tmp_path / "a.ply", ball.points)
    with pytest.raises(
        UserFault, match=r"the unit was given as mm, and the pipeline file says scan.unit: inch; they must"
    ):
        load([path], "mm", "inch")
    with pytest.raises(UserFault, match="smoot"):
        load([path], "smoot")


def test_a_declared_unit_wins_over_the_standard(tmp_path: Path) -> None:
    trimesh.creation.icosphere(subdivisions=3, radius=50).export(tmp_path / "a.glb")
    (scan,) = load([tmp_path / "a.glb"], "mm")
    assert np.ptp(scan.points(), axis=0).max() == pytest.approx(0.1, rel=1e-6)
    assert scan.warnings[0].text == (
        "a.glb: the format is in m by its standard, but mm was declared and is used: "
        "the largest side is 100 mm if in mm, 100 m if in m."
    )
    (same,) = load([tmp_path / "a.glb"], "m")
    assert same.warnings == ()


def test_names_that_are_no_scan(tmp_path: Path, ball) -> None:
    good = ply(tmp_path / "a.ply", ball.points)
    (tmp_path / "empty.ply").touch()
    (tmp_path / "a.stl").write_bytes(good.read_bytes())
    (tmp_path / "a.xyz").write_bytes(good.read_bytes())
    (tmp_path / "a.dat").write_bytes(good.read_bytes())
    (tmp_path / "b.ply").write_text("hello")
    assert refusal(tmp_path) == f"{tmp_path.name}: this is a folder; name the scan files in it"
    assert "no.ply: there is no such file" in refusal(tmp_path / "no.ply")
    assert refusal(tmp_path / "empty.ply") == "empty.ply: the file is empty; copy or export it again"
    assert refusal(tmp_path / "a.stl") == "a.stl: the name says STL, the content is PLY; rename it to end in .ply"
    assert refusal(tmp_path / "a.xyz") == "a.xyz: the name says text, the content is PLY; rename it to end in .ply"
    unknown = refusal(tmp_path / "a.dat")
    assert unknown.startswith("a.dat: the suffix '.dat' is not known; read are " + " ".join(SUFFIXES))
    assert unknown.endswith("its content looks like PLY: rename it to end in .ply")
    assert refusal(tmp_path / "b.ply").startswith("b.ply: the file does not begin like PLY; it must begin with 'ply'")
    with pytest.raises(ScanFault, match="no scan is named"):
        load([])


def test_the_same_file_twice(tmp_path: Path, ball) -> None:
    one = ply(tmp_path / "a.ply", ball.points)
    copy = ply(tmp_path / "b.ply", ball.points)
    other = ply(tmp_path / "c.ply", ball.points + 1)
    assert refusal(one, copy) == (
        "b.ply: this holds the same as a.ply; name each view once: twice would make it look more certain"
    )
    assert "a.ply: this is the same file twice" in refusal(one, other, one)
    assert len(load([one, other], "mm")) == 2


def test_five_hundred_points_or_a_closed_mesh(tmp_path: Path, ball) -> None:
    assert refusal(ply(tmp_path / "a.ply", ball.points[:499])) == (
        "a.ply: the scan holds 499 usable points; at least 500 are needed, unless it is a closed mesh"
    )
    load([ply(tmp_path / "b.ply", ball.points[:500])], "mm")
    load([ply(tmp_path / "c.ply", ball.points[:300]), ply(tmp_path / "d.ply", ball.points[300:])], "mm")
    box = trimesh.creation.box()
    for name in ("box.stl", "box.ply", "box.off"):
        box.export(tmp_path / name)
        (scan,) = load([tmp_path / name], "m")
        assert len(scan.faces) == 12
    soup = trimesh.Trimesh(box.triangles.reshape(-1, 3), np.arange(36).reshape(-1, 3), process=False)
    soup.export(tmp_path / "soup.ply")
    assert len(load([tmp_path / "soup.ply"], "m")[0].faces) == 12
    # Windings that disagree leave no edge open; the surface turns them.
    faces = np.where(np.arange(12)[:, None] % 3 == 0, box.faces[:, ::-1], box.faces)
    trimesh.Trimesh(box.vertices, faces, process=False).export(tmp_path / "turned.off")
    assert len(load([tmp_path / "turned.off"], "m")[0].faces) == 12
    box.update_faces(np.arange(12) > 0)
    box.export(tmp_path / "open.off")
    assert "the scan holds 8 usable points in an open mesh; at least 500 are" in refusal(tmp_path / "open.off")


@pytest.mark.parametrize(
    ("turn", "message"),
    [
        ([[1, 0, 0], [0, 1, 0], [1, 2, 0]], "all points lie in a plane; a body has extent in three directions"),
        ([[1, 2, 3], [0, 0, 0], [0, 0, 0]], "all points lie on a line"),
        ([[0, 0, 0], [0, 0, 0], [0, 0, 0]], "all 1000 points lie in one place; the file holds no shape"),
    ],
)
def test_without_extent(tmp_path: Path, turn: list[list[int]], message: str) -> None:
    # Tilted, and far from the origin.
    points = np.random.default_rng(0).uniform(0, 100, (1000, 3)) @ np.array(turn, float) + [5000, 0, -3000]
    assert message in refusal(ply(tmp_path / "a.ply", points))


def test_a_thin_sheet_with_scanner_noise_is_no_plane(tmp_path: Path) -> None:
    rng = np.random.default_rng(0)
    sheet = rng.uniform(0, 500, (2000, 3))
    sheet[:, 2] = rng.normal(0, 0.02, 2000)
    load([ply(tmp_path / "a.ply", sheet)], "mm")


def test_flat_views_of_several_sides(tmp_path: Path) -> None:
    points = np.random.default_rng(0).uniform(0, 100, (1000, 3))
    top, side = points.copy(), points.copy()
    top[:, 2], side[:, 1] = 100, 0
    load([ply(tmp_path / "top.ply", top), ply(tmp_path / "side.ply", side)], "mm")
    top[:, 0] += 1
    flat = points.copy()
    flat[:, 2] = 100
    assert "all points lie in a plane" in refusal(ply(tmp_path / "top.ply", top), ply(tmp_path / "flat.ply", flat))


def test_sizes_that_no_scan_has(tmp_path: Path, ball) -> None:
    path = ply(tmp_path / "a.ply", ball.points * 0.0049)
    assert refusal(path, unit="mm").startswith("a.ply: the largest side is 97")
    assert "um, under 1 mm, so the unit is probably wrong; the same numbers are 97" in refusal(path, unit="mm")
    assert "m if in m, 24." in refusal(path, unit="mm")
    load([path], "cm")
    large = ply(tmp_path / "b.ply", ball.points * 10)
    assert "the largest side is 1.99" in refusal(large, unit="m")
    assert "km, over 1 km, so the unit is probably wrong; the same numbers are 1.99" in refusal(large, unit="m")
    endless = ply(tmp_path / "c.ply", ball.points * 1e306)
    assert "over 1 km" in refusal(endless)
    astray = ply(tmp_path / "d.ply", np.vstack([ball.points, [0, 0, 3.9e6]]))
    assert refusal(astray) == (
        "d.ply: the largest side is 3.9 km, over 1 km, so the file is probably corrupt, or a point of it lies far "
        "astray; export it again; no unit that is read here makes sense of it"
    )


def test_points_that_are_not_finite(tmp_path: Path, ball) -> None:
    points = ball.points.copy()
    points[:3] = [[np.nan, 0, 0], [0, np.inf, 0], [0, 0, -np.inf]]
    (scan,) = load([ply(tmp_path / "a.ply", points)], "mm")
    assert (scan.total, len(scan.points()), scan.no_return) == (600, 597, 0)
    assert [note.code for note in scan.warnings] == ["not-finite-dropped"]
    points[:7] = np.nan
    assert "7 of 600 points (1.2 %) have coordinates that are not finite" in refusal(ply(tmp_path / "b.ply", points))
    assert "7 of 7 points (100.0 %)" in refusal(ply(tmp_path / "c.ply", points[:7]))


def test_meshes_with_points_that_are_not_finite(tmp_path: Path) -> None:
    mesh = trimesh.creation.icosphere(subdivisions=3, radius=50)
    text = trimesh.exchange.off.export_off(mesh).splitlines()
    path = tmp_path / "a.off"
    path.write_text("\n".join([*text[:2], "nan 0 0", *text[3:]]))
    assert "1 points of the mesh have coordinates that are not finite, and faces use them; repair" in refusal(path)
    # One that no face uses goes, and the faces are numbered anew.
    body = [line.split() for line in text[2 + len(mesh.vertices) :]]
    faces = [f"3 {int(a) + 1} {int(b) + 1} {int(c) + 1}" for _, a, b, c in body]
    counts = f"{len(mesh.vertices) + 1} {len(mesh.faces)} 0"
    path.write_text("\n".join(["OFF", counts, "nan 0 0", *text[2 : 2 + len(mesh.vertices)], *faces]))
    (scan,) = load([path], "mm")
    np.testing.assert_array_equal(scan.faces, mesh.faces)
    assert trimesh.Trimesh(scan.points(), scan.faces, process=False).volume == pytest.approx(
        mesh.volume * 1e-9, rel=1e-6
    )


def test_single_precision_far_from_the_origin_is_said(tmp_path: Path, ball) -> None:
    # Single precision has steps of 1/256 between 32768 and 65536, of 1/2 between 2^22 and 2^23.
    near, far = ball.points / 100 + [4e3, 5e4, 0], ball.points / 100 + [4e5, 5e6, 0]
    (scan,) = load([ply(tmp_path / "a.ply", near, "<f4")], "m")
    assert scan.warnings[0].text == (
        "a.ply: the coordinates lie far from the origin and are stored in steps of 3.906 mm; "
        "export them nearer to the origin or in double precision."
    )
    assert refusal(ply(tmp_path / "d.ply", far, "<f4"), unit="m") == (
        "d.ply: the coordinates lie so far from the origin that they are stored in steps of 500 mm, where the largest "
        "side is 2 m; export them nearer to the origin or in double precision"
    )
    assert load([ply(tmp_path / "b.ply", far)], "m")[0].warnings == ()
    assert load([ply(tmp_path / "c.ply", ball.points, "<f4")], "mm")[0].warnings == ()


def test_points_on_one_another_at_the_origin_are_said(tmp_path: Path, ball) -> None:
    points = ball.points.copy()
    points[:5] = 0
    (scan,) = load([ply(tmp_path / "a.ply", points)], "mm")
    assert [note.code for note in scan.warnings] == ["points-at-origin"]
    assert scan.warnings[0].text.startswith("a.ply: 5 points lie exactly at 0, 0, 0")


def test_points_without_a_face_are_said(tmp_path: Path) -> None:
    mesh = trimesh.creation.icosphere(subdivisions=3, radius=50)
    loose = trimesh.Trimesh(np.vstack([mesh.vertices, [[0, 0, 0]]]), mesh.faces, process=False)
    loose.export(tmp_path / "a.off")
    (scan,) = load([tmp_path / "a.off"], "mm")
    assert scan.warnings[0].text == "a.off: 1 of 643 points belong to no face of the mesh."


def test_a_mesh_among_several_scans_is_said(tmp_path: Path, ball) -> None:
    trimesh.creation.icosphere(subdivisions=3, radius=50).export(tmp_path / "m.off")
    mesh, cloud = load([tmp_path / "m.off", ply(tmp_path / "a.ply", ball.points)], "mm")
    assert mesh.warnings[0].text == (
        "m.off: a mesh among several scans: its corners are used as points, its faces are not."
    )
    assert cloud.warnings == ()
    assert load([tmp_path / "m.off"], "mm")[0].warnings == ()


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="needs named pipes")
def test_a_pipe_is_no_file(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "a.xyz")
    assert refusal(tmp_path / "a.xyz") == "a.xyz: this is a pipe or a device, no file; save the scan to a file first"


def test_large_files_stream(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    n = 2_000_000
    monkeypatch.setattr("scanmass.scans.ply_rows.BLOCK_POINTS", n // 20)
    points = np.random.default_rng(0).uniform(0, 100, (n, 3)).astype("<f4")
    path = ply(tmp_path / "a.ply", points, "<f4")
    tracemalloc.start()
    try:
        (scan,) = load([path], "mm")
        assert sum(len(block.points) for block in scan.blocks()) == n
        # A block of 100 000 points: 1.2 MB as read, 2.4 MB as float64, and again in metres; 48 MB whole.
        assert tracemalloc.get_traced_memory()[1] < 15e6
    finally:
        tracemalloc.stop()


def test_blocks_can_be_read_again(tmp_path: Path, ball) -> None:
    scan = read(ply(tmp_path / "a.ply", ball.points))
    np.testing.assert_array_equal(scan.points(), scan.points())
    assert len(scan.sha256) == 64
