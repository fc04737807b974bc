"""A result folder is whole, readable by other libraries, repeatable, and never takes what is not ours."""

from __future__ import annotations

import hashlib
import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow.parquet as pq
import pytest
import trimesh

from scanmass.cloud.cloud import REASONS, Removed
from scanmass.errors import UserFault
from scanmass.pipeline.record import MassResult
from scanmass.report import directory
from scanmass.report.directory import write
from scanmass.report.schema import InvalidResult, validate
from scanmass.report.tables import STATE_VERSION, write_replicates, write_state
from scanmass.report.voxels import write_cells


def _bytes(folder: Path) -> dict[str, str]:
    return {file.name: hashlib.sha256(file.read_bytes()).hexdigest() for file in folder.iterdir()}


def test_the_files_of_the_contract(result: MassResult, tmp_path: Path) -> None:
    write(result, tmp_path / "deep" / "out")
    out = tmp_path / "deep" / "out"
    assert sorted(_bytes(out)) == sorted(set(directory.FILES) - {"report.html", "rehearsal.json", "rehearsal.jsonl"})
    validate(json.loads((out / "result.json").read_text("utf-8")))
    assert (out / "result.json").read_text("utf-8") == result.to_json()
    assert json.loads((out / "run.json").read_text("utf-8"))["host"] == "bench"
    assert (out / "pipeline.yaml").read_text("utf-8") == result.pipeline_text
    assert [entry.name for entry in out.parent.iterdir()] == ["out"]


def test_same_result_same_bytes(result: MassResult, tmp_path: Path) -> None:
    write(result, tmp_path / "one")
    write(result, tmp_path / "two")
    assert _bytes(tmp_path / "one") == _bytes(tmp_path / "two")


def test_an_earlier_result_is_replaced_whole(result: MassResult, tmp_path: Path) -> None:
    write(result, tmp_path / "out")
    write(result, tmp_path / "out", cells=False)
    assert "cells.vti" not in _bytes(tmp_path / "out")


def _put_file(out: Path) -> None:
    out.write_text("mine")


def _put_foreign(out: Path) -> None:
    out.mkdir()
    (out / "thesis.docx").write_text("mine")


def _put_namesake(out: Path) -> None:
    out.mkdir()
    (out / "result.json").write_text('{"schema": "something else"}')


def _put_folder(out: Path) -> None:
    (out / "state.npz").mkdir(parents=True)


@pytest.mark.parametrize(
    ("put", "fault"),
    [
        (_put_file, "out: is a file, not a folder"),
        (_put_foreign, "out: holds 'thesis.docx', not written by scanmass; name a new or empty folder"),
        (_put_namesake, "out: holds files, but no result.json of scanmass among them"),
        (_put_folder, "out: holds 'state.npz', not written"),
    ],
)
def test_what_is_not_ours_is_refused_and_untouched(result: MassResult, tmp_path: Path, put: Any, fault: str) -> None:
    put(tmp_path / "out")
    before = sorted(tmp_path.rglob("*"))
    with pytest.raises(UserFault, match=fault):
        write(result, tmp_path / "out")
    assert sorted(tmp_path.rglob("*")) == before


def test_a_place_that_cannot_be_written_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "scan.ply").write_text("mine")
    with pytest.raises(UserFault, match=r"out: cannot write results: scan.ply is a file, not a folder; choose"):
        directory.refuse_foreign(tmp_path / "scan.ply" / "deep" / "out")
    # Tests may run as an administrator, whom no folder is closed to.
    monkeypatch.setattr(directory.os, "access", lambda path, _: path != tmp_path / "closed")
    (tmp_path / "closed").mkdir()
    for place in ("closed", "closed/new/out"):
        with pytest.raises(UserFault, match=r"cannot write results: the folder .*closed may not be written to; choose"):
            directory.refuse_foreign(tmp_path / place)
    directory.refuse_foreign(tmp_path / "open" / "out")


