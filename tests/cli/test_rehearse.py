"""``rehearse`` on the command line, its outcome made by hand."""

from __future__ import annotations

import json
import sys
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from scanmass.errors import Declined

ROW = {"figure": "volume", "held": 31, "of": 40, "share": 0.775, "share_low": 0.6155, "share_high": 0.8916}
ROW |= {"bias": 0.1, "spread": 1.9, "factor": 1.84, "widen_by": 1.84, "random_held": None, "determined": None}
OUTCOME = {
    "schema": "scanmass/rehearsal/1",
    "level": 0.95,
    "scans": 41,
    "measured": 40,
    "failed": [{"scan": 3, "reason": "the surface cannot be closed"}],
    "figures": [
        ROW,
        ROW | {"figure": "centre x", "widen_by": 1.0, "held": 38, "random_held": 30, "bias": None},
        ROW | {"figure": "axis 2", "widen_by": 1.0, "held": 40, "determined": 36, "bias": None},
        ROW | {"figure": "centre region", "held": 0, "of": 0, "widen_by": None},
    ],
    "verdict": "Bounds stated as 95 % held too seldom for volume: widen them 1.9 times.",
    "assumptions": [{"code": "mesh-moved", "text": "The corners are moved."}],
}


@pytest.fixture
def asked(monkeypatch: pytest.MonkeyPatch) -> dict[str, Any]:
    """What the command asked of the study, which stands in for itself."""
    seen: dict[str, Any] = {}

    def rehearse(directory: Path, **options: Any) -> dict[str, Any]:
        seen.update(options, directory=directory)
        if directory.name == "nothing":
            raise Declined("the result states no bounds", allowed="declare scan.noise_std")
        return OUTCOME

    stand_in = ModuleType("scanmass.studies.rehearse")
    stand_in.rehearse = rehearse  # type: ignore[attr-defined]
    monkeypatch.setitem(sys.modules, "scanmass.studies.rehearse", stand_in)
    import scanmass.studies

    monkeypatch.setattr(scanmass.studies, "rehearse", stand_in, raising=False)
    return seen


def test_options_are_handed_on_and_json_is_all_there_is(run: Any, asked: dict[str, Any]) -> None:
    ended = run("rehearse", "heron", "--scans", "41", "--seed", "5", "--workers", "2", "--again", "--json")
    assert ended.exit_code == 0
    assert json.loads(ended.stdout) == OUTCOME
    assert ended.stderr == ""
    assert asked.pop("progress") is not None
    assert asked == {"directory": Path("heron"), "scans": 41, "seed": 5, "workers": 2, "again": True}


def test_a_table_to_read_aloud(run: Any, asked: dict[str, Any]) -> None:
    ended = run("rehearse", "heron")
    assert ended.exit_code == 0
    assert (asked["scans"], asked["seed"], asked["workers"], asked["again"]) == (40, 0, 1, False)
    lines = [" ".join(line.split()) for line in ended.stdout.splitlines()]
    text = " ".join(lines)
    assert lines[0] == "heron: rehearsed by 41 simulated scans, seed 0"
    assert text.index(str(OUTCOME["verdict"])) < text.index("How often the stated bounds held")
    assert "volume 31 of 40 (62 to 89 %)" in lines
    assert "too narrow for 95 %: 1.84 times as wide would have held" in text
    assert "centre of mass, x 38 of 40 (62 to 89 %)" in lines
    assert "the random part alone held 30; the rest is what the unseen part could be" in text
    assert "not claimed in 4, which counts as held" in text
    assert "centre of mass, region no bounds" in lines
    assert "the surface cannot be closed" in text
    assert text.index("What this cannot show") < text.index("The corners are moved. [mesh-moved]")
    assert max(map(len, ended.stdout.splitlines())) <= 80


def test_a_result_without_bounds_is_declined(run: Any, asked: dict[str, Any]) -> None:
    ended = run("rehearse", "nothing")
    assert ended.exit_code == 2
    assert ended.stderr == "the result states no bounds; declare scan.noise_std\n"
    assert ended.stdout == ""


def test_a_folder_that_is_none(run: Any) -> None:
    ended = run("rehearse", "nowhere")
    assert ended.exit_code == 2
    assert ended.stderr.startswith("nowhere: there is no such folder; name the folder that 'scanmass measure' wrote")
    assert run("rehearse", "nowhere", "--scans", "0").exit_code == 2
