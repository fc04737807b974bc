"""What could be measured next, and what each measurement leaves of the doubt, worked out from the budget."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from scanmass.uncertainty.bounds import Bounds
from scanmass.uncertainty.bracket import Bound
from scanmass.uncertainty.budget import BudgetRow
from scanmass.uncertainty.noise import LEAST_VIEWS, Basis
from scanmass.uncertainty.pose_check import SOURCE as COMMON_ERROR

WEIGHING = 0.005
"""Half-width at 95 % of a weighing over the mass: a hoist cell or a pallet-jack scale does so well (common
practice, no source)."""
LENGTH = 0.0002
"""Half-width at 95 % of a known length over itself: 0.1 mm in 500 mm, a long calliper or a scale bar
(common practice, no source)."""


@dataclass(frozen=True)
class Standing:
    """What the advice is drawn from: the budget, and how its standard deviations become half-widths.

    ``mass`` in kg; ``mass_reach``, ``com_reach``: half-width of the random and declared part over its standard
    deviation, for the centre of mass over all three axes; None where no bound is claimed. ``views``: of the scan.
    """

    rows: Sequence[BudgetRow]
    basis: Basis
    views: int
    mass: float
    mass_reach: float | None
    com_reach: float | None
    underside: str = "seen"


@dataclass(frozen=True)
class Measurement:
    """``left``: what stays of a source's standard deviation or half range; ``mass``: half-width of the mass by itself,
    kg; ``at_best``: how much is cut shows only when it is done."""

    what: str
    left: Mapping[str, float] = field(default_factory=dict)
    mass: float | None = None
    at_best: bool = False


def standing(bounds: Bounds, underside: str) -> Standing:
    """The standing of a result."""
    return Standing(
        bounds.budget,
        bounds.noise.basis,
        bounds.noise.views,
        float(bounds.mass.value),
        _reach(bounds.mass),
        _reach(bounds.com),
        underside,
    )


def measurements(now: Standing) -> Iterator[Measurement]:
    # A row of a check that chance explains holds half ranges alone, and nothing of the bounds.
    names = {
        row.source for row in now.rows if row.kind == "bracket" or row.mass_std is not None or row.com_std is not None
    }
    brackets = {row.source for row in now.rows if row.kind == "bracket"} - {COMMON_ERROR}
    if now.mass_reach is not None:
        settled = {COMMON_ERROR: _by_weighing(now)} if COMMON_ERROR in names else {}
        yield Measurement(f"weigh it on a scale good to {100 * WEIGHING:g} %", settled, mass=WEIGHING * now.mass)
    if brackets:
        what = (
            "scan the underside and whatever else was not seen, or declare surface.underside"
            if now.underside == "unknown"
            else "scan the places that were not seen"
        )
        yield Measurement(what, dict.fromkeys(brackets, 0.0))
    if now.basis == "views":
        what = f"scan it from twice as many views ({2 * now.views})"
        yield Measurement(what, dict.fromkeys(("scan noise", "view shifts", "view turns"), 0.5**0.5))
    by_scans = by_more_scans(now)
    if by_scans is not None:
        yield by_scans
    by_length = {row.source: _by_length(now, row) for row in now.rows if row.source in names & {"scale", COMMON_ERROR}}
    if by_length:
        what = f"measure one long distance on the object to {100 * LENGTH:g} % and compare it with the scan's"
        yield Measurement(what, by_length)
    if "edges finer than the points" in names:
        # What an edge is off by goes with the square of the points' spacing.
        yield Measurement("scan with points half as far apart", {"edges finer than the points": 0.25})


def by_more_scans(now: Standing) -> Measurement | None:
    """Scans until three tell the noise. Their mean has the declared noise over the root of their number; of an upper
    bound nobody knows how much is noise, so at best nothing is left."""
    scans = {1: "twice more", 2: "once more"}.get(max(now.views, 1), "again, so that three views overlap")
    if now.basis == "declared" and now.views < LEAST_VIEWS and any(row.source == "scan noise" for row in now.rows):
        left = (max(now.views, 1) / LEAST_VIEWS) ** 0.5
        return Measurement(f"scan it {scans}, which measures the noise", {"scan noise": left})
    if now.basis == "upper_bound":
        what = f"declare the scanner's noise (scan.noise_std or scan.certificate), or measure it: scan {scans}"
        return Measurement(what, {"scan noise (upper bound)": 0.0}, at_best=True)
    return None


def _by_weighing(now: Standing) -> float:
    """What a weighing leaves of an error common to all views: the mass it goes with is known to within all else."""
    rows = [row for row in now.rows if row.source == COMMON_ERROR]
    rest = half_width([row for row in now.rows if row.source != COMMON_ERROR], "mass", now.mass_reach or 0.0, {})
    return min(1.0, float(np.hypot(WEIGHING * now.mass, rest)) / half_width(rows, "mass", now.mass_reach or 0.0, {}))


def _by_length(now: Standing, row: BudgetRow) -> float:
    """What a known length leaves of an error that stretches lengths by a third of what it does to the mass."""
    size = row.mass_half_range if row.kind == "bracket" else 1.96 * (row.mass_std or 0.0)
    return min(1.0, LENGTH / (size / (3.0 * now.mass))) if size else 1.0


def factors_left(now: Standing, m: Measurement) -> tuple[float | None, float | None]:
    """Half-width after over half-width before, of mass and centre of mass; None where there is no bound."""
    left: list[float | None] = []
    for name, reach in (("mass", now.mass_reach), ("com", now.com_reach)):
        before = 0.0 if reach is None else half_width(now.rows, name, reach, {})
        if reach is None or before == 0.0:
            left.append(None)
            continue
        after = half_width(now.rows, name, reach, m.left)
        if m.mass is not None and name == "mass":
            after = m.mass * after / float(np.hypot(m.mass, after))  # two ways to one figure, by their weights
        left.append(after / before)
    return left[0], left[1]


def half_width(rows: Sequence[BudgetRow], name: str, reach: float, left: Mapping[str, float]) -> float:
    """Combined half-width: half ranges add up, standard deviations add as squares."""
    ranges, variance = 0.0, 0.0
    for row in rows:
        size = size_of(row, name) * left.get(row.source, 1.0)
        if row.kind == "bracket":
            ranges += size
        else:
            variance += size**2
    return ranges + reach * float(np.sqrt(variance))


def size_of(row: BudgetRow, name: str) -> float:
    kind = "half_range" if row.kind == "bracket" else "std"
    size = getattr(row, f"{name}_{kind}")
    return 0.0 if size is None else float(np.linalg.norm(size))


def _reach(bound: Bound) -> float | None:
    """Half-width of the random and declared part over its standard deviation."""
    if bound.std is None or bound.random_low is None or bound.random_high is None:
        return None
    std = float(np.linalg.norm(bound.std))
    return float(np.linalg.norm(bound.random_high - bound.random_low)) / 2.0 / std if std > 0 else 1.96