def test_nothing_half_written(result: MassResult, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    write(result, tmp_path / "out")
    before = _bytes(tmp_path / "out")

    def full(*_: Any) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(directory, "write_state", full)
    with pytest.raises(UserFault, match="out: cannot write results: No space left on device"):
        write(result, tmp_path / "out")
    assert _bytes(tmp_path / "out") == before
    assert [entry.name for entry in tmp_path.iterdir()] == ["out"]


def test_an_invalid_document_is_never_written(result: MassResult, document: Any, tmp_path: Path) -> None:
    document["mass_kg"]["value"] = float("nan")
    with pytest.raises(InvalidResult, match="mass_kg"):
        write(result, tmp_path / "out")
    assert list(tmp_path.iterdir()) == []


def test_surface_is_read_by_trimesh(result: MassResult, tmp_path: Path) -> None:
    write(result, tmp_path / "out")
    mesh = trimesh.load(tmp_path / "out" / "surface.ply", process=False)
    surface = result.products.surface
    # Doubles: not a bit is lost, 400 km from the origin.
    np.testing.assert_array_equal(mesh.vertices, surface.vertices)
    np.testing.assert_array_equal(mesh.faces, surface.faces)
    inferred = mesh.metadata["_ply_raw"]["face"]["data"]["inferred"]
    np.testing.assert_array_equal(np.asarray(inferred).ravel(), surface.inferred)
    orange = (mesh.visual.vertex_colors[:, :3] == (230, 126, 34)).all(axis=1)
    assert set(np.flatnonzero(orange)) == {0, 1, 2, 3}


def test_removed_points_keep_their_reason(result: MassResult, tmp_path: Path) -> None:
    write(result, tmp_path / "out")
    path = tmp_path / "out" / "removed.ply"
    header = path.read_bytes().split(b"end_header")[0].decode()
    named = dict(enumerate(REASONS))
    assert all(f"comment reason {number}: {name}\n" in header for number, name in named.items())
    raw = trimesh.load(path).metadata["_ply_raw"]["vertex"]["data"]
    removed = result.products.removed
    assert [named[int(r)] for r in raw["reason"]] == ["outlier", "support plane", "clutter"]
    np.testing.assert_array_equal(raw["count"], removed.count)
    np.testing.assert_array_equal(raw["x"], removed.points[:, 0])


def test_open3d_reads_both(result: MassResult, tmp_path: Path) -> None:
    import open3d

    write(result, tmp_path / "out")
    mesh = open3d.io.read_triangle_mesh(str(tmp_path / "out" / "surface.ply"))
    np.testing.assert_array_equal(np.asarray(mesh.vertices), result.products.surface.vertices)
    np.testing.assert_array_equal(np.asarray(mesh.triangles), result.products.surface.faces)
    cloud = open3d.io.read_point_cloud(str(tmp_path / "out" / "removed.ply"))
    np.testing.assert_array_equal(np.asarray(cloud.points), result.products.removed.points)


def test_nothing_removed_is_still_a_file(result: MassResult, tmp_path: Path) -> None:
    products = replace(result.products, removed=Removed.nothing())
    write(replace(result, products=products), tmp_path / "out")
    assert b"element vertex 0\n" in (tmp_path / "out" / "removed.ply").read_bytes()


def _vtk_cells(path: Path) -> tuple[Any, dict[str, Any]]:
    from vtk.util.numpy_support import vtk_to_numpy
    from vtkmodules.vtkIOXML import vtkXMLImageDataReader

    reader = vtkXMLImageDataReader()
    reader.SetFileName(str(path))
    reader.Update()
    image = reader.GetOutput()
    shape = tuple(n - 1 for n in image.GetDimensions())
    data = image.GetCellData()
    return image, {
        data.GetArrayName(k): vtk_to_numpy(data.GetArray(k)).reshape(shape, order="F")
        for k in range(data.GetNumberOfArrays())
    }


def test_vtk_reads_the_cells(result: MassResult, tmp_path: Path) -> None:
    write(result, tmp_path / "out")
    image, arrays = _vtk_cells(tmp_path / "out" / "cells.vti")
    cells = result.products.cells
    np.testing.assert_array_equal(arrays["fraction"], cells.fraction)
    np.testing.assert_array_equal(arrays["density_kg_m3"], result.products.density_kg_m3)
    assert arrays["fraction"].dtype == np.float32
    assert image.GetOrigin() == tuple(cells.origin)
    assert image.GetSpacing() == (cells.cell,) * 3


def test_vtk_reads_several_packed_blocks(result: MassResult, tmp_path: Path) -> None:
    # 70 x 80 x 90 floats are 2.0 MB: one whole block of 1 MiB and a short one; axes that cannot be swapped unseen.
    fraction = np.random.default_rng(3).random((70, 80, 90), np.float32)
    cells = replace(result.products.cells, fraction=fraction)
    write_cells(tmp_path / "cells.vti", cells, 2 * fraction)
    _, arrays = _vtk_cells(tmp_path / "cells.vti")
    np.testing.assert_array_equal(arrays["fraction"], fraction)
    np.testing.assert_array_equal(arrays["density_kg_m3"], 2 * fraction)


def test_a_fine_grid_is_averaged_and_keeps_its_mass(result: MassResult, tmp_path: Path) -> None:
    rng = np.random.default_rng(4)
    fraction = rng.random((50, 33, 20), np.float32) * (rng.random((50, 33, 20)) > 0.5)
    density = rng.uniform(1000, 9000, fraction.shape).astype(np.float32)
    cells = replace(result.products.cells, fraction=fraction.astype(np.float32))
    write_cells(tmp_path / "cells.vti", cells, density, most=20)
    image, arrays = _vtk_cells(tmp_path / "cells.vti")
    assert arrays["fraction"].shape == (17, 11, 7)
    assert image.GetSpacing() == pytest.approx((3 * cells.cell,) * 3, rel=1e-15)
    mass = float((fraction.astype(float) * density).sum()) * cells.cell**3
    coarse = arrays["fraction"].astype(float) * arrays["density_kg_m3"]
    # Two float32 roundings a block, 1309 blocks: far below 1e-6.
    assert float(coarse.sum()) * (3 * cells.cell) ** 3 == pytest.approx(mass, rel=1e-6)
    block = np.s_[3:6, 6:9, 9:12]
    assert arrays["fraction"][1, 2, 3] == pytest.approx(fraction[block].mean(dtype=float), rel=1e-6)


def test_replicates_are_read_back(result: MassResult, tmp_path: Path) -> None:
    write(result, tmp_path / "out")
    table = pq.read_table(tmp_path / "out" / "replicates.parquet")
    assert table.column_names == ["volume_m3", "mass_kg"]
    np.testing.assert_array_equal(table["mass_kg"].to_numpy(), result.products.replicates["mass_kg"])
    with pytest.raises(ValueError, match="columns of one length"):
        write_replicates(tmp_path / "odd.parquet", {"a": np.zeros(3), "b": np.zeros(4)})


def test_state_holds_no_pickle(result: MassResult, tmp_path: Path) -> None:
    write(result, tmp_path / "out")
    with np.load(tmp_path / "out" / "state.npz", allow_pickle=False) as state:
        assert int(state["state_version"]) == STATE_VERSION
        np.testing.assert_array_equal(state["patch_of_face"], np.arange(12))
    with pytest.raises(ValueError, match="pickle"):
        write_state(tmp_path / "odd.npz", {"objects": np.array([{}], dtype=object)})
