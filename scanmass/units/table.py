"""The units that are read and written, each with its exact factor to SI and where the factor comes from."""

from __future__ import annotations

import difflib
import math
from dataclasses import dataclass
from fractions import Fraction
from typing import Final

from scanmass.errors import UserFault

SI: Final = "SI Brochure, 9th edition 2019: decimal prefixes and derived units"
BESIDE_SI: Final = "SI Brochure, 9th edition 2019, table 8: units accepted beside the SI"
YARD_AND_POUND: Final = "international yard and pound agreement of 1959: 1 yd = 0.9144 m, 1 lb = 0.45359237 kg"
GRAVITY: Final = "standard acceleration of free fall, 3rd CGPM 1901: 9.80665 m/s2"
BY_MEANING: Final = "by meaning"

STANDARD_GRAVITY: Final = 9.80665
"""m/s2, conventional (3rd CGPM, 1901)."""

_INCH: Final = Fraction(254, 10_000)
_FOOT: Final = 12 * _INCH
_POUND: Final = Fraction(45_359_237, 100_000_000)
_GRAVITY: Final = Fraction(980_665, 100_000)
_DEGREE: Final = Fraction(math.pi) / 180


@dataclass(frozen=True)
class Unit:
    """One unit name: what it measures, how much of the SI unit one of it is, and the factor's source."""

    name: str
    dimension: str
    factor: Fraction
    source: str


UNITS: Final = {
    name: Unit(name, dimension, Fraction(factor), source)
    for name, dimension, factor, source in (
        ("m", "length", 1, SI),
        ("cm", "length", Fraction(1, 100), SI),
        ("mm", "length", Fraction(1, 1000), SI),
        ("um", "length", Fraction(1, 10**6), SI),
        ("µm", "length", Fraction(1, 10**6), SI),  # the micro sign of keyboards, U+00B5
        ("μm", "length", Fraction(1, 10**6), SI),  # the Greek letter, U+03BC
        ("in", "length", _INCH, YARD_AND_POUND),
        ("inch", "length", _INCH, YARD_AND_POUND),
        ("ft", "length", _FOOT, YARD_AND_POUND),
        ("thou", "length", _INCH / 1000, YARD_AND_POUND),
        ("kg", "mass", 1, SI),
        ("g", "mass", Fraction(1, 1000), SI),
        ("t", "mass", 1000, BESIDE_SI),
        ("lb", "mass", _POUND, YARD_AND_POUND),
        ("oz", "mass", _POUND / 16, YARD_AND_POUND),
        ("N", "force", 1, SI),
        ("daN", "force", 10, SI),
        ("kN", "force", 1000, SI),
        ("kgf", "force", _GRAVITY, GRAVITY),
        ("lbf", "force", _POUND * _GRAVITY, f"{YARD_AND_POUND}; {GRAVITY}"),
        ("kg/m3", "density", 1, SI),
        ("kg/m³", "density", 1, SI),
        ("g/cm3", "density", 1000, SI),
        ("g/cm³", "density", 1000, SI),
        ("kg/L", "density", 1000, BESIDE_SI),
        ("t/m3", "density", 1000, BESIDE_SI),
        ("lb/ft3", "density", _POUND / _FOOT**3, YARD_AND_POUND),
        ("lb/in3", "density", _POUND / _INCH**3, YARD_AND_POUND),
        ("m2", "area", 1, SI),
        ("cm2", "area", Fraction(1, 10**4), SI),
        ("mm2", "area", Fraction(1, 10**6), SI),
        ("in2", "area", _INCH**2, YARD_AND_POUND),
        ("ft2", "area", _FOOT**2, YARD_AND_POUND),
        ("m3", "volume", 1, SI),
        ("L", "volume", Fraction(1, 1000), BESIDE_SI),
        ("cm3", "volume", Fraction(1, 10**6), SI),
        ("mm3", "volume", Fraction(1, 10**9), SI),
        ("in3", "volume", _INCH**3, YARD_AND_POUND),
        ("ft3", "volume", _FOOT**3, YARD_AND_POUND),
        ("kg m2", "inertia", 1, SI),
        ("kg mm2", "inertia", Fraction(1, 10**6), SI),
        ("lb in2", "inertia", _POUND * _INCH**2, YARD_AND_POUND),
        ("lb ft2", "inertia", _POUND * _FOOT**2, YARD_AND_POUND),
        ("rad", "angle", 1, SI),
        ("deg", "angle", _DEGREE, BESIDE_SI),
        ("°", "angle", _DEGREE, BESIDE_SI),
        ("", "ratio", 1, BY_MEANING),
        ("%", "ratio", Fraction(1, 100), BY_MEANING),
        ("ppm", "ratio", Fraction(1, 10**6), BY_MEANING),
    )
}

