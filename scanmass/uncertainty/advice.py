"""Which measurement next: what each one would leave of the bounds, worked out from the budget."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from scanmass.uncertainty.budget import BudgetRow
from scanmass.uncertainty.measurements import (
    Measurement,
    Standing,
    by_more_scans,
    factors_left,
    measurements,
    size_of,
)
from scanmass.uncertainty.noise import LEAST_VIEWS

WORTH_SAYING = 0.9
"""A measurement that leaves more of a bound than this is not worth the trouble."""
NOTABLE = 0.95
"""What leaves more of a bound than this hardly changes it."""

_NAMES = {"mass": "mass", "com": "centre of mass"}


@dataclass(frozen=True)
class Advice:
    """A measurement in words, the source it cuts most, and what it leaves of the half-widths of mass and centre."""

    text: str
    source: str
    mass_factor: float | None
    com_factor: float | None


@dataclass(frozen=True)
class _Weighed:
    """A measurement and what it leaves of both half-widths, None where there is no bound."""

    what: Measurement
    mass: float | None
    com: float | None

    def of(self, name: str) -> float:
        """What is left of one of them; all of it where there is none."""
        return _one(self.mass if name == "mass" else self.com)


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
    found = [_Weighed(m, *factors_left(now, m)) for m in measurements(now)]
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
    measurement = by_more_scans(now)
    if measurement is None:
        return None
    mass, com = factors_left(now, measurement)
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


def _source(now: Standing, m: Measurement) -> str:
    """The source that the measurement cuts most, of the figure it helps more."""
    mass, com = factors_left(now, m)
    name, reach = ("mass", now.mass_reach) if _one(mass) <= _one(com) else ("com", now.com_reach)
    direct = m.mass is not None and name == "mass"

    def cut(row: BudgetRow) -> float:
        left = 0.0 if direct else m.left.get(row.source, 1.0)
        return size_of(row, name) * (1.0 - left) * (1.0 if row.kind == "bracket" else reach or 0.0)

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
