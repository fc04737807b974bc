"""The coverage study: its own arithmetic against known values, its generators, and a short run of the whole."""

from __future__ import annotations

import copy
import json
from pathlib import Path

import numpy as np
import pytest
from scipy.stats import t as student

from scanmass.geometry.polyhedron import face_areas
from scanmass.geometry.tensors import central_inertia, principal
from scanmass.studies.ray_casting import Scene
from tests.benchmarks import coverage
from tests.benchmarks.coverage_bodies import BODIES, body, near_symmetric
from tests.benchmarks.coverage_cells import CELLS, FIRST, Cell, named
from tests.benchmarks.coverage_generators import Planted, merged_into_one, simulate
from tests.benchmarks.coverage_scan import Line, run, seed_of, truth
from tests.benchmarks.coverage_tables import tables
from tests.benchmarks.coverage_tally import (
    AT_68,
    AT_95,
    FAMILY,
    UNDETERMINED,
    Count,
    Range,
    count,
    degrees_behind,
    held,
    held_68,
    holm,
)
from tests.benchmarks.coverage_verdict import shortfalls, widths


def test_binomial_tests_against_products_and_sums_by_hand() -> None:
    # None of three at 93 %: 0.07^3. All of 200 at 98 %: 0.98^200. Two or fewer of four at a half: 11/16.
    assert Count(0, 3).p_value(AT_95) == pytest.approx(0.07**3, rel=1e-12)
    assert Count(200, 200).p_value(AT_95) == pytest.approx(0.98**200, rel=1e-12)
    assert Count(2, 4).p_value(Range(0.51, None)) == pytest.approx(
        sum(w * 0.51**k * 0.49 ** (4 - k) for k, w in enumerate((1, 4, 6))), rel=1e-12
    )
    # Inside the range nothing speaks against it, and more than enough is no fault where no upper end is asked.
    assert Count(190, 200).p_value(AT_95) == 1.0
    assert Count(200, 200).p_value(Range(0.95, None)) == 1.0
    assert Count(0, 0).p_value(AT_95) == 1.0


def test_holm_against_a_worked_example() -> None:
    # Ordered 0.005, 0.01, 0.03, 0.04 times 4, 3, 2, 1: 0.02, 0.03, 0.06, and 0.04 lifted to 0.06.
    assert holm([0.01, 0.04, 0.03, 0.005]) == pytest.approx([0.03, 0.06, 0.06, 0.02])
    assert holm([0.9, 0.8]) == [1.0, 1.0]
    assert holm([]) == []


@pytest.mark.parametrize("nu", [2.0, 5.0, 17.5, 60.0])
def test_degrees_of_freedom_behind_a_factor(nu: float) -> None:
    assert degrees_behind(float(student.ppf(0.975, nu))) == pytest.approx(nu, rel=1e-6)
    assert degrees_behind(1.9) == np.inf


def _line() -> dict[str, object]:
    """A scan whose bounds all hold by a tenth of a standard deviation, one of them five degrees of freedom."""
    half = float(student.ppf(0.975, 5))
    moment = {"value": 1.1, "std": 1.0, "low": 1.1 - half, "high": 1.1 + half}
    axes = np.eye(3).tolist()
    covariance = np.diag([1.0, 4.0, 9.0]).tolist()
    region = {"center_m": [0.1, 0.0, 0.0], "radii_m": [3.0, 2.0, 1.0], "axes": np.eye(3)[::-1].tolist(), "level": 0.95}
    com = {"value": [0.1, 0.0, 0.0], "std": [1.0, 2.0, 3.0], "low": [-1.9, -4.0, -6.0], "high": [2.1, 4.0, 6.0]}
    one = {"value": 10.1, "std": 1.0, "low": 8.0, "high": 12.0, "degrees_of_freedom": 5.0, "bracket": None}
    com |= {"degrees_of_freedom": [5.0] * 3, "bracket": None, "covariance": covariance, "region": region}
    axis = {"moment_kg_m2": moment, "determined": True, "cone_deg": 3.0}
    return {
        "cell": "white-pebble-4",
        "scan": 0,
        "level": 0.95,
        "truth": {"volume": 10.0, "com": [0.0, 0.0, 0.0], "principal": [1.0] * 3, "axes": axes},
        "volume": one,
        "com": com,
        "principal": [{**axis, "axis": row} for row in axes],
    }


