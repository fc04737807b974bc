"""Budgets worked by hand: a body of 100 kg, half-widths two standard deviations wide."""

from math import sqrt

import numpy as np
import pytest

from scanmass.uncertainty.advice import more_scans, next_measurement
from scanmass.uncertainty.budget import BudgetRow
from scanmass.uncertainty.measurements import COMMON_ERROR, LENGTH, WEIGHING, Standing, factors_left, measurements

MASS = 100.0


def _row(source, mass=0.0, com=0.0, kind="random"):
    """A row with a standard deviation or a half range of the mass, kg, and of the centre along z, metres."""
    along = np.array([0.0, 0.0, com])
    if kind == "bracket":
        return BudgetRow(source, kind, mass_half_range=mass, com_half_range=along)
    return BudgetRow(source, kind, mass_std=mass, com_std=along)


def _now(*rows, basis="views", views=6, underside="seen", mass_reach=2.0):
    return Standing(rows, basis, views, MASS, mass_reach, 2.0, underside)


def test_a_doubtful_density_asks_for_a_scale():
    # Half-width 2 hypot(3, 4) = 10 kg; the scale's own is 0.5 kg: 0.5 x 10 / hypot(0.5, 10) = 0.4994.
    found = next_measurement(_now(_row("density", 4.0, kind="declared"), _row("reconstruction", 3.0, 1e-3)))
    assert found.source == "density"
    assert found.mass_factor == pytest.approx(0.5 / np.hypot(0.5, 10.0))
    assert found.com_factor == pytest.approx(1.0)
    assert found.text == (
        "Weigh it on a scale good to 0.5 %: that would shrink the bound of the mass to about 5 % of its present width."
    )


def test_the_underside_when_its_bracket_leads():
    rows = (_row("unseen surface", 3.0, 9e-3, "bracket"), _row("scan noise", 0.5, 5e-4))
    found = next_measurement(_now(*rows, underside="unknown"))
    # Of the centre 9 + 2 x 0.5 = 10 mm stays 1; of the mass 3 + 1 = 4 kg stays 1. A scale leaves 0.5 x 4 / hypot.
    assert found.source == "unseen surface"
    assert found.com_factor == pytest.approx(0.1)
    assert found.mass_factor == pytest.approx(0.25)
    weighed = 0.5 / np.hypot(0.5, 4.0)
    assert found.text == (
        "Scan the underside and whatever else was not seen, or declare surface.underside: that would shrink the bound "
        "of the mass to about 25 % and the bound of the centre of mass to about 10 % of its present width; for the "
        f"mass, weigh it on a scale good to 0.5 % (to about {100 * weighed:.0f} %)."
    )
    elsewhere = next_measurement(_now(*rows, underside="flat"))
    assert elsewhere.text.startswith("Scan the places that were not seen: ")


def test_twice_as_many_views_against_noise():
    # A mass known better than a scale would tell: only the noise is left to cut, by the root of two.
    rows = (_row("scan noise", 0.06, 3e-4), _row("view shifts", 0.08, 4e-4))
    found = next_measurement(_now(*rows))
    assert found.text.startswith("Scan it from twice as many views (12): ")
    assert (found.mass_factor, found.com_factor) == pytest.approx((sqrt(0.5), sqrt(0.5)))
    assert found.source == "view shifts"


def test_a_known_length_against_scale():
    # 0.3 kg of 100 kg is 0.1 % of the length: of it stays 0.02 % / (1.96 x 0.1 %).
    rows = (_row("scale", 0.3, kind="declared"), _row("scan noise", 0.04, 1e-4))
    found = next_measurement(Standing(rows, "declared", 1, MASS, 2.0, None))
    left = LENGTH / (1.96 * 0.001)
    want = np.hypot(0.3 * left, 0.04) / np.hypot(0.3, 0.04)
    assert found.text.startswith("Measure one long distance on the object to 0.02 % and compare it with the scan's: ")
    assert found.source == "scale"
    assert found.mass_factor == pytest.approx(want)
    assert found.com_factor is None


