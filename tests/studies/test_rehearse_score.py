"""Scores and their summary: exact intervals by another library, and made-up scans whose outcome is plain."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy.stats import binomtest

from scanmass.studies.rehearse_plan import Truth
from scanmass.studies.rehearse_score import binomial_interval, score, summarise, verdict

TRUTH = Truth(2.0, np.array([0.1, 0.2, 0.3]), np.array([1.0, 2.0, 3.0]), np.eye(3))


def _document(off: float, half: float, cone: float = 1.0, turn: float = 0.0) -> dict[str, Any]:
    """A result whose every figure is off by ``off``, with a half-width of ``half``; axes turned by ``turn`` degrees."""

    def block(value: Any) -> dict[str, Any]:
        low, high = (np.add(value, off + sign * half).tolist() for sign in (-1, 1))
        std = np.full(np.shape(value), half / 2).tolist()
        return {"value": np.add(value, off).tolist(), "std": std, "low": low, "high": high}

    angle = np.radians(turn)
    axes = np.array([[np.cos(angle), np.sin(angle), 0], [-np.sin(angle), np.cos(angle), 0], [0, 0, 1.0]])
    volume, center = block(2.0), block([0.1, 0.2, 0.3])
    for figure in (volume, center):
        figure["random"] = {"low": figure["low"], "high": figure["high"]}
    center["region"] = {"center_m": center["value"], "radii_m": [half, 2 * half, 4 * half], "axes": np.eye(3).tolist()}
    principal = [
        {"moment_kg_m2": block(float(k + 1)), "axis": axes[k].tolist(), "cone_deg": cone, "determined": k < 2}
        for k in range(3)
    ]
    return {"volume_m3": volume, "center_of_mass_m": center, "principal": principal}


@pytest.mark.parametrize(("held", "of"), [(0, 1), (1, 1), (0, 40), (19, 20), (36, 40), (40, 40), (150, 200)])
@pytest.mark.parametrize("level", [0.68, 0.95])
def test_the_binomial_interval_is_scipys(held: int, of: int, level: float) -> None:
    exact = binomtest(held, of).proportion_ci(level, method="exact")
    # Both invert the same tails, one by beta quantiles, the other by root finding.
    np.testing.assert_allclose(binomial_interval(held, of, level), (exact.low, exact.high), atol=1e-9)


def test_errors_are_told_in_half_widths() -> None:
    # 20 scans, off by 0.1, 0.2, ... 2.0 half-widths: 10 held (2.0 x 0.5 at the 10th), the 19th of 20 is at 1.9.
    scores = [score(_document(off=0.01 * k, half=0.1), TRUTH) for k in range(1, 21)]
    rows = {row["figure"]: row for row in summarise(scores, 0.95)}
    for name in ("volume", "centre x", "centre z", "moment 2"):
        row = rows[name]
        assert (row["held"], row["of"]) == (10, 20)
        assert row["factor"] == row["widen_by"] == pytest.approx(1.9)
        assert row["bias"] == pytest.approx(0.105 / 0.05)
        assert row["spread"] == pytest.approx(np.std(np.arange(1, 21), ddof=1) * 0.01 / 0.05)
    # Off by e along all three axes of radii 1, 2 and 4 half-widths: e sqrt(1 + 1/4 + 1/16).
    region = rows["centre region"]
    assert region["factor"] == pytest.approx(1.9 * np.sqrt(21 / 16))
    assert region["held"] == sum(0.1 * k * np.sqrt(21 / 16) <= 1 for k in range(1, 21))
    text = verdict(list(rows.values()), 0.95, 0, 20)
    # 1.9 x 1.146 = 2.18, rounded up.
    assert text.startswith("Bounds stated as 95 % held too seldom for volume, centre x")
    assert "widen them 2.2 times" in text


def test_one_miss_in_twenty_asks_for_nothing() -> None:
    scores = [score(_document(off=0.3 if k == 0 else 0.0, half=0.1), TRUTH) for k in range(20)]
    rows = summarise(scores, 0.95)
    assert {row["widen_by"] for row in rows} == {1.0}
    assert verdict(rows, 0.95, 2, 22) == (
        "Nothing asks for wider bounds: stated as 95 %, they held in 19 of 20 simulated scans or more for every "
        "figure. So many scans would not have shown it, had they held in only 75 %. 2 of 22 simulated scans could not "
        "be measured at all."
    )


def test_axes_are_held_by_their_cones_or_not_claimed() -> None:
    scores = [score(_document(0.0, 0.1, cone=1.0, turn=turn), TRUTH) for turn in (0.5, -0.9, 179.5, 3.0)]
    rows = {row["figure"]: row for row in summarise(scores, 0.95)}
    # An axis has no sense: 179.5 degrees are 0.5. The third is not claimed in any.
    assert (rows["axis 1"]["held"], rows["axis 1"]["of"], rows["axis 1"]["determined"]) == (3, 4, 4)
    assert rows["axis 1"]["factor"] == pytest.approx(3.0)
    assert (rows["axis 3"]["held"], rows["axis 3"]["determined"]) == (4, 0)


def test_a_bracket_is_told_apart_from_the_random_part() -> None:
    document = _document(off=0.3, half=0.1)
    document["volume_m3"] |= {"low": 1.5, "high": 2.6}
    (row, *_) = summarise([score(document, TRUTH)], 0.95)
    assert (row["figure"], row["held"], row["random_held"]) == ("volume", 1, 0)
    # 0.3 too much, and the lower end is 0.8 below the value.
    assert row["factor"] == pytest.approx(0.3 / 0.8)


def test_scans_without_bounds_do_not_count() -> None:
    document = _document(0.0, 0.1)
    for block in (
        document["volume_m3"],
        document["center_of_mass_m"],
        *(p["moment_kg_m2"] for p in document["principal"]),
    ):
        block |= {"std": None, "low": None, "high": None}
        if "random" in block:
            block["random"] = {"low": None, "high": None}
    document["center_of_mass_m"]["region"] = None
    for row in document["principal"]:
        row |= {"cone_deg": None, "determined": False}
    rows = summarise([score(document, TRUTH)], 0.95)
    assert [(row["of"], row["widen_by"]) for row in rows[:8]] == [(0, None)] * 8


def test_a_region_beside_a_bracket_is_named_for_what_it_is() -> None:
    document = _document(off=0.3, half=0.1)
    document["volume_m3"] |= {"low": 1.5, "high": 2.6}
    rows = summarise([score(document, TRUTH)] * 8, 0.95)
    assert "centre region (which leaves out what the unseen part could be)" in verdict(rows, 0.95, 0, 8)