def test_what_held_is_told_from_what_did_not() -> None:
    line = _line()
    assert all(held(line)[name] == [True] for name in ("volume", "x", "y", "z", "region", "moment 1", "axis 3"))
    assert all(held_68(line)[name] == [True] for name in ("volume", "x", "y", "z", "region", "moment 3"))
    # Student's 68 % factor at five degrees of freedom is 1.10 (tables: 1.10), so 1.2 standard deviations miss.
    off = copy.deepcopy(line)
    off["truth"] |= {"volume": 8.9, "com": [2.2, 0.0, 0.0]}  # type: ignore[operator]
    assert held_68(off)["volume"] == held_68(off)["x"] == [False]
    assert held(off)["volume"] == [True]
    assert held(off)["x"] == held(off)["region"] == [False]
    # Beyond the smallest radius along x, though within the largest.
    beyond = copy.deepcopy(line)
    beyond["truth"]["com"] = [1.2, 0.0, 0.0]  # type: ignore[index]
    assert held(beyond)["region"] == [False]
    assert held(beyond)["x"] == [True]


def test_axes_hold_by_their_cone_or_by_being_undetermined() -> None:
    line = _line()
    c, s = np.cos(np.radians(4.0)), np.sin(np.radians(4.0))
    # Turned by 4 degrees about z, and turned round: sign does not count, a cone of 3 degrees does.
    line["truth"]["axes"] = [[-c, -s, 0.0], [-s, c, 0.0], [0.0, 0.0, 1.0]]  # type: ignore[index]
    found = held(line)
    assert [found[f"axis {k}"] for k in (1, 2, 3)] == [[False], [False], [True]]
    for axis in line["principal"][:2]:  # type: ignore[index]
        axis |= {"determined": False, "cone_deg": None}
    found = held(line)
    assert [found[f"axis {k}"] for k in (1, 2, 3)] == [[True]] * 3
    assert found[UNDETERMINED] == [True, True]
    assert "moment 1" not in found
    assert count([line, line])[UNDETERMINED] == Count(4, 4)


def _scans(name: str, errors: list[float], **changes: object) -> tuple[Cell, list[Line]]:
    """Scans of a cell whose volumes and centres are off by ``errors``, in stated standard deviations."""
    lines = []
    for error in errors:
        line: Line = {**_line(), "cell": name, "budget": [], "noise": {}, "points": [1], "observed": 1.0} | changes
        shifted = {key: 10.0 + error + off for key, off in (("value", 0.0), ("low", -2.1), ("high", 2.1))}
        line["volume"] = {**line["volume"], **shifted}
        lines.append(line)
    return next(c for c in CELLS if c.name == name), lines


def test_widths_against_errors_known_by_hand() -> None:
    # Errors -1, 0, 1, 2: mean 0.5, variance (2.25 + 0.25 + 0.25 + 2.25) / 3 = 5/3, of a volume of 10; half-width 2.1.
    found = widths(*_scans("white-pebble-4", [-1.0, 0.0, 1.0, 2.0]))
    assert found is not None
    assert (found.bias, found.spread) == pytest.approx((0.05, np.sqrt(5 / 3) / 10))
    assert found.ratios[0] == pytest.approx(2.1 / (1.96 * np.sqrt(5 / 3)))
    # 1.1 t(5) / 1.96 with t = 2.571 of any table.
    assert found.target == pytest.approx(1.1 * 2.571 / 1.96, rel=1e-3)
    eight = widths(*_scans("short-bracket-8", [0.0, 1.0, 2.0]))
    assert eight is not None
    assert eight.target == 1.3
    assert widths(*_scans("white-pebble-4", [0.0, 1.0])) is None


