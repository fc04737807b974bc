"""Figures of a document as text: the value and its ends to one place, in units a reader knows."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import ROUND_CEILING, ROUND_FLOOR, Decimal
from typing import Literal

from scanmass.units import rounded, system, unit_named

System = Literal["metric", "us"]

NO_BOUND = "no bound"
EXACT = "no doubt declared"
"""For ends that do not differ because nothing in doubt was declared: a nominal model, a density without ±."""
UNKNOWN_DOUBT = "no doubt found: no claim"
"""For ends that do not differ although nobody declared so."""
SMALLEST_SHARE = 1e-9
"""A half-width below this share of the quantity's own size is rounding of the arithmetic, not doubt."""

LEAST_SHARE = 1e-5
UNBOUNDED_DIGITS = 4
"""More would look like knowledge where no bound is known."""

_FINER = {
    "kg": "g",
    "L": "cm3",
    "m2": "cm2",
    "kg m2": "kg mm2",
    "lb": "oz",
    "ft3": "in3",
    "ft2": "in2",
    "lb ft2": "lb in2",
}
_FINER_BELOW = {"kg": 0.1, "L": 0.1, "m2": 0.1, "kg m2": 0.1, "lb": 0.25, "ft3": 0.1, "ft2": 0.5, "lb ft2": 0.5}


@dataclass(frozen=True)
class Words:
    """One quantity as text: ``value`` with its unit, ``half`` (``± 0.5 kg``) and ``ends`` (``148.1 to 149.1 kg``)."""

    value: str
    half: str
    ends: str


@dataclass(frozen=True)
class Ruler:
    """Prints one dimension in the unit that suits its ``size`` (SI): ``Ruler.of("mass", 148.6, "metric")``.

    >>> Ruler.of("mass", 148.6, "metric").words(148.6372, 148.1, 149.16)
    Words(value='148.64 kg', half='± 0.54 kg', ends='148.10 to 149.16 kg')
    >>> Ruler.of("mass", 0.02, "metric").words(0.02, None, None)
    Words(value='20 g', half='', ends='no bound')
    """

    unit: str
    si: float
    size: float
    same: str = EXACT

    @classmethod
    def of(cls, dimension: str, size: float, name: System, same: str = EXACT) -> Ruler:
        """The ruler for quantities about as large as ``size``; lengths stay in mm or inches.

        ``same`` stands for ends that do not differ.
        """
        unit = system(name)[dimension]
        si = float(unit_named(unit, (dimension,)).factor)
        if abs(size) < _FINER_BELOW.get(unit, 0.0) * si:
            unit = _FINER[unit]
            si = float(unit_named(unit, (dimension,)).factor)
        return cls(unit, si, abs(size), same)

    def words(self, value: float, low: float | None, high: float | None) -> Words:
        """Value and ends, all to the second digit of the half-width, the ends rounded outward."""
        if low is None or high is None:
            return Words(f"{self.plain(value, UNBOUNDED_DIGITS)} {self.unit}", "", NO_BOUND)
        half = max(value - low, high - value)
        if half <= SMALLEST_SHARE * self.size:
            return Words(f"{self.plain(value)} {self.unit}", "", self.same)
        shown, width = rounded(_inside(value / self.si), half / self.si)
        place = Decimal(width).adjusted() - 1
        ends = f"{_outward(low / self.si, place, ROUND_FLOOR)} to {_outward(high / self.si, place, ROUND_CEILING)}"
        return Words(f"{shown} {self.unit}", f"± {width} {self.unit}", f"{ends} {self.unit}")

    def std(self, std: float) -> str:
        """A standard deviation to two digits.

        >>> Ruler.of("length", 0.3, "metric").std(0.000123)
        '0.12 mm'
        """
        if self.is_nothing(std):
            return f"0 {self.unit}"
        return f"{rounded(0.0, std / self.si)[1]} {self.unit}"

    def is_nothing(self, std: float) -> bool:
        """Whether a standard deviation is but the rounding of the arithmetic."""
        return abs(std) <= SMALLEST_SHARE * self.size

    def stds(self, stds: list[float], link: str) -> str:
        """Several of them, the unit once at the end.

        >>> Ruler.of("length", 0.3, "metric").stds([0.0, 0.0002, 0.0003], " / ")
        '0 / 0.20 / 0.30 mm'
        """
        texts = [self.std(std).removesuffix(f" {self.unit}") for std in stds]
        return f"{link.join(texts)} {self.unit}"

    def plain(self, value: float, digits: int = 6) -> str:
        """So many digits at most, what is below the size's rounding as zero, no unit."""
        return number(0.0 if self.is_nothing(value) else value / self.si, digits)


def number(value: float, digits: int = 6) -> str:
    """A number without an exponent in everyday sizes.

    >>> number(1234567.0), number(0.00012), number(-0.0)
    ('1234570', '0.00012', '0')
    """
    if value == 0:
        return "0"
    if not 1e-6 <= abs(value) < 1e12:
        return f"{value:.{digits}g}"
    return f"{Decimal(f'{value:.{digits}g}').normalize():f}"


def share(part: float) -> str:
    """A share as per cent; little is never called nothing, nor nearly all all.

    >>> share(0.0), share(1e-9), share(0.00041), share(0.123), share(0.9999), share(1.0)
    ('0 %', 'under 0.001 %', '0.041 %', '12 %', '99.99 %', '100 %')
    """
    if 0 < part < LEAST_SHARE:
        return f"under {100 * LEAST_SHARE:g} %"
    if 1 - LEAST_SHARE < part < 1:
        return f"over {100 - 100 * LEAST_SHARE:g} %"
    per_cent = 100 * part
    if per_cent > 99 and part < 1:
        return f"{100 - float(f'{100 - per_cent:.1g}'):g} %"
    return f"{per_cent:.2g} %" if per_cent < 99 else f"{per_cent:.0f} %"


def _outward(value: float, place: int, rounding: str) -> str:
    step = Decimal(1).scaleb(place)
    digits = (Decimal(f"{value:.12e}") / step).to_integral_value(rounding) * step
    return f"{abs(digits) if digits == 0 else digits:f}"


def _inside(value: float) -> float:
    return float(f"{value:.14g}")
