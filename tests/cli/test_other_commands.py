"""``check``, ``materials`` and ``samples``."""

from __future__ import annotations

import json
import sys
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from scanmass.materials import table
from scanmass.pipeline.file import load
from scanmass.pipeline.keys import keys, keys_text


def test_a_pipeline_without_faults_is_echoed(run: Any) -> None:
    ended = run("check", "cube.yaml")
    assert ended.exit_code == 0
    assert ended.stdout.startswith("cube.yaml: no faults.")
    assert "7100 ± 100 kg/m3" in ended.stdout
    assert ended.stderr == ""


def test_the_echo_is_a_pipeline_file_itself(run: Any, tmp_path: Path) -> None:
    echoed = run("check", "cube.yaml").stdout.split("\n\n", 1)[1]
    (tmp_path / "echo.yaml").write_text(echoed, encoding="utf-8")
    assert load(tmp_path / "echo.yaml") == load(tmp_path / "cube.yaml")


def test_checked_as_json(run: Any) -> None:
    found = json.loads(run("check", "cube.yaml", "--json").stdout)
    assert found["faults"] == []
    density = next(row for row in found["quantities"] if row["key"] == "inside.body.density")
    assert (density["value"], density["std"]) == (7100.0, 50.0)


def test_all_faults_at_once_on_stderr(run: Any, tmp_path: Path) -> None:
    (tmp_path / "bad.yaml").write_text("scan: {unit: mmm}\ninside: {body: {density: 7100}}\n")
    ended = run("check", "bad.yaml")
    assert ended.exit_code == 2
    assert [line[:11] for line in ended.stderr.splitlines()] == ["bad.yaml:1:", "bad.yaml:2:"]
    assert ended.stdout == ""


def test_a_missing_pipeline_file(run: Any) -> None:
    ended = run("check", "nowhere.yaml")
    assert ended.exit_code == 2
    assert "nowhere.yaml" in ended.stderr
    assert "Traceback" not in ended.stderr


def test_every_key(run: Any) -> None:
    assert run("check", "--keys").stdout == keys_text()
    listed = json.loads(run("check", "--keys", "--json").stdout)
    assert [row["key"] for row in listed] == [row.key for row in keys()]


@pytest.mark.parametrize("arguments", [(), ("cube.yaml", "--keys")])
def test_a_file_or_the_keys(run: Any, arguments: tuple[str, ...]) -> None:
    ended = run("check", *arguments)
    assert ended.exit_code == 2
    assert ended.stderr.startswith("give a pipeline file or --keys, one of the two")


def test_materials_with_range_source_and_mark(run: Any) -> None:
    found = table.search("bronze")
    ended = run("materials", "bronze")
    assert ended.exit_code == 0
    text = " ".join(ended.stdout.split())
    for material in found:
        assert f"{material.low_kg_m3:g} to {material.high_kg_m3:g} kg/m3" in text
        assert f"[{material.mark}]" in text
        assert material.source.split()[0] in text
    assert max(map(len, ended.stdout.splitlines())) <= 80


def test_materials_as_json(run: Any) -> None:
    listed = json.loads(run("materials", "--json").stdout)
    assert [row["name"] for row in listed] == [material.name for material in table.materials()]


def test_materials_in_pounds(run: Any) -> None:
    # 1 lb/ft3 = 16.01846 kg/m3
    first = table.search("bronze")[0]
    assert f"{first.low_kg_m3 / 16.01846337:.4g} to" in run("materials", "bronze", "--units", "us").stdout


def test_no_such_material(run: Any) -> None:
    ended = run("materials", "statuery bronze")
    assert ended.exit_code == 2
    assert ended.stderr.startswith("material 'statuery bronze' is not in the table; did you mean statuary bronze")
    assert ended.stdout == ""


@pytest.mark.parametrize("as_json", [False, True])
def test_samples_lists_what_it_wrote(run: Any, monkeypatch: pytest.MonkeyPatch, as_json: bool) -> None:
    def write_samples(directory: Path, *, progress: Any) -> list[Path]:
        progress("bust", 1, 1)
        return [directory / "bust.ply", directory / "bust.truth.json"]

    stand_in = ModuleType("scanmass.studies.samples")
    stand_in.write_samples = write_samples  # type: ignore[attr-defined]
    monkeypatch.setitem(sys.modules, "scanmass.studies.samples", stand_in)
    ended = run("samples", "here", *(["--json"] if as_json else []))
    assert ended.exit_code == 0
    if as_json:
        assert json.loads(ended.stdout) == {"directory": "here", "files": ["bust.ply", "bust.truth.json"]}
    else:
        assert ended.stdout.split() == [str(Path("here") / "bust.ply"), str(Path("here") / "bust.truth.json")]