def test_what_falls_short_is_named() -> None:
    spread = list(np.linspace(-1.9, 1.9, 40))
    good = [line for line in shortfalls([_scans("white-pebble-4", spread)]) if line[1].endswith(("volume", "bias"))]
    assert good == []
    # 12 of 40 outside: far beyond chance at 93 %.
    bad = shortfalls([_scans("white-pebble-4", [*spread[:28], *[3.0] * 12])])
    assert ["white-pebble-4", "95 % of volume"] in [row[:2] for row in bad]
    # Forty even steps from 0.4 to 0.6: spread 0.2/39 sqrt((40^2 - 1)/12 40/39) = 0.0600, over sqrt 40: 0.0095 of 10.
    leaning = shortfalls([_scans("white-pebble-4", list(np.linspace(0.4, 0.6, 40)))])
    assert ["white-pebble-4", "bias", "+5.000 ± 0.095 %", "within 0.1 %"] in leaning
    # A bracket misses once, and the pose bracket is absent where it must appear, present where it should not.
    assert ["unseen-drum", "bounds with bracket of volume", "4/5", "all"] in shortfalls(
        [_scans("unseen-drum", [0.0, 0.1, 0.2, 0.3, 3.0])]
    )
    shown = {"budget": [["pose or incidence error common to all views", "bracket", None, 1.0]]}
    assert ["axial-pebble-6", "pose bracket", "0/5", "all"] in shortfalls([_scans("axial-pebble-6", [0.0] * 5)])
    assert shortfalls([_scans("axial-pebble-6", [0.0] * 5, **shown)]) == []
    often = shortfalls([_scans("white-pebble-4", spread, **shown)])
    assert ["white-pebble-4", "pose bracket", "40/40", "at most 5 %"] in often


def test_declined_scans_and_absent_bounds_count_nowhere() -> None:
    line = _line()
    line["volume"] = {**line["volume"], "low": None, "high": None, "std": None}  # type: ignore[dict-item]
    assert "volume" not in held(line)
    assert held_68(line) == {}
    assert count([{"cell": "x", "declined": "words"}]) == {}


def test_bodies_are_closed_and_as_large_as_the_issue_asks() -> None:
    for name in BODIES:
        made = body(name)  # a Body refuses an open mesh
        assert 0.2 <= np.ptp(made.vertices, axis=0).max() <= 1.5
        assert made.moments()[0] > 0
    shares = []
    for name in ("column", "mound", "drum", "torso"):
        made = body(name)
        area, normal = face_areas(made.vertices, made.faces)
        height = made.vertices[made.faces].mean(axis=1)[:, 2]
        shares.append(area[(normal[:, 2] < -0.7) & (height < 0.02)].sum() / area.sum())
    assert 0.05 <= min(shares) <= max(shares) <= 0.205


@pytest.mark.parametrize("gap", [0.0, 0.01, 0.05])
def test_near_symmetric_bodies_have_the_gap_asked(gap: float) -> None:
    moments, _ = principal(central_inertia(near_symmetric(gap).moments()))
    # Exact but for rounding of sums over 25 000 faces.
    assert moments[1] / moments[0] - 1.0 == pytest.approx(gap, abs=1e-9)
    assert moments[2] / moments[0] == pytest.approx(1.3, abs=1e-9)


def test_scans_without_errors_lie_on_the_body_and_carry_its_truth() -> None:
    scan = simulate(body("gourd"), Planted(white=0.0), views=4, stations=1, points=800, seed=3)
    # Turned and moved, it is the same body.
    there, here = truth(scan.body.moments()), truth(body("gourd").moments())
    assert there["volume"] == pytest.approx(here["volume"], rel=1e-12)
    assert there["principal"] == pytest.approx(here["principal"], rel=1e-9)
    points = np.concatenate([view.points for view in scan.views])
    places, _ = Scene([scan.body]).nearest(points)
    # The tree's single precision finds the triangle, places are in double: 1e-7 of some metres.
    assert np.linalg.norm(places - points, axis=1).max() < 1e-6
    assert 0.8 < len(points) / 3200 < 1.2
    assert len(merged_into_one(scan).views) == 1


@pytest.mark.parametrize(
    ("planted", "spread"),
    [
        (Planted(white=0.001), 0.001),
        (Planted(white=0.0, field=0.001, length=0.03), 0.001),
        (Planted(white=0.0, stripes=0.001), 0.001),
        (Planted(white=0.0, warp=0.001), 0.001),
    ],
)
def test_planted_errors_have_their_size(planted: Planted, spread: float) -> None:
    wanted = {"views": 6, "stations": 1, "points": 3000, "seed": 8}
    clean, dirty = (simulate(body("pebble"), p, **wanted) for p in (Planted(white=0.0), planted))  # type: ignore[arg-type]
    off = np.concatenate([b.points - a.points for a, b in zip(clean.views, dirty.views, strict=True)])
    # Six draws of a field of some tens of lengths each, or of one warp each: within a third.
    assert np.sqrt((off**2).sum(axis=1).mean()) / clean.size == pytest.approx(spread, rel=0.33)


