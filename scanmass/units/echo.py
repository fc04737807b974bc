"""SI to text: the doubt to two digits, the value to the same place, the unit a reader knows."""

from __future__ import annotations

from decimal import ROUND_CEILING, ROUND_FLOOR, ROUND_HALF_EVEN, Decimal
from typing import Final, Literal

import numpy as np

from scanmass.doubt import Figure
from scanmass.units.table import UNITS

SYSTEMS: Final = {
    "metric": {
        "length": "mm",
        "mass": "kg",
        "force": "N",
        "density": "kg/m3",
        "area": "m2",
        "volume": "L",
        "inertia": "kg m2",
        "angle": "deg",
        "ratio": "%",
    },
    "us": {
        "length": "in",
        "mass": "lb",
        "force": "lbf",
        "density": "lb/ft3",
        "area": "ft2",
        "volume": "ft3",
        "inertia": "lb ft2",
        "angle": "deg",
        "ratio": "%",
    },
}

NO_BOUND: Final = "(no bound)"
_EVEN_SIDES: Final = 0.05
"""Sides that differ by less than this share of their mean are printed as one ±."""
_LONG: Final = 7
"""A declared number of more significant digits than this was made by a change of unit."""


def system(name: Literal["metric", "us"]) -> dict[str, str]:
    """The unit name each dimension is printed in.

    >>> system("us")["mass"], system("metric")["length"]
    ('lb', 'mm')
    """
    return dict(SYSTEMS[name])


def rounded(value: float, half_width: float) -> tuple[str, str]:
    """The half-width to two significant digits, the value to the same place (GUM 7.2.6).

    Both are numbers in one unit. A half-width of zero leaves the value with the digits it has, up to ten.

    Raises
    ------
    ValueError
        If either is not finite or the half-width is negative.

    >>> rounded(148.6372, 0.5291)
    ('148.64', '0.53')
    >>> rounded(1234.5, 567.0)
    ('1230', '570')
    >>> rounded(2.0, 0.0996)
    ('2.00', '0.10')
    """
    if not (np.isfinite(value) and np.isfinite(half_width) and half_width >= 0):
        raise ValueError(f"cannot round {value} ± {half_width}")
    if half_width == 0:
        return _plain(value), "0"
    place = _place(half_width)
    return _at(value, place), _at(half_width, place)


def show(figure: Figure, unit: str) -> str:
    """The figure as text in ``unit``, a name of the table.

    ``±`` is the half-width at 95 %. A figure alike anywhere in a range prints as that range; one with uneven
    sides as its value and [low, high], rounded outward; one of which nothing can be claimed says so.

    Raises
    ------
    ValueError
        If the figure is an array.

    >>> show(Figure.normal(148.6, 0.25), "kg")
    '148.6 ± 0.5 kg'
    >>> show(Figure.uniform(0.004, 0.009), "mm")
    '4 to 9 mm'
    >>> show(Figure(2.0, 0.1, 1.913, 2.301), "kg")
    '2.00 [1.91, 2.31] kg'
    >>> show(Figure(2.0), "kg")
    '2 kg (no bound)'
    >>> show(Figure(2.345e-6, 1e-8, 2.325e-6, 2.365e-6), "kg m2")
    '2.345e-6 ± 0.020e-6 kg m2'
    """
    if np.ndim(figure.value) != 0:
        raise ValueError("only single figures are shown; show an array one element at a time")
    behind = f" {unit}" if unit else ""
    value = _in(float(figure.value), unit)
    if figure.spread == "exact":
        return f"{_plain(value)}{behind}"
    if figure.low is None or figure.high is None:
        return f"{_plain(value, 6)}{behind} {NO_BOUND}"
    low, high = _in(float(figure.low), unit), _in(float(figure.high), unit)
    if figure.spread == "uniform":
        return f"{_range(low, high)}{behind}"
    if figure.spread == "normal" and figure.std is not None:
        return f"{_declared(value, _in(2 * float(figure.std), unit))}{behind}"
    if low == high:
        return f"{_plain(value)}{behind}"
    return f"{_bounded(value, low, high)}{behind}"


def _range(low: float, high: float) -> str:
    """The ends as they were given; where a change of unit made long numbers of them, rounded outward."""
    ends = _plain(low), _plain(high)
    if max(sum(character.isdigit() for character in end.lstrip("-0.")) for end in ends) > _LONG:
        place, power = _place((high - low) / 2) - 1, _power(max(abs(low), abs(high)))
        ends = _at(low, place, power, ROUND_FLOOR), _at(high, place, power, ROUND_CEILING)
    return f"{ends[0]} to {ends[1]}"


def _bounded(value: float, low: float, high: float) -> str:
    """``value ± half-width`` where the sides are even, else ``value [low, high]`` rounded outward."""
    below, above = value - low, high - value
    if min(below, above) > 0 and abs(above - below) <= _EVEN_SIDES * (above + below) / 2:
        return _pair(value, max(above, below))
    place = _place((high - low) / 2)
    power = _power(max(abs(low), abs(high)))
    ends = f"[{_at(low, place, power, ROUND_FLOOR)}, {_at(high, place, power, ROUND_CEILING)}]"
    return f"{_at(value, place, power)} {ends}"


def _in(value: float, unit: str) -> float:
    """SI to the unit; the last rounding digit of the division is dropped."""
    return float(f"{value / float(UNITS[unit].factor):.14g}")


def _place(half_width: float) -> int:
    """The power of ten of the second significant digit of the rounded half-width."""
    return Decimal(f"{half_width:.1e}").adjusted() - 1


def _power(value: float) -> int:
    """The power of ten to write apart: none (0) in everyday sizes, so that nobody has to count zeros."""
    power = Decimal(f"{value:.1e}").adjusted()
    return 0 if -4 < power < 9 else power


def _at(value: float, place: int, power: int = 0, rounding: str = ROUND_HALF_EVEN) -> str:
    """The value rounded to the power of ten ``place``; the power of ten ``power`` is written apart."""
    step = Decimal(1).scaleb(place)
    digits = ((Decimal(f"{value:.12e}") / step).to_integral_value(rounding) * step).scaleb(-power)
    text = f"{digits:f}"
    return (text.removeprefix("-") if digits == 0 else text) + (f"e{power}" if power else "")


def _pair(value: float, half_width: float) -> str:
    place, power = _place(half_width), _power(max(abs(value), half_width))
    return f"{_at(value, place, power)} ± {_at(half_width, place, power)}"


def _declared(value: float, half_width: float) -> str:
    """A declared figure keeps the digits it was given in: a last zero on both sides tells nothing."""
    left, between, right = _pair(value, half_width).partition(" ± ")
    while "." in left and "." in right and left.endswith("0") and right.endswith("0"):
        left, right = left[:-1].removesuffix("."), right[:-1].removesuffix(".")
    return f"{left}{between}{right}"


def _plain(value: float, digits: int = 10) -> str:
    """The value with the digits it has, no more than ``digits``, no exponent in everyday sizes."""
    if value == 0:
        return "0"
    if not 1e-4 <= abs(value) < 1e9:
        return f"{value:.{digits}g}"
    return f"{Decimal(f'{value:.{digits}g}').normalize():f}"
