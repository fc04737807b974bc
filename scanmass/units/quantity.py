"""Reads one quantity with its doubt: ``12 mm``, ``5.0 ± 0.8 mm``, ``4 to 9 mm``, ``95 %``."""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

import numpy as np

from scanmass.doubt import Figure
from scanmass.errors import Note, UserFault
from scanmass.units.characters import screen
from scanmass.units.table import STANDARD_GRAVITY, UNITS, Unit, unit_named

ANY: Final = (-np.inf, np.inf)
NOT_BELOW_ZERO: Final = (0.0, np.inf)

LIMITS: Final = {"angle": ANY} | dict.fromkeys(
    ("length", "mass", "force", "density", "area", "volume", "inertia", "ratio"), NOT_BELOW_ZERO
)
"""Where a quantity can lie unless the caller says otherwise (a position, for one, may be negative). Ends included."""

NEVER_ZERO: Final = {"density"}

NUMBER: Final = r"[+-]?(?:\d+(?:\.\d+)?|\.\d+)(?:[eE][+-]?\d{1,3})?"
_TERM: Final = re.compile(rf"({NUMBER})\s*(.*)", re.ASCII)
_FORMS: Final = "write it like '12 mm', '5.0 ± 0.8 mm' or '4 to 9 mm'"
_RATIO_FORMS: Final = "write it like '95 %', '1 ± 0.0004' or '0.2 to 0.3'"


@dataclass(frozen=True)
class _Term:
    """A number as it stands, exactly, and the text of the unit behind it."""

    text: str
    number: Fraction
    unit: str


def parse(text: str, dimension: str, *, limits: tuple[float, float] | None = None) -> Figure:
    """The quantity that ``text`` states, in SI; see :func:`parse_noted` for what had to be assumed.

    >>> wall = parse("5.0 ± 0.8 mm", "length")
    >>> wall.value, wall.std
    (0.005, 0.0004)
    """
    return parse_noted(text, dimension, limits=limits)[0]


def parse_noted(
    text: str, dimension: str, *, limits: tuple[float, float] | None = None
) -> tuple[Figure, tuple[Note, ...]]:
    """The quantity that ``text`` states, in SI, and what was assumed in reading it.

    ``±`` or ``+/-`` is the half-width at 95 %: normal, standard deviation half of it, cut at ``limits``.
    ``4 to 9 mm`` is alike anywhere between. Each number may carry its own unit (``12.5 mm ± 50 um``); a first
    number without one takes the last one's. Doubt in per cent of the value is refused, since ``1250 ± 5 %`` can
    be read two ways; the fault says what to write. Where a mass is asked for and a force is given, the mass is
    the force over standard gravity, and a note says so.

    Parameters
    ----------
    text
        The quantity; decimals with a point, unit names as in the table.
    dimension
        ``length``, ``mass``, ``force``, ``density``, ``area``, ``volume``, ``inertia``, ``angle`` or ``ratio``
        (a bare number, per cent or ppm).
    limits
        Where it can lie, SI, ends included; by default not below zero, angles anywhere. A density is never zero.

    Raises
    ------
    UserFault
        If the text is not of this grammar, the unit not of this dimension, or the value outside the limits.

    >>> parse_noted("95 %", "ratio")[0].value
    0.95
    >>> figure, notes = parse_noted("1 kN", "mass")
    >>> round(figure.value, 3), notes[0].code
    (101.972, 'force-as-mass')
    """
    if dimension not in LIMITS:
        raise ValueError(f"no dimension {dimension!r}; there are {', '.join(LIMITS)}")
    within = LIMITS[dimension] if limits is None else limits
    first, link, second = _terms(text, dimension)
    accepted = ("mass", "force") if dimension == "mass" else (dimension,)
    if second is None:
        unit = _unit_of(first, accepted, text)
        value = _si(first, unit, dimension)
        _check_limits(text, value, dimension, within)
        return Figure.exact(value), _noted(text, value, (unit,), dimension)
    _refuse_mixed(text, first, link, second, dimension)
    first = first if first.unit else _Term(first.text, first.number, second.unit)
    units = (_unit_of(first, accepted, text), _unit_of(second, accepted, text))
    if units[0].dimension != units[1].dimension:
        raise UserFault(f"'{text}' mixes {units[0].dimension} and {units[1].dimension}", allowed="use one unit")
    one, two = _si(first, units[0], dimension), _si(second, units[1], dimension)
    figure = _range(text, one, two, first, second) if link == "to" else _normal(text, one, two, within)
    for value in (one, two) if link == "to" else (one,):
        _check_limits(text, value, dimension, within)
    return figure, _noted(text, float(figure.value), units, dimension)


def _unit_of(term: _Term, dimensions: tuple[str, ...], text: str) -> Unit:
    """The unit of a term; the fault shows the whole text."""
    try:
        return unit_named(term.unit, dimensions)
    except UserFault as fault:
        raise UserFault(f"'{text}': {fault.seen}", allowed=fault.allowed) from None


def read_number(text: str) -> Fraction:
    """A plain decimal number, exactly; the caller has matched it against ``NUMBER``."""
    return Fraction(text)