def test_a_common_error_asks_for_a_length_or_a_scale():
    # The bracket of 3 kg and 2 mm; a length leaves LENGTH / (3 / 300) = 0.02 of both.
    rows = (_row(COMMON_ERROR, 3.0, 2e-3, "bracket"), _row("scan noise", 0.01, 1e-5))
    found = next_measurement(_now(*rows))
    assert found.source == COMMON_ERROR
    assert found.text.startswith("Measure one long distance")
    assert found.com_factor == pytest.approx((0.02 * 2e-3 + 2e-5) / (2e-3 + 2e-5))
    # Here a scale does less: it tells the mass to 0.5 kg, so of 3 kg in common stays a sixth.
    assert "for the mass, weigh" not in found.text
    # A random row of it is a budget row like any other.
    row = next_measurement(_now(_row(COMMON_ERROR, 1.0, 1e-3), _row("scan noise", 0.01, 1e-5)))
    assert row.source == COMMON_ERROR


def test_a_scale_settles_a_common_error_only_where_the_density_is_known():
    settled = _now(_row(COMMON_ERROR, 3.0, 2e-3, "bracket"), _row("density", 0.0, kind="declared"), basis="declared")

    def weighed(now):
        return next(factors_left(now, m) for m in measurements(now) if m.mass is not None)

    assert weighed(settled)[1] == pytest.approx(WEIGHING * MASS / 3.0)
    unsettled = _now(_row(COMMON_ERROR, 3.0, 2e-3, "bracket"), _row("density", 5.0, kind="declared"))
    assert weighed(unsettled)[1] == pytest.approx(1.0)


def test_finer_points_for_edges():
    rows = (_row("edges finer than the points", 0.05, 4e-4), _row("reconstruction", 0.03, 0.0))
    found = next_measurement(_now(*rows))
    # A quarter of the edges' part: hypot(0.0125, 0.03) / hypot(0.05, 0.03); of the centre 0.25.
    assert found.text.startswith("Scan with points half as far apart: ")
    assert found.mass_factor == pytest.approx(np.hypot(0.0125, 0.03) / np.hypot(0.05, 0.03))
    assert found.com_factor == pytest.approx(0.25)


@pytest.mark.parametrize(("views", "scans", "left"), [(1, "Two more scans", 1 / 3), (2, "One more scan", 2 / 3)])
def test_what_more_scans_buy_where_the_noise_is_declared(views, scans, left):
    now = _now(_row("scan noise", 3.0, 1e-3), _row("density", 4.0, kind="declared"), basis="declared", views=views)
    found = more_scans(now)
    assert found.mass_factor == pytest.approx(sqrt(9 * left + 16) / 5)
    assert found.com_factor == pytest.approx(sqrt(left))
    assert found.text.startswith(f"{scans} would measure the noise rather than take it as declared, and would shrink")
    assert f"the bound of the centre of mass to about {100 * sqrt(left):.0f} % of its present width." in found.text


def test_little_is_called_little():
    now = _now(_row("scan noise", 0.1, 1e-3), _row("density", 4.0, kind="declared"), basis="declared", views=1)
    assert "would hardly change the bound of the mass and shrink the bound of the centre" in more_scans(now).text


def test_an_upper_bound_shrinks_at_best():
    now = _now(_row("scan noise (upper bound)", 3.0, 4e-3), _row("scale", 4.0, 3e-3), basis="upper_bound", views=1)
    assert "would at best shrink the bound of the mass to about 80 %" in more_scans(now).text
    alone = next_measurement(Standing(now.rows[:1], "upper_bound", 1, MASS, None, 2.0))
    assert "declare the scanner's noise (scan.noise_std or scan.certificate), or measure it: scan twice" in alone.text
    assert alone.com_factor == pytest.approx(0.0)


def test_nothing_to_go_by():
    now = _now(basis="none", views=1)
    found = next_measurement(now)
    assert found.text.startswith("Scan the object until 3 views overlap, or declare scan.noise_std")
    assert (found.mass_factor, found.com_factor) == (None, None)
    assert more_scans(now).text == (
        "Two more scans would show the scan's own noise, and so give bounds; now none can be given."
    )


def test_a_density_without_doubt_stated_leaves_the_mass_unbounded():
    row = BudgetRow("view shifts", "random", None, np.array([0.0, 0.0, 1e-3]))
    found = next_measurement(_now(row, mass_reach=None))
    assert found.text.startswith("Give the density with its doubt (as value ± doubt), or weigh the object: without one")
    assert "then scan it from twice as many views (12)" in found.text
    assert found.mass_factor is None


def test_nothing_is_advised_where_nothing_helps():
    assert next_measurement(_now(_row("reconstruction", 0.1, 1e-4))) is None
    assert next_measurement(_now()) is None
    assert more_scans(_now(_row("scan noise", 1.0))) is None
    # A drawing has no noise to measure.
    assert more_scans(_now(_row("density", 1.0, kind="declared"), basis="declared", views=0)) is None
