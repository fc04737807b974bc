"""Which measurement next: what each one would leave of the bounds, worked out from the budget."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from scanmass.uncertainty.bounds import Bounds
from scanmass.uncertainty.bracket import Bound
from scanmass.uncertainty.budget import BudgetRow
from scanmass.uncertainty.noise import LEAST_VIEWS, Basis

COMMON_ERROR = "pose or incidence error common to all views"
"""The budget's row of what re-registration changes, random or a bracket."""
WEIGHING = 0.005
"""Half-width at 95 % of a weighing over the mass: a hoist cell or a pallet-jack scale does so well."""
LENGTH = 0.0002
"""Half-width at 95 % of a known length over itself: 0.1 mm in 500 mm, a long calliper or a scale bar."""
NOTABLE = 0.95
WORTH_SAYING = 0.9
"""A measurement that leaves more of a bound than this is not worth the trouble."""


_NAMES = {"mass": "mass", "com": "centre of mass"}


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
class Advice:
    """A measurement in words, the source it cuts most, and what it leaves of the half-widths of mass and centre."""

    text: str
    source: str
    mass_factor: float | None
    com_factor: float | None


@dataclass(frozen=True)
class _Measurement:
    """``left``: what stays of a source's standard deviation or half range; ``mass``: half-width of the mass by itself,
    kg; ``at_best``: how much is cut shows only when it is done."""

    what: str
    left: Mapping[str, float] = field(default_factory=dict)
    mass: float | None = None
    at_best: bool = False


@dataclass(frozen=True)
class _Weighed:
    """A measurement and what it leaves of both half-widths, None where there is no bound."""

    what: _Measurement
    mass: float | None
    com: float | None

    def of(self, name: str) -> float:
        """What is left of one of them; all of it where there is none."""
        return _one(self.mass if name == "mass" else self.com)


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


def next_measurement(now: Standing) -> Advice | None:
    """The one measurement that shrinks the bounds of mass and centre of mass most, and by how much.

    The combined half-width of a figure is the sum of half ranges plus reach x the root of the sum of variances, before
    and after; the measurement with the least product of both ratios leads. Where another does clearly more for one of
    the two figures, the sentence names it too. None where nothing shrinks either bound by a tenth.

    Limits: half-widths of different sources are added as if each source stayed as it is; that more views also mean
    more degrees of freedom is left out; what a weighing tells of an unseen part is left out.
    """
    if now.basis == "none":
        text = (
            f"Scan the object until {LEAST_VIEWS} views overlap, or declare scan.noise_std or scan.certificate: "
            "without one of these no bound can be given."
        )
        return Advice(text, "scan noise", None, None)
    found = [_Weighed(m, *_factors(now, m)) for m in _measurements(now)]
    found = [f for f in found if min(f.of("mass"), f.of("com")) <= WORTH_SAYING]
    unbounded = now.mass_reach is None
    if not found:
        return Advice(_DENSITY + ".", "density", None, None) if unbounded else None
    best = min(found, key=lambda f: f.of("mass") * f.of("com"))
    clauses = [_clause(best), *_besides(best, found)]
    text = "; ".join(clauses) + "."
    if unbounded:
        text = f"{_DENSITY}; then {text}"
    return Advice(text[:1].upper() + text[1:], _source(now, best.what), best.mass, best.com)


def _besides(best: _Weighed, found: Sequence[_Weighed]) -> Iterator[str]:
    """What does clearly more for one of the two figures than what is best for both."""
    for name in _NAMES:
        left = {f.what.what: f.of(name) for f in found}
        what = min(left, key=left.__getitem__)
        if left[what] < WORTH_SAYING * best.of(name):
            yield f"for the {_NAMES[name]}, {what} (to about {_per_cent(left[what])})"


def more_scans(now: Standing) -> Advice | None:
    """What two more scans would buy one cloud, or one more two views; None where the views tell the noise already."""
    if now.basis == "none":
        return Advice(
            f"{_scans(now)} would show the scan's own noise, and so give bounds; now none can be given.",
            "scan noise",
            None,
            None,
        )
    measurement = _by_scans(now)
    if measurement is None:
        return None
    mass, com = _factors(now, measurement)
    best = "at best " if measurement.at_best else ""
    ends = []
    for name, factor in (("mass", mass), ("centre of mass", com)):
        if factor is not None:
            does = f"{best}shrink" if factor <= NOTABLE else "hardly change"
            left = f" to about {_per_cent(factor)} of its present width" if factor <= NOTABLE else ""
            ends.append(f"{does} the bound of the {name}{left}")
    if not ends:
        return None
    text = f"{_scans(now)} would measure the noise rather than {_INSTEAD[now.basis]}, and would {' and '.join(ends)}."
    return Advice(text, _source(now, measurement), mass, com)


_DENSITY = "Give the density with its doubt (as value ± doubt), or weigh the object: without one the mass has no bound"
_INSTEAD = {"declared": "take it as declared", "upper_bound": "bound it from above"}


def _scans(now: Standing) -> str:
    return {1: "Two more scans", 2: "One more scan"}.get(max(now.views, 1), "Views that overlap")


