"""The closed table of units, the grammar of quantities, and how figures are printed."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
import pint
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from scanmass import units
from scanmass.doubt import Figure
from scanmass.errors import UserFault
from scanmass.units.quantity import LIMITS

STEADY = settings(derandomize=True, deadline=None, suppress_health_check=[HealthCheck.too_slow])
"""The same examples at every run, however busy the machine."""
PINT_NAMES = {"in": "inch", "µm": "um", "μm": "um", "L": "liter", "t": "metric_ton", "°": "deg", "%": "percent"}
"""Our names that the other library spells otherwise."""
SI_OF = {
    "length": "m",
    "mass": "kg",
    "force": "N",
    "density": "kg/m**3",
    "area": "m**2",
    "volume": "m**3",
    "inertia": "kg*m**2",
    "angle": "rad",
    "ratio": "",
}


def fault_of(text: str, dimension: str = "length") -> str:
    with pytest.raises(UserFault) as caught:
        units.parse(text, dimension)
    return str(caught.value)


# The table


def for_pint(name: str) -> str:
    """``kg mm2`` as ``kg*mm**2``, ``g/cm³`` as ``g/cm**3``."""
    parts = []
    for part in name.replace("/", " / ").replace("³", "3").split():
        base, power = part.rstrip("23"), part[len(part.rstrip("23")) :]
        parts.append(PINT_NAMES.get(base, base) + (f"**{power}" if power else ""))
    return " ".join(parts).replace(" / ", "/").replace(" ", "*")


@pytest.fixture(scope="module")
def registry() -> pint.UnitRegistry:
    return pint.UnitRegistry()


@pytest.mark.parametrize("name", [name for name in units.UNITS if name])
def test_factor_agrees_with_another_library(name: str, registry: pint.UnitRegistry) -> None:
    unit = units.UNITS[name]
    theirs = registry.Quantity(1.0, for_pint(name)).to(SI_OF[unit.dimension]).magnitude
    # Theirs is a chain of float products: a few roundings.
    assert float(unit.factor) == pytest.approx(theirs, rel=1e-14)


def test_table_is_closed_and_sourced() -> None:
    assert 40 <= len(units.UNITS) <= 60
    assert all(unit.source and unit.factor > 0 for unit in units.UNITS.values())
    assert {unit.dimension for unit in units.UNITS.values()} == set(LIMITS)


@pytest.mark.parametrize("dimension", sorted(LIMITS))
def test_the_si_unit_comes_first(dimension: str) -> None:
    first = units.allowed(dimension).split(", ")[0].replace("a bare number", "")
    assert units.UNITS[first].factor == 1


@pytest.mark.parametrize(
    ("name", "metres"),
    # 1959 agreement: 1 yd = 0.9144 m exactly, hence 1 ft = 0.3048 m and 1 in = 0.0254 m.
    [("m", 1.0), ("cm", 0.01), ("mm", 1e-3), ("um", 1e-6), ("in", 0.0254), ("inch", 0.0254), ("ft", 0.3048)],
)
def test_metres_per(name: str, metres: float) -> None:
    assert units.metres_per(name) == metres


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("MM", "'MM' is not a unit that is read here; did you mean mm (capitals matter)?"),
        ("inches", "did you mean in?"),
        ("millimetres", "did you mean mm?"),
        ("kg", "'kg' is a unit of mass, not of length; allowed for a length: m, cm, mm, um, in, inch, ft, thou"),
        ("", "no unit is given; allowed for a length: m, cm, mm"),
        ("furlong", "'furlong' is not a unit that is read here; allowed for a length: m, cm"),
        ("ton", "'ton' can mean 1000 kg, 2000 lb or 2240 lb; write it in kg, t (1 t = 1000 kg) or lb"),
    ],
)
def test_unknown_length_unit(name: str, words: str) -> None:
    with pytest.raises(UserFault) as caught:
        units.metres_per(name)
    assert words in str(caught.value)


# Quantities


@pytest.mark.parametrize(
    ("text", "dimension", "value"),
    [
        ("12 mm", "length", 0.012),
        ("12mm", "length", 0.012),
        (" 12\tmm ", "length", 0.012),
        (".030 in", "length", 0.000762),
        ("+1.2e3 kg/m3", "density", 1200.0),
        ("7.85 g/cm3", "density", 7850.0),
        ("7.85 g/cm³", "density", 7850.0),
        ("0.5 lb/in3", "density", float(Fraction("0.5") * Fraction("0.45359237") / Fraction("0.0254") ** 3)),
        ("2 t", "mass", 2000.0),
        ("95 %", "ratio", 0.95),
        ("95%", "ratio", 0.95),
        ("0.95", "ratio", 0.95),
        ("-30 deg", "angle", -math.pi / 6),
        ("0 mm", "length", 0.0),
    ],
)
def test_plain_values_are_exact(text: str, dimension: str, value: float) -> None:
    figure = units.parse(text, dimension)
    assert (figure.value, figure.spread, figure.std) == (value, "exact", 0.0)


@pytest.mark.parametrize("text", ["5.0 ± 0.8 mm", "5.0 +/- 0.8 mm", "5 mm ± 800 um", "5.0±0.8mm", "0.5 cm ± 0.8 mm"])
def test_plus_minus_is_the_half_width_at_95_per_cent(text: str) -> None:
    figure = units.parse(text, "length")
    assert (figure.value, figure.std, figure.spread) == (0.005, 0.0004, "normal")
    assert figure.limits == (0.0, np.inf)


@pytest.mark.parametrize("text", ["4 to 9 mm", "4 mm to 9 mm", "0.4 cm to 9 mm"])
def test_range_is_alike_anywhere(text: str) -> None:
    figure = units.parse(text, "length")
    assert (figure.low, figure.high, figure.spread) == (0.004, 0.009, "uniform")
    assert figure.value == pytest.approx(0.0065, rel=1e-15)
    assert figure.std == pytest.approx(0.005 / math.sqrt(12), rel=1e-14)


def test_the_readings_a_general_library_gets_wrong() -> None:
    # DESIGN section 3: it read these as 74.3 kg, 15 mm and a short ton.
    assert units.parse("148.6 ± 0.5 kg", "mass").value == 148.6
    assert "write '1.5 mm'" in fault_of("1,5 mm")
    assert "can mean 1000 kg" in fault_of("2 ton", "mass")


def test_ratio_with_doubt() -> None:
    assert units.parse("1 ± 0.0004", "ratio").std == 0.0002
    assert units.parse("95 % ± 1 %", "ratio").std == 0.005
    assert units.parse("90 to 95 %", "ratio").low == 0.9


def test_force_for_a_mass_is_listed() -> None:
    # 1 kgf is the weight of 1 kg under standard gravity, 9.80665 m/s2 (3rd CGPM 1901): exact.
    figure, notes = units.parse_noted("100 ± 2 kgf", "mass")
    assert (figure.value, figure.std) == (100.0, 1.0)
    assert [note.code for note in notes] == ["force-as-mass"]
    assert notes[0].text == (
        "'100 ± 2 kgf' is a force; it is taken as the weight of 100 kg, with standard gravity 9.80665 m/s2."
    )
    assert units.parse("980.665 N", "mass").value == 100.0
    assert units.parse("1 lbf", "mass").value == 0.45359237
    assert units.parse_noted("100 kg", "mass")[1] == ()
    assert "'kg' is a unit of mass, not of force" in fault_of("100 kg", "force")


def test_limits_are_the_callers() -> None:
    assert units.parse("-5 ± 1 mm", "length", limits=(-np.inf, np.inf)).value == -0.005
    assert "is negative; this length is 0 or more" in fault_of("-5 ± 1 mm")
    with pytest.raises(UserFault, match=r"is above 1 \(SI\); this ratio is 1 or less"):
        units.parse("120 %", "ratio", limits=(0.0, 1.0))
    with pytest.raises(UserFault, match=r"is below 0\.5 \(SI\); this ratio is 0.5 or more"):
        units.parse("0.4 to 0.9", "ratio", limits=(0.5, 1.0))
    assert units.parse("5 ± 20 mm", "length").low == 0.0
    with pytest.raises(ValueError, match="no dimension 'colour'"):
        units.parse("5 mm", "colour")


REFUSALS = [
    ("1,5 mm", "has a comma; decimals take a point, thousands no mark: write '1.5 mm'"),
    ("1,500 mm", "write '1500 mm' or '1.500 mm'"),
    ("1,500.5 mm", "write '1500.5 mm'"),
    ("1,500,000 mm", "write '1500000 mm'"),
    ("1.234,5 mm", "has a comma; decimals take a point, thousands no mark"),
    ("1.234.567 mm", "has more than one number before the unit"),
    ("1 500 mm", "write one number without gaps"),
    ("1_500 mm", "write one number without gaps"),
    ("12", "'12': no unit is given; allowed for a length: m, cm, mm"),
    ('12"', "has a quote mark; write in for inches and ft for feet"),
    ("5'", "has a quote mark"),
    ("12”", "right double quotation mark; write in for inches"),
    ("12 MM", "'MM' is not a unit that is read here; did you mean mm (capitals matter)?"),
    ("12 inches", "did you mean in?"),
    ("12 kg", "'kg' is a unit of mass, not of length"),
    ("12 furlong", "'furlong' is not a unit that is read here; allowed for a length"),
    ("−5 mm", "minus sign; write a plain '-'"),
    ("4–9 mm", "en dash; write 'to' for a range"),
    ("12\u00a0mm", "no-break space; write a plain space"),
    ("12\u200bmm", "zero width space; write plain letters and digits"),
    ("１２ mm", "fullwidth digit one; write plain digits"),
    ("١٢ mm", "arabic-indic digit one; write plain digits"),
    ("12 mm²", "superscript two; write a plain 2"),
    ("1.2×10 mm", "multiplication sign; write the number with an exponent"),
    ("12 ㎜", "square mm; write plain letters and digits"),
    ("12 mм", "cyrillic small letter em; write plain letters and digits"),
    ("5 ± -0.8 mm", "has a negative doubt"),
    ("9 to 4 mm", "runs from high to low; write '4 mm to 9 mm'"),
    ("4 to 4 mm", "is a range of no width; write the number alone"),
    ("nan mm", "has 'nan mm' where a plain number belongs"),
    ("inf mm", "has 'inf mm' where a plain number belongs"),
    ("5 ± nan mm", "has 'nan mm' where a plain number belongs"),
    ("1e999 mm", "1e999 mm is out of all range; check the exponent"),
    ("1e-400 mm", "is out of all range"),
    ("1e9999 mm", "has more than one number before the unit"),
    ("", "nothing is given; a number and its unit are needed, like '12 mm'"),
    (" \t ", "nothing is given"),
    ("± 5 mm", "has nothing where a number belongs; write it like '12 mm'"),
    ("5 ±", "has nothing where a number belongs"),
    ("~5 mm", "has '~5 mm' where a plain number belongs"),
    ("5 +- 1 mm", "'+-' is not read; write '±' or '+/-'"),
    ("5 ± 1 ± 1 mm", "has '±' more than once"),
    ("4 to 9 to 12 mm", "has 'to' more than once"),
    ("4-9 mm", "looks like a range; write a range like '4 to 9 mm'"),
    ("4..9 mm", "looks like a range"),
    ("5. mm", "has a point without decimals; write '5' or '5.0'"),
    ("1/2 in", "has a fraction; write it as a decimal: 0.5"),
    ("1 3/8 in", "has a fraction; write it as a decimal: 1.375"),
    ("1/0 in", "has a fraction; write it as a decimal"),
    ("5 ft 3 in", "has more than one number and unit"),
    ("5 mm ± 0.1", "has no unit at its end; write '... 0.1 mm'"),
    ("1250 ± 5 %", "in per cent, which can be read two ways; write the doubt in the unit itself: '1250 ± 62.5 UNIT'"),
    ("80 mm ± 5 %", "write the doubt in the unit itself: '80 ± 4 mm'"),
]


@pytest.mark.parametrize(("text", "words"), REFUSALS, ids=lambda part: ascii(part))
def test_refused_with_the_fix(text: str, words: str) -> None:
    assert words in fault_of(text)


@pytest.mark.parametrize(
    ("text", "dimension", "words"),
    [
        (
            "2 Kg",
            "mass",
            "did you mean kg (capitals matter)? allowed for a mass: kg, g, t, lb, oz; allowed for a force",
        ),
        ("2 tons", "mass", "'tons' can mean 1000 kg, 2000 lb or 2240 lb"),
        ("3 lbs", "mass", "did you mean lb?"),
        ("1 kg to 1 N", "mass", "mixes mass and force; use one unit"),
        ("0 kg/m3", "density", "is zero; a density is above zero"),
        ("7 kg/m^3", "density", "did you mean kg/m3?"),
        ("7 kg / m3", "density", "did you mean kg/m3?"),
        ("7 g/cc", "density", "did you mean g/cm3?"),
        ("95 ± 1 %", "ratio", "can be read two ways; write '95 % ± 1 %', or both as bare numbers"),
        ("1 % ± 0.001", "ratio", "mixes units; give both numbers in per cent, or both bare"),
        ("95 percent", "ratio", "did you mean %?"),
        ("1 mm", "ratio", "'mm' is a unit of length, not of ratio; allowed for a ratio: a bare number, %, ppm"),
        ("", "ratio", "nothing is given"),
        ("x", "ratio", "write it like '95 %', '1 ± 0.0004' or '0.2 to 0.3'"),
    ],
)
def test_refused_in_other_dimensions(text: str, dimension: str, words: str) -> None:
    assert words in fault_of(text, dimension)


NUMBERS = st.decimals(min_value="1e-3", max_value="1e6", allow_nan=False, allow_infinity=False, places=6)
NAMES = st.sampled_from([name for name in units.UNITS if name])


@STEADY
@given(NUMBERS, NAMES)
def test_a_number_is_rounded_once(number: object, name: str) -> None:
    unit = units.UNITS[name]
    value = units.parse(f"{number} {name}", unit.dimension).value
    assert value == float(Fraction(str(number)) * unit.factor)


@STEADY
@given(NUMBERS, st.floats(0.001, 0.4), NAMES)
def test_what_is_printed_reads_back(number: object, share: float, name: str) -> None:
    unit = units.UNITS[name]
    value = float(str(number))
    exact = units.parse(f"{number} {name}", unit.dimension)
    # Ten significant digits are printed, half a unit of the last is lost, and as much again in the unit change.
    again = units.parse(units.show(exact, name), unit.dimension)
    assert again.value == pytest.approx(exact.value, rel=1e-9)
    doubtful = units.parse(f"{number} {name} ± {value * share:.12f} {name}", unit.dimension)
    again = units.parse(units.show(doubtful, name).replace(" ±", f" {name} ±"), unit.dimension)
    # Two digits of the doubt: at most 5 % of it (0.05 of 1.0), for the value as for the doubt itself.
    assert again.std == pytest.approx(doubtful.std, rel=0.051)
    assert abs(again.value - doubtful.value) <= 0.051 * 2 * doubtful.std


@STEADY
@given(st.text(max_size=12), st.sampled_from(sorted(LIMITS)))
def test_any_text_is_read_or_refused(text: str, dimension: str) -> None:
    try:
        figure = units.parse(text, dimension)
    except UserFault:
        return
    assert np.isfinite(figure.value)


@STEADY
@given(st.text(alphabet="0123456789+-/±.,e %togmkN'\"", max_size=14), st.sampled_from(["length", "mass", "ratio"]))
def test_any_near_miss_is_read_or_refused(text: str, dimension: str) -> None:
    try:
        figure = units.parse(text, dimension)
    except UserFault:
        return
    assert "," not in text
    assert np.isfinite(figure.value)


# Points and directions


def test_point() -> None:
    assert units.parse_point("120 0 -300 mm").tolist() == [0.12, 0.0, -0.3]
    assert units.parse_point("1 2.5 3e1 in").tolist() == [0.0254, 0.0635, 0.762]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("120 0 300", "'120 0 300': no unit is given; allowed for a length"),
        ("120 0 mm", "is not a point; write three numbers and one unit, like '120 0 300 mm'"),
        ("1 2 3 4 mm", "is not a point"),
        ("120, 0, 300 mm", "has a comma"),
        ("1,5 0 0 mm", "write '1.5 0 0 mm'"),
        ("1 2 3 kg", "'kg' is a unit of mass, not of length"),
        ("1 2 3 MM", "did you mean mm (capitals matter)?"),
        ("nan 0 0 mm", "is not a point"),
        ("1e300 0 0 mm", "is farther than 1e9 m away"),
        ("1e999 0 0 mm", "is farther than 1e9 m away"),
        ("", "nothing is given"),
    ],
)
def test_point_refused(text: str, words: str) -> None:
    with pytest.raises(UserFault) as caught:
        units.parse_point(text)
    assert words in str(caught.value)


@STEADY
@given(st.tuples(*[st.floats(-1e6, 1e6)] * 3).filter(lambda v: max(map(abs, v)) > 1e-6))
def test_direction_is_the_unit_vector(vector: tuple[float, float, float]) -> None:
    direction = units.parse_direction(" ".join(f"{part:.17g}" for part in vector))
    # A norm of three numbers and one division: a few units in the last place.
    np.testing.assert_allclose(direction, np.array(vector) / np.linalg.norm(vector), atol=1e-15)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("0 0 0", "has no length; write three bare numbers, like '0 0 1'"),
        ("0 0 1 mm", "has a unit; a direction has none"),
        ("z", "is not a direction; write three bare numbers"),
        ("0 1", "is not a direction"),
        ("inf 0 0", "is not a direction"),
    ],
)
def test_direction_refused(text: str, words: str) -> None:
    with pytest.raises(UserFault) as caught:
        units.parse_direction(text)
    assert words in str(caught.value)


# Printing


@pytest.mark.parametrize(
    ("value", "half_width", "shown"),
    # GUM 7.2.6 (value from memory): at most two digits of uncertainty, the value to the same place.
    [
        (148.6372, 0.5291, ("148.64", "0.53")),
        (1234.5, 567.0, ("1230", "570")),
        (2.0, 0.0996, ("2.00", "0.10")),
        (9.99, 9.96, ("10", "10")),
        (0.0, 0.012, ("0.000", "0.012")),
        (-0.0001, 0.5, ("0.00", "0.50")),
        (-3.14159, 0.001, ("-3.1416", "0.0010")),
        (7.25, 0.0, ("7.25", "0")),
        (1e6, 12345.0, ("1000000", "12000")),
    ],
)
def test_rounded(value: float, half_width: float, shown: tuple[str, str]) -> None:
    assert units.rounded(value, half_width) == shown


@pytest.mark.parametrize(("value", "half_width"), [(math.nan, 1.0), (1.0, math.inf), (1.0, -1.0)])
def test_rounded_refuses(value: float, half_width: float) -> None:
    with pytest.raises(ValueError, match="cannot round"):
        units.rounded(value, half_width)


@pytest.mark.parametrize(
    ("figure", "unit", "text"),
    [
        (units.parse("148.6 ± 0.5 kg", "mass"), "kg", "148.6 ± 0.5 kg"),
        (units.parse("148.64 ± 0.5 kg", "mass"), "kg", "148.64 ± 0.50 kg"),
        (units.parse("148.6 ± 0.5 kg", "mass"), "lb", "327.6 ± 1.1 lb"),
        (units.parse("5.0 ± 0.8 mm", "length"), "mm", "5.0 ± 0.8 mm"),
        (units.parse("4 to 9 mm", "length"), "mm", "4 to 9 mm"),
        (units.parse("4 to 9 mm", "length"), "in", "0.1574 to 0.3544 in"),
        (units.parse("8450 to 8900 kg/m3", "density"), "lb/ft3", "527.5 to 555.7 lb/ft3"),
        (units.parse("0.1003 to 0.2 in", "length"), "in", "0.1003 to 0.2 in"),
        (units.parse("1e-5 to 3e-5", "ratio"), "", "1e-05 to 3e-05"),
        (units.parse("25.4 mm", "length"), "in", "1 in"),
        (units.parse("1 ± 0.0004", "ratio"), "", "1.0000 ± 0.0004"),
        (units.parse("95 %", "ratio"), "%", "95 %"),
        (Figure(148.5712, 0.27, 148.02, 149.11), "kg", "148.57 ± 0.55 kg"),
        (Figure(100.0, 3.0, 92.041, 104.009), "kg", "100.0 [92.0, 104.1] kg"),
        (Figure(100.0, None, 100.0, 104.0), "kg", "100.0 [100.0, 104.0] kg"),
        (Figure(2.345e-6, 1e-8, 2.325e-6, 2.365e-6), "kg m2", "2.345e-6 ± 0.020e-6 kg m2"),
        (Figure(2.345e-6, None, 2.301e-6, 2.365e-6), "kg m2", "2.345e-6 [2.301e-6, 2.365e-6] kg m2"),
        (Figure(0.1234567891), "mm", "123.457 mm (no bound)"),
        (Figure(5.0, 0.0, 5.0, 5.0), "kg", "5 kg"),
    ],
)
def test_show(figure: Figure, unit: str, text: str) -> None:
    assert units.show(figure, unit) == text


@STEADY
@given(st.floats(-1e3, 1e3), st.floats(1e-6, 1e3), st.floats(1e-6, 1e3))
def test_a_printed_interval_never_claims_more(value: float, below: float, above: float) -> None:
    low, high = value - below, value + above
    text = units.show(Figure(value, None, low, high), "kg")
    if "[" in text:
        ends = [float(end) for end in text[text.index("[") + 1 : text.index("]")].split(", ")]
        # Values are carried to 12 digits: 1e-12 of the size is lost there.
        slack = 1e-12 * max(abs(low), abs(high))
        assert ends[0] <= low + slack
        assert ends[1] >= high - slack


def test_arrays_are_not_shown() -> None:
    with pytest.raises(ValueError, match="single figures"):
        units.show(Figure(np.zeros(3)), "kg")


@pytest.mark.parametrize("name", ["metric", "us"])
def test_systems_name_a_unit_of_each_dimension(name: str) -> None:
    chosen = units.system(name)
    assert set(chosen) == set(LIMITS)
    assert all(units.UNITS[unit].dimension == dimension for dimension, unit in chosen.items())
