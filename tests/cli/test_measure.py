"""``scanmass measure``: options handed on, results on stdout, files only where asked for."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from scanmass.pipeline.record import MassResult

COMMAND = ("measure", "cube.ply", "--pipeline", "cube.yaml")


@pytest.fixture
def calls(measuring: Any, result: MassResult) -> list[tuple[Any, Any, dict[str, Any]]]:
    """What the stand-in was called with."""
    seen: list[tuple[Any, Any, dict[str, Any]]] = []

    def fake(scans: Any, pipeline: Any, **options: Any) -> MassResult:
        seen.append((scans, pipeline, options))
        print("chatter of a library")
        return result

    measuring(fake)
    return seen


def test_a_summary_on_stdout_and_nothing_written(run: Any, calls: Any, tmp_path: Path) -> None:
    ended = run(*COMMAND)
    assert ended.exit_code == 0
    assert "mass          7.00 kg     6.50 to 7.50 kg" in ended.stdout
    assert "scan.noise_std" in ended.stdout
    assert "scanmass does not judge whether the object or a pick point can bear the" in ended.stdout
    assert max(map(len, ended.stdout.splitlines())) <= 80
    assert [entry.name for entry in tmp_path.iterdir()] == ["cube.yaml"]


def test_options_are_handed_on(run: Any, calls: Any) -> None:
    run("measure", "a.ply", "b.ply", *COMMAND[2:])
    run(*COMMAND, "--unit", "mm", "--seed", "7", "--replicates", "500", "--workers", "2")
    (scans, pipeline, plain), (_, _, given) = calls
    assert scans == [Path("a.ply"), Path("b.ply")]
    assert pipeline.scan.unit == "mm"
    progress = plain.pop("progress")
    assert plain == {"unit": None, "seed": 0, "replicates": None, "workers": 1}
    assert given == {"unit": "mm", "seed": 7, "replicates": 500, "workers": 2, "progress": progress}


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("--unit", "in"), "options: scan.unit: 'in' is given, and the file says 'mm'"),
        (("--unit", "mmm"), "options: scan.unit: "),
        (("--replicates", "3"), "options: bounds.replicates: "),
    ],
)
def test_options_are_held_to_the_rules_of_the_file(run: Any, calls: Any, arguments: Any, said: str) -> None:
    ended = run(*COMMAND, *arguments)
    assert ended.exit_code == 2
    assert ended.stderr.startswith(said)
    assert calls == []


def test_json_is_the_file_byte_for_byte(run: Any, calls: Any, tmp_path: Path) -> None:
    ended = run(*COMMAND, "--json", "--out", "out")
    assert ended.exit_code == 0
    assert ended.stderr.splitlines()[-1] == "results written to out"
    written = (tmp_path / "out" / "result.json").read_text("utf-8")
    assert ended.stdout.endswith(written)
    assert json.loads(written)["mass_kg"]["value"] == 7.0


def test_pounds_and_inches(run: Any, calls: Any) -> None:
    assert "15.4 lb" in run(*COMMAND, "--units", "us").stdout


def test_a_foreign_folder_is_refused_before_the_work(run: Any, calls: Any, tmp_path: Path) -> None:
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "photo.jpg").write_text("mine")
    ended = run(*COMMAND, "--out", "out")
    assert ended.exit_code == 2
    assert ended.stderr.startswith("out: holds 'photo.jpg', not written by scanmass; name a new or empty folder")
    assert calls == []


def test_a_result_that_breaks_the_contract_is_never_shown(run: Any, calls: Any, document: Any) -> None:
    document["mass_kg"]["value"] = -1.0
    ended = run(*COMMAND, "--json")
    assert ended.exit_code == 3
    assert "breaks its own contract" in ended.stderr
    assert "mass_kg" not in ended.stdout


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("measure", "cube.ply"), "--pipeline"),
        (("measure", "--pipeline", "cube.yaml"), "SCAN"),
        ((*COMMAND, "--seed", "one"), "--seed"),
        ((*COMMAND, "--seed", "-1"), "--seed"),
        ((*COMMAND, "--workers", "0"), "--workers"),
        ((*COMMAND, "--units", "furlongs"), "--units"),
        ((*COMMAND, "--guess"), "--guess"),
        (("wiegh", "cube.ply"), "wiegh"),
    ],
)
def test_usage_errors_end_with_2(run: Any, calls: Any, arguments: tuple[str, ...], said: str) -> None:
    ended = run(*arguments)
    assert ended.exit_code == 2
    assert said in ended.stderr
    assert ended.stdout == ""
    assert calls == []
