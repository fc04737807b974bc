"""Rehearsing results of a pebble: the calls, going on, workers, a plan that tells, and what is refused."""

from __future__ import annotations

import json
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import scanmass
from scanmass.errors import Declined, UserFault
from scanmass.pipeline import run
from scanmass.report.directory import refuse_foreign, write
from scanmass.studies.rehearse import rehearse
from tests.pipeline import pebble

Copied = Callable[[Path], Path]


@pytest.fixture(scope="module")
def of_views(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The pebble from four views that tell their own noise."""
    folder = tmp_path_factory.mktemp("views")
    files = [
        pebble.write_ply(folder / f"{k}.ply", 1000.0 * points) for k, points in enumerate(pebble.views(1200, 1e-4))
    ]
    write(scanmass.measure(files, pebble.settings()), folder / "result", cells=False)
    return folder / "result"


@pytest.fixture(scope="module")
def of_mesh(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The pebble from a closed mesh, its noise declared as 0.1 mm alike over 30 mm."""
    folder = tmp_path_factory.mktemp("mesh")
    vertices, faces = pebble.mesh(2000)
    file = pebble.write_off(folder / "mesh.off", 1000.0 * vertices, faces)
    settings = pebble.settings(noise_std="0.1 mm", noise_length="30 mm")
    write(scanmass.measure(file, settings), folder / "result", cells=False)
    return folder / "result"


@pytest.fixture
def copied(tmp_path: Path) -> Copied:
    def copy(result: Path) -> Path:
        return Path(shutil.copytree(result, tmp_path / "copy"))

    return copy


@pytest.fixture
def calls(monkeypatch: pytest.MonkeyPatch) -> list[int]:
    """One entry a call of the ``measure`` that users call."""
    made: list[int] = []
    own = run.measure
    assert scanmass.measure is own

    def counted(*given: Any, **options: Any) -> Any:
        made.append(1)
        return own(*given, **options)

    monkeypatch.setattr(run, "measure", counted)
    return made


def _changed(folder: Path, change: Callable[[dict[str, Any]], None]) -> Path:
    document = json.loads((folder / "result.json").read_text("utf-8"))
    change(document)
    (folder / "result.json").write_text(json.dumps(document), encoding="utf-8")
    return folder


def _figure(outcome: dict[str, Any], name: str) -> dict[str, Any]:
    found: dict[str, Any] = next(row for row in outcome["figures"] if row["figure"] == name)
    return found


def test_every_scan_is_measured_once_and_an_interrupted_rehearsal_goes_on(
    of_views: Path, copied: Copied, calls: list[int]
) -> None:
    folder = copied(of_views)
    done: list[tuple[str, int, int]] = []
    whole = rehearse(folder, scans=2, progress=lambda *report: done.append(report))
    assert len(calls) == 2
    assert done == [("rehearse", k, 2) for k in range(3)]
    assert json.loads((folder / "rehearsal.json").read_text("utf-8")) == whole
    refuse_foreign(folder)  # a result with its rehearsal may still be replaced by a new one

    assert rehearse(folder, scans=2) == whole
    assert len(calls) == 2

    # Cut off while the last line was written: that scan alone is made again, and comes out the same.
    ledger = folder / "rehearsal.jsonl"
    ledger.write_bytes(ledger.read_bytes()[:-200])
    assert rehearse(folder, scans=2) == whole
    assert len(calls) == 3

    # Two more, by two processes that the counter does not see; what is done already is not done again.
    assert rehearse(folder, scans=4, workers=2)["measured"] == 4
    assert len(calls) == 3


def test_two_workers_come_to_the_same(of_mesh: Path, copied: Copied) -> None:
    folder = copied(of_mesh)
    rehearse(folder, scans=3)
    alone = (folder / "rehearsal.json").read_bytes()
    rehearse(folder, scans=3, workers=2, again=True)
    assert (folder / "rehearsal.json").read_bytes() == alone


def test_bounds_planted_too_narrow_are_found_and_by_how_much(of_mesh: Path, copied: Copied) -> None:
    fair = rehearse(of_mesh, scans=12)
    # Of the volume alone: one of eleven figures of twelve scans may well fall out (2 in 100 each, by the binomial).
    assert _figure(fair, "volume")["widen_by"] == 1.0
    # The scanner is ten times as noisy as the pipeline file declares: the same draws, ten times as large.
    folder = _changed(copied(of_mesh), lambda document: document["noise"].update(std_m=0.001))
    narrow = rehearse(folder, scans=12, again=True)
    for name in ("volume", "centre x", "centre y", "centre z", "moment 1", "moment 2", "moment 3"):
        row = _figure(narrow, name)
        assert row["share_high"] < 0.95
        # Nothing but the noise errs, so errors are tenfold; noise of 1 % of the size adds a second order to it,
        # (3 sigma)^2 / size^2 or some per cent where the errors are 1 % of a figure.
        assert row["widen_by"] == row["factor"] == pytest.approx(10.0 * _figure(fair, name)["factor"], rel=0.1)
    assert narrow["widen_by"] == max(row["widen_by"] for row in narrow["figures"])
    assert "held too seldom for volume, centre x" in narrow["verdict"]
    assert "widen them" in narrow["verdict"]


def test_only_noise_errs_in_a_mesh_and_its_bounds_tell_it(of_mesh: Path) -> None:
    outcome = rehearse(of_mesh, scans=12)
    # The field, and nothing else, is in the bounds: spreads of the errors are the stated standard deviations, to what
    # 12 draws tell (root of chi-square with 11 degrees of freedom over 11: 0.52 to 1.51 at 1 % either side).
    for name in ("volume", "centre x", "centre y", "centre z", "moment 1", "moment 2", "moment 3"):
        assert 0.52 < _figure(outcome, name)["spread"] < 1.51
        assert abs(_figure(outcome, name)["bias"]) < 2.6 / np.sqrt(12) * 1.5
    assert "mesh-moved" in [note["code"] for note in outcome["assumptions"]]


def test_one_cloud_with_a_scale(tmp_path: Path) -> None:
    file = pebble.write_ply(tmp_path / "cloud.ply", 1000.0 * pebble.cloud(2000, 1e-5))
    settings = pebble.settings(noise_std="0.1 mm", noise_length="30 mm", scale="1.01 ± 0.01")
    write(scanmass.measure(file, settings), tmp_path / "result", cells=False)
    outcome = rehearse(tmp_path / "result", scans=4)
    assert outcome["measured"] == 4
    # Three times the scale's 0.5 % in volume: nearly all of its doubt. Root of chi-square with 3 degrees of freedom
    # over 3 lies between 0.15 and 2 but for 1 % either side. The centre does not move with the scale.
    volume, x = _figure(outcome, "volume"), _figure(outcome, "centre x")
    assert 0.15 < volume["spread"] < 2.0
    assert x["held"] == 4


def test_a_scan_that_cannot_be_measured_is_counted_with_its_reason(
    of_views: Path, copied: Copied, monkeypatch: pytest.MonkeyPatch
) -> None:
    own = run.measure

    def second_fails(*given: Any, seed: int, **options: Any) -> Any:
        if seed >= 1:
            raise Declined("it cannot be closed")
        return own(*given, seed=seed, **options)

    monkeypatch.setattr(run, "measure", second_fails)
    folder = copied(of_views)
    outcome = rehearse(folder, scans=2)
    assert outcome["failed"] == [{"scan": 1, "reason": "it cannot be closed"}]
    assert outcome["measured"] == 1
    assert outcome["verdict"].endswith("1 of 2 simulated scans could not be measured at all.")


def test_none_that_can_be_measured(of_views: Path, copied: Copied, monkeypatch: pytest.MonkeyPatch) -> None:
    def fails(*given: Any, **options: Any) -> Any:
        raise Declined("it cannot be closed")

    monkeypatch.setattr(run, "measure", fails)
    with pytest.raises(Declined, match="none of 2 simulated scans could be measured; the first: it cannot be closed"):
        rehearse(copied(of_views), scans=2)


def test_another_seed_or_result_is_not_mixed_in(
    of_views: Path, copied: Copied, monkeypatch: pytest.MonkeyPatch
) -> None:
    def never(*given: Any, **options: Any) -> Any:
        raise Declined("not measured")

    monkeypatch.setattr(run, "measure", never)
    folder = copied(of_views)
    with pytest.raises(Declined):
        rehearse(folder, scans=1, seed=7)
    with pytest.raises(UserFault, match="holds 1 simulated scans of another seed; give --seed 7 to go on"):
        rehearse(folder, scans=1, seed=8)
    _changed(folder, lambda document: document.update(level=0.9))
    with pytest.raises(UserFault, match=r"rehearsal\.jsonl: it holds 1 .* of another result or version .* --again"):
        rehearse(folder, scans=1, seed=7)
    (folder / "rehearsal.jsonl").write_text("{}\nnothing\n")
    with pytest.raises(UserFault, match="this is no ledger of a rehearsal"):
        rehearse(folder, scans=1, seed=7)
    with pytest.raises(Declined):
        rehearse(folder, scans=1, seed=8, again=True)


def test_what_is_no_result_or_claims_nothing(of_views: Path, copied: Copied, tmp_path: Path) -> None:
    with pytest.raises(UserFault, match="there is no such folder; name the folder that 'scanmass measure' wrote"):
        rehearse(tmp_path / "nowhere")
    (tmp_path / "holiday").mkdir()
    with pytest.raises(UserFault, match=r"no result of scanmass: result\.json is not there"):
        rehearse(tmp_path / "holiday")
    folder = copied(of_views)
    with pytest.raises(UserFault, match="0 simulated scans; at least 1"):
        rehearse(folder, scans=0)
    _changed(folder, lambda document: document["volume_m3"].update(value=0.004))
    with pytest.raises(UserFault, match=r"surface\.ply: it encloses .* where result.json says 4 L"):
        rehearse(folder)
    _changed(folder, lambda document: document["noise"].update(basis="none"))
    with pytest.raises(Declined, match=r"states no bounds, because its noise is not known.*declare scan\.noise_std"):
        rehearse(folder)
    np.savez(folder / "state.npz", state_version=1)
    _changed(folder, lambda document: document["noise"].update(basis="views"))
    with pytest.raises(UserFault, match=r"state\.npz: the state is of version 1, and this scanmass reads 2"):
        rehearse(folder)
    assert not (folder / "rehearsal.jsonl").exists()


def test_an_exact_mesh_has_nothing_to_rehearse(tmp_path: Path) -> None:
    vertices, faces = pebble.mesh(1000)
    file = pebble.write_off(tmp_path / "mesh.off", 1000.0 * vertices, faces)
    write(scanmass.measure(file, pebble.settings(noise_std="0 mm")), tmp_path / "exact", cells=False)
    with pytest.raises(Declined, match=r"declared exact \(noise_std: 0\), so every simulated scan would be the same"):
        rehearse(tmp_path / "exact")