_SPELLED: Final = {
    **dict.fromkeys(("metre", "meter", "metres", "meters"), "m"),
    **dict.fromkeys(("millimetre", "millimeter", "millimetres", "millimeters"), "mm"),
    **dict.fromkeys(("centimetre", "centimeter", "centimetres", "centimeters"), "cm"),
    **dict.fromkeys(("micron", "microns", "micrometre", "micrometer"), "um"),
    **dict.fromkeys(("inches", "ins"), "in"),
    **dict.fromkeys(("foot", "feet"), "ft"),
    **dict.fromkeys(("kilogram", "kilograms", "kilo", "kilos", "kgs"), "kg"),
    **dict.fromkeys(("gram", "grams", "gramme", "grammes", "gr"), "g"),
    **dict.fromkeys(("pound", "pounds", "lbs"), "lb"),
    **dict.fromkeys(("ounce", "ounces"), "oz"),
    **dict.fromkeys(("tonne", "tonnes"), "t"),
    **dict.fromkeys(("newton", "newtons"), "N"),
    **dict.fromkeys(("percent", "per cent", "pct"), "%"),
    **dict.fromkeys(("degree", "degrees"), "deg"),
    **dict.fromkeys(("pcf",), "lb/ft3"),
    **dict.fromkeys(("g/cc", "g/ml", "gm/cc"), "g/cm3"),
}
"""What people write for the names of the table; never read, only named in the fault."""

_TONS: Final = {"ton", "tons", "tn", "long ton", "short ton", "metric ton", "metric tons"}


def allowed(dimension: str) -> str:
    """The unit names of a dimension, as a fault names them.

    >>> allowed("mass")
    'kg, g, t, lb, oz'
    """
    names = (unit.name for unit in UNITS.values() if unit.dimension == dimension)
    return ", ".join(name or "a bare number" for name in names if name.isascii())


def metres_per(name: str) -> float:
    """How many metres one of the length unit ``name`` is.

    Raises
    ------
    UserFault
        If the name is not a length unit of the table.

    >>> metres_per("mm"), metres_per("inch")
    (0.001, 0.0254)
    """
    return float(unit_named(name, ("length",)).factor)


def unit_named(name: str, dimensions: tuple[str, ...]) -> Unit:
    """The unit of exactly this name, if it measures one of ``dimensions`` (the first is the one asked for).

    Raises
    ------
    UserFault
        If there is no such unit, or it measures something else.
    """
    unit = UNITS.get(name)
    wanted = dimensions[0]
    if unit is not None and unit.dimension in dimensions:
        return unit
    remedy = "; ".join(f"allowed for {_with_article(d)}: {allowed(d)}" for d in dimensions)
    if name == "":
        raise UserFault("no unit is given", allowed=remedy)
    if unit is not None:
        raise UserFault(f"'{name}' is a unit of {unit.dimension}, not of {wanted}", allowed=remedy)
    if name.lower() in _TONS:
        raise UserFault(
            f"'{name}' can mean 1000 kg, 2000 lb or 2240 lb", allowed="write it in kg, t (1 t = 1000 kg) or lb"
        )
    raise UserFault(f"'{name}' is not a unit that is read here", allowed=_meant(name, dimensions) + remedy)


def _meant(name: str, dimensions: tuple[str, ...]) -> str:
    """A "did you mean" for a name that is not in the table, or nothing."""
    names = [unit.name for unit in UNITS.values() if unit.dimension in dimensions and unit.name]
    other_case = [known for known in names if known.lower() == name.lower()]
    if other_case:
        return f"did you mean {other_case[0]} (capitals matter)? "
    plain = name.replace("^", "").replace("**", "").replace(" ", "").replace("l", "L").lower()
    close = [known for known in names if known.replace(" ", "").lower() == plain]
    close += [_SPELLED[name.lower()]] if _SPELLED.get(name.lower()) in names else []
    close += difflib.get_close_matches(name, names, n=1, cutoff=0.7)
    return f"did you mean {close[0]}? " if close else ""


def _with_article(dimension: str) -> str:
    return f"an {dimension}" if dimension[0] in "aeiou" else f"a {dimension}"