def _measurements(now: Standing) -> Iterator[_Measurement]:
    names = {row.source for row in now.rows}
    brackets = {row.source for row in now.rows if row.kind == "bracket"} - {COMMON_ERROR}
    if now.mass_reach is not None:
        settled = {COMMON_ERROR: _by_weighing(now)} if COMMON_ERROR in names else {}
        yield _Measurement(f"weigh it on a scale good to {100 * WEIGHING:g} %", settled, mass=WEIGHING * now.mass)
    if brackets:
        what = (
            "scan the underside and whatever else was not seen, or declare surface.underside"
            if now.underside == "unknown"
            else "scan the places that were not seen"
        )
        yield _Measurement(what, dict.fromkeys(brackets, 0.0))
    if now.basis == "views":
        what = f"scan it from twice as many views ({2 * now.views})"
        yield _Measurement(what, dict.fromkeys(("scan noise", "view poses"), 0.5**0.5))
    by_scans = _by_scans(now)
    if by_scans is not None:
        yield by_scans
    by_length = {row.source: _by_length(now, row) for row in now.rows if row.source in ("scale", COMMON_ERROR)}
    if by_length:
        what = f"measure one long distance on the object to {100 * LENGTH:g} % and compare it with the scan's"
        yield _Measurement(what, by_length)
    if "edges finer than the points" in names:
        # What an edge is off by goes with the square of the points' spacing.
        yield _Measurement("scan with points half as far apart", {"edges finer than the points": 0.25})


def _by_scans(now: Standing) -> _Measurement | None:
    """Scans until three tell the noise. Their mean has the declared noise over the root of their number; of an upper
    bound nobody knows how much is noise, so at best nothing is left."""
    scans = {1: "twice more", 2: "once more"}.get(max(now.views, 1), "again, so that three views overlap")
    if now.basis == "declared" and now.views < LEAST_VIEWS and any(row.source == "scan noise" for row in now.rows):
        left = (max(now.views, 1) / LEAST_VIEWS) ** 0.5
        return _Measurement(f"scan it {scans}, which measures the noise", {"scan noise": left})
    if now.basis == "upper_bound":
        what = f"declare the scanner's noise (scan.noise_std or scan.certificate), or measure it: scan {scans}"
        return _Measurement(what, {"scan noise (upper bound)": 0.0}, at_best=True)
    return None


def _by_weighing(now: Standing) -> float:
    """What a weighing leaves of an error common to all views: the mass it goes with is known to within all else."""
    rows = [row for row in now.rows if row.source == COMMON_ERROR]
    rest = _half([row for row in now.rows if row.source != COMMON_ERROR], "mass", now.mass_reach or 0.0, {})
    return min(1.0, float(np.hypot(WEIGHING * now.mass, rest)) / _half(rows, "mass", now.mass_reach or 0.0, {}))


def _by_length(now: Standing, row: BudgetRow) -> float:
    """What a known length leaves of an error that stretches lengths by a third of what it does to the mass."""
    size = row.mass_half_range if row.kind == "bracket" else 1.96 * (row.mass_std or 0.0)
    return min(1.0, LENGTH / (size / (3.0 * now.mass))) if size else 1.0


def _factors(now: Standing, m: _Measurement) -> tuple[float | None, float | None]:
    """Half-width after over half-width before, of mass and centre of mass; None where there is no bound."""
    factors: list[float | None] = []
    for name, reach in (("mass", now.mass_reach), ("com", now.com_reach)):
        before = 0.0 if reach is None else _half(now.rows, name, reach, {})
        if reach is None or before == 0.0:
            factors.append(None)
            continue
        after = _half(now.rows, name, reach, m.left)
        if m.mass is not None and name == "mass":
            after = m.mass * after / float(np.hypot(m.mass, after))  # two ways to one figure, by their weights
        factors.append(after / before)
    return factors[0], factors[1]


def _half(rows: Sequence[BudgetRow], name: str, reach: float, left: Mapping[str, float]) -> float:
    """Combined half-width: half ranges add up, standard deviations add as squares."""
    ranges, variance = 0.0, 0.0
    for row in rows:
        size = _size(row, name) * left.get(row.source, 1.0)
        if row.kind == "bracket":
            ranges += size
        else:
            variance += size**2
    return ranges + reach * float(np.sqrt(variance))


def _size(row: BudgetRow, name: str) -> float:
    kind = "half_range" if row.kind == "bracket" else "std"
    size = getattr(row, f"{name}_{kind}")
    return 0.0 if size is None else float(np.linalg.norm(size))


def _source(now: Standing, m: _Measurement) -> str:
    """The source that the measurement cuts most, of the figure it helps more."""
    mass, com = _factors(now, m)
    name, reach = ("mass", now.mass_reach) if _one(mass) <= _one(com) else ("com", now.com_reach)
    direct = m.mass is not None and name == "mass"

    def cut(row: BudgetRow) -> float:
        left = 0.0 if direct else m.left.get(row.source, 1.0)
        return _size(row, name) * (1.0 - left) * (1.0 if row.kind == "bracket" else reach or 0.0)

    return max(now.rows, key=cut).source


def _clause(found: _Weighed) -> str:
    ends = [
        f"the bound of the {said} to about {_per_cent(found.of(name))}"
        for name, said in _NAMES.items()
        if found.of(name) <= WORTH_SAYING
    ]
    best = "at best " if found.what.at_best else ""
    return f"{found.what.what}: that would {best}shrink {' and '.join(ends)} of its present width"


def _per_cent(factor: float | None) -> str:
    return f"{100 * _one(factor):.0f} %" if _one(factor) >= 0.015 else "1 %"


def _one(factor: float | None) -> float:
    return 1.0 if factor is None else factor


def _reach(bound: Bound) -> float | None:
    """Half-width of the random and declared part over its standard deviation."""
    if bound.std is None or bound.random_low is None or bound.random_high is None:
        return None
    std = float(np.linalg.norm(bound.std))
    return float(np.linalg.norm(bound.random_high - bound.random_low)) / 2.0 / std if std > 0 else 1.96