def test_unseen_bodies_are_not_seen_from_below_nor_is_their_floor() -> None:
    scan = simulate(body("drum"), Planted(white=0.0), views=4, stations=1, points=2000, seed=1, standing=True)
    points = np.concatenate([view.points for view in scan.views])
    _, normals = Scene([scan.body]).nearest(points)
    assert normals[:, 2].min() > -0.9
    assert scan.body.vertices[:, 2].min() - 1e-6 <= points[:, 2].min()


def test_ledger_goes_on_where_it_stopped(tmp_path: Path) -> None:
    cells = named("white-pebble-4,axes")
    path = tmp_path / "ledger.jsonl"
    assert coverage.ledger(path) == []
    assert len(coverage.missing([], cells, 3)) == 18
    done = {"cell": "white-pebble-4", "scan": 1}
    path.write_text(json.dumps(done) + "\n" + '{"cell": "axes-gap0')
    assert coverage.ledger(path) == [done]
    left = coverage.missing(coverage.ledger(path), cells, 2)
    assert [(c.name, k) for c, k in left if c.name == "white-pebble-4"] == [("white-pebble-4", 0)]
    assert seed_of(cells[0], 0) != seed_of(cells[0], 1) != seed_of(cells[1], 1)


def test_the_study_prints_its_tables_and_what_was_not_run(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], short_run: list[Line]
) -> None:
    path = tmp_path / "ledger.jsonl"
    path.write_text("".join(json.dumps(line) + "\n" for line in short_run[:6]))
    coverage.main(["--out", str(path), "--scans", "0", "--cells", "middle-pebble-6,own-pebble-6"])
    said = capsys.readouterr().out
    assert "middle-pebble-6      6         0" in said
    assert said.endswith("own-pebble-6: no scan in the ledger\n")


def test_cells_are_a_design_of_the_size_asked() -> None:
    assert len({c.name for c in CELLS}) == len(CELLS)
    noise = [c for c in CELLS if c.group == "noise"]
    assert {c.views for c in noise} == {3, 4, 5, 6, 8, 10}
    assert len({c.body for c in noise}) >= 6
    assert len({c.noise for c in noise}) >= 10
    assert len(named("first")) == len(FIRST.split(","))
    with pytest.raises(ValueError, match="no cell, group or noise model is called nonsense"):
        named("nonsense")


SHORT = {"middle-pebble-6": 14, "pose-gourd-6": 10}
"""Scans of the short run, with 1500 points a view: some 1.3 s each."""

FEW = ("volume", "region", "moment 2")


@pytest.fixture(scope="module")
def short_run() -> list[Line]:
    cells = [cell for cell in CELLS if cell.name in SHORT]
    return [run(cell, number, 1500) for cell in cells for number in range(SHORT[cell.name])]


def _outside(lines: list[Line]) -> dict[str, float]:
    """Holm's p-values at most the family's level, by quantity and level. Six tests: each more would cost power."""
    found = {(name, 95): count(lines)[name].p_value(AT_95) for name in FEW}
    found |= {(name, 68): count(lines, held_68)[name].p_value(AT_68) for name in FEW}
    return {f"{n} {level}": p for (n, level), p in zip(found, holm(list(found.values())), strict=True) if p <= FAMILY}


def test_short_run_keeps_within_its_binomial_range(short_run: list[Line]) -> None:
    # 24 scans fail with 17 held or fewer at 95 % (chance 4e-4 if it were 93 %) or with all within the 68 % bounds
    # (1.4e-3 if it were 76 %), a sixth of one per cent being 1.7e-3: bounds half as wide as they should be, or twice,
    # are found, no finer fault. The full study tells those.
    assert _outside(short_run) == {}
    assert count(short_run)["volume"].of == sum(SHORT.values())


@pytest.mark.parametrize("factor", [0.3, 5.0])
def test_short_run_fails_with_bounds_too_narrow_or_too_wide(short_run: list[Line], factor: float) -> None:
    changed = copy.deepcopy(short_run)
    for line in changed:
        figure = line["volume"]
        figure["std"] *= factor
        for end in ("low", "high"):
            figure[end] = figure["value"] + factor * (figure[end] - figure["value"])
    assert any(name.startswith("volume") for name in _outside(changed))


def test_tables_print_every_cell(short_run: list[Line]) -> None:
    text = tables(short_run)
    for name in SHORT:
        assert text.count(name) >= 5
    assert "Pooled per noise model" in text
    assert tables([]) == "no scan in the ledger yet"