def _terms(text: str, dimension: str) -> tuple[_Term, str, _Term | None]:
    """The one or two numbers with their units, and what stands between: ``±``, ``to`` or nothing."""
    text = screen(text)
    for link, pattern in (("±", r"±|\+/-"), ("to", r"\sto\s")):
        parts = re.split(pattern, text)
        if len(parts) > 2:
            raise UserFault(f"'{text}' has '{link}' more than once", allowed=_forms(dimension))
        if len(parts) == 2:
            return _term(parts[0].strip(), text, dimension), link, _term(parts[1].strip(), text, dimension)
    return _term(text, text, dimension), "", None


def _term(part: str, text: str, dimension: str) -> _Term:
    match = _TERM.fullmatch(part)
    if match is None:
        what = "has nothing where a number belongs" if not part else f"has '{part}' where a plain number belongs"
        raise UserFault(f"'{text}' {what}", allowed=_forms(dimension))
    number, unit = match.groups()
    if re.match(r"\+\s*-|-\s*\+|\+-", unit):
        raise UserFault(f"'{text}': '+-' is not read", allowed="write '±' or '+/-'")
    if re.match(r"(-|\.\.+)\s*[\d.]", unit):
        raise UserFault(f"'{text}' looks like a range", allowed="write a range like '4 to 9 mm'")
    if unit.startswith(".") and not re.match(r"\.\d", unit):
        raise UserFault(f"'{text}' has a point without decimals", allowed=f"write '{number}' or '{number}.0'")
    if re.match(r"[\d_.]", unit):
        raise UserFault(
            f"'{text}' has more than one number before the unit",
            allowed="write one number without gaps, like '1500 kg'",
        )
    if re.search(r"\s[\d.]", unit):
        raise UserFault(f"'{text}' has more than one number and unit", allowed="write one number and one unit")
    return _Term(number, read_number(number), unit)


def _si(term: _Term, unit: Unit, dimension: str) -> float:
    """The term in SI: exact arithmetic, rounded once."""
    factor = unit.factor
    if unit.dimension == "force" and dimension == "mass":
        factor /= UNITS["kgf"].factor
    try:
        value = float(term.number * factor)
    except OverflowError:
        value = np.inf
    if abs(value) > 1e30 or (value == 0.0 and term.number != 0):
        raise UserFault(f"{term.text} {unit.name} is out of all range", allowed="check the exponent")
    return value


def _refuse_mixed(text: str, first: _Term, link: str, second: _Term, dimension: str) -> None:
    """Refuse doubt in per cent of the value, and a unit on the first number only."""
    if link == "±" and second.unit == "%" and first.unit != "%":
        if dimension == "ratio":
            fix = f"write '{first.text} % ± {second.text} %', or both as bare numbers"
        else:
            half = float(abs(first.number) * second.number / 100)
            fix = f"write the doubt in the unit itself: '{first.text} ± {half:.6g} {first.unit or 'UNIT'}'"
        raise UserFault(f"'{text}' gives the doubt in per cent, which can be read two ways", allowed=fix)
    if first.unit and not second.unit and dimension != "ratio":
        raise UserFault(f"'{text}' has no unit at its end", allowed=f"write '... {second.text} {first.unit}'")
    if dimension == "ratio" and link == "±" and first.unit != second.unit:
        raise UserFault(f"'{text}' mixes units", allowed="give both numbers in per cent, or both bare")


def _normal(text: str, value: float, half_width: float, limits: tuple[float, float]) -> Figure:
    if half_width < 0:
        raise UserFault(f"'{text}' has a negative doubt", allowed="what follows ± is the half-width at 95 %, 0 or more")
    return Figure.normal(value, half_width / 2, limits) if half_width > 0 else Figure.exact(value)


def _range(text: str, low: float, high: float, first: _Term, second: _Term) -> Figure:
    if low == high:
        raise UserFault(f"'{text}' is a range of no width", allowed="write the number alone, or with its ±")
    if low > high:
        ends = [f"{term.text} {term.unit}".strip() for term in (second, first)]
        fix = f"write '{ends[0]} to {ends[1]}'"
        raise UserFault(f"'{text}' runs from high to low", allowed=fix)
    return Figure.uniform(low, high)


def _check_limits(text: str, value: float, dimension: str, limits: tuple[float, float]) -> None:
    if dimension in NEVER_ZERO and value == 0:
        raise UserFault(f"'{text}' is zero", allowed=f"a {dimension} is above zero")
    if value < limits[0]:
        least = "negative" if limits[0] == 0 else f"below {limits[0]:g} (SI)"
        raise UserFault(f"'{text}' is {least}", allowed=f"this {dimension} is {limits[0]:g} or more")
    if value > limits[1]:
        raise UserFault(f"'{text}' is above {limits[1]:g} (SI)", allowed=f"this {dimension} is {limits[1]:g} or less")


def _noted(text: str, value: float, units: tuple[Unit, ...], dimension: str) -> tuple[Note, ...]:
    if dimension != "mass" or units[0].dimension != "force":
        return ()
    said = (
        f"'{text.strip()}' is a force; it is taken as the weight of {value:.6g} kg, "
        f"with standard gravity {STANDARD_GRAVITY} m/s2."
    )
    return (Note("force-as-mass", said),)


def _forms(dimension: str) -> str:
    return _RATIO_FORMS if dimension == "ratio" else _FORMS
