"""The material table: every row sound and honestly sourced, against published figures and element tables."""

from __future__ import annotations

import math
import re
from pathlib import Path

import chemicals
import numpy as np
import periodictable
import pytest
from ruamel.yaml import YAML
from scipy import stats

from scanmass import seeds
from scanmass.errors import UserFault
from scanmass.materials import MARKS, Material, find, materials, search, wood_density

SOURCES_READ = {
    "published general engineering tables",
    "OpenStax University Physics Volume 1, tables 14.1 and 14.2",
    "element tables after the CRC Handbook",
    "published stone and building tables, citing Cardarelli 2018, CRC and Geological Society 1999",
    "IAPWS-95 formulation",
}
"""What the ranges marked P or Q may name; anything else is from memory and must say so."""


# Every row


def test_rows_name_only_what_was_read() -> None:
    for row in materials():
        if row.mark == "M":
            assert row.source == "value from memory", row
        elif row.mark == "T":
            assert row.source == "common practice, no source", row
        else:
            assert set(row.source.split("; ")) <= SOURCES_READ, row
        assert row.origin().startswith(row.source)


def test_rows_say_how_their_range_was_chosen() -> None:
    for row in materials():
        # A published range stands by its source; one from memory needs its reason beside it.
        assert row.note or row.mark in "PQ", row
        assert "%" not in row.source, row


def test_rows_are_found_by_all_their_names() -> None:
    for row in materials():
        for name in (row.name, *row.aliases, row.name.upper(), f" {row.name} "):
            assert find(name) is row
            assert row in search(name)


def test_names_can_stand_in_a_pipeline_file() -> None:
    yaml = YAML()
    for row in materials():
        for name in (row.name, *row.aliases):
            assert yaml.load(f"{{material: {name}}}") == {"material": name}


def test_castings_say_that_porosity_lowers_them() -> None:
    for row in materials():
        assert row.casting == row.family.startswith("cast ")
        assert not row.casting or ("orosity" in row.note and "only lower" in row.note), row
        codes = [note.code for note in row.assumptions()]
        assert codes == ["density-range", "porosity-lowers-density"][: 1 + row.casting]


def test_table_is_wide_enough() -> None:
    families = {row.family for row in materials()}
    assert len(materials()) >= 60
    assert {"cast iron", "cast copper alloy", "stone", "wood", "plaster and mortar", "ceramic", "fill"} <= families


def test_ranges_are_the_rows_own() -> None:
    # No blanket percentage: the relative widths of the rows are many different numbers.
    shares = [round((row.high_kg_m3 - row.low_kg_m3) / (row.high_kg_m3 + row.low_kg_m3), 4) for row in materials()]
    commonest = max(shares.count(share) for share in shares)
    assert commonest <= 6


def test_the_table_is_one_file_of_the_package() -> None:
    path = Path(__file__).parents[2] / "scanmass" / "materials" / "table.csv"
    assert len(path.read_text(encoding="utf-8").splitlines()) == len(materials()) + 1


# Against figures from outside


@pytest.mark.parametrize(
    ("name", "low", "high"),
    # Published general engineering tables, and published stone and building tables that cite Cardarelli 2018, CRC and
    # Geological Society 1999 (read where they are quoted).
    [
        ("cast iron", 6800, 7800),
        ("grey cast iron", 6600, 7400),
        ("white cast iron", 7400, 7700),
        ("malleable cast iron", 7200, 7400),
        ("cast steel", 7800, 7850),
        ("stainless steel", 7480, 8000),
        ("bronze", 7400, 8900),
        ("phosphor bronze", 8780, 8920),
        ("aluminium bronze", 7700, 8700),
        ("cast brass", 8400, 8700),
        ("light aluminium alloy", 2560, 2800),
        ("magnesium alloy", 1760, 1870),
        ("marble", 2600, 2800),
        ("granite", 2640, 2760),
        ("hard limestone", 2100, 2760),
        ("soft limestone", 1200, 2200),
        ("sandstone", 1600, 2650),
        ("slate", 2700, 2950),
        ("basalt", 2800, 3200),
        ("dolomite", 2760, 2840),
        ("gneiss", 2500, 3000),
        ("dry sand", 1600, 1700),
    ],
)
def test_published_ranges_are_kept(name: str, low: float, high: float) -> None:
    row = find(name)
    assert (row.low_kg_m3, row.high_kg_m3) == (low, high)
    assert row.mark in "PQ"


@pytest.mark.parametrize(
    ("name", "figure"),
    [
        # OpenStax University Physics Volume 1, tables 14.1 and 14.2. All lie within; none needs an exception.
        ("aluminium", 2700),
        ("brass", 8440),
        ("copper", 8920),
        ("concrete", 2400),
        ("glass", 2600),
        ("granite", 2700),
        ("iron", 7860),
        ("lead", 11300),
        ("oak", 710),
        ("pine", 373),
        ("ice", 917),
        ("water", 999.8),
        ("water", 1000.0),
        ("water", 998.2),
        ("sea water", 1030),
        ("gold", 19300),
        # Published general engineering tables.
        ("rolled steel", 7850),
        ("lead", 11340),
        ("zinc", 7135),
        ("tin", 7280),
        # Published stone and building tables (quoted).
        ("moulded plaster", 1250),
        ("concrete", 2300),
        ("beeswax", 961),
        ("red brick", 1922),
        ("mortar", 2162),
        # Values from memory.
        ("C83600", 8830),
        ("C87300", 8530),
        ("C90500", 8720),
        ("bell metal", 8640),
        ("gypsum alabaster", 2310),
        ("calcite alabaster", 2700),
        ("titanium 6Al-4V", 4430),
        # Baker & Haynes, Engineering Statics, chapter 7: steel at 493 lb/ft3.
        ("steel", 493 * 0.45359237 / 0.3048**3),
    ],
)
def test_single_figures_lie_within(name: str, figure: float) -> None:
    row = find(name)
    assert row.low_kg_m3 <= figure <= row.high_kg_m3


@pytest.mark.parametrize(
    ("name", "low", "high"),
    # Values from memory.
    [
        ("terracotta", 1600, 2100),
        ("cast plaster", 1000, 1450),
        ("epoxy", 1100, 1250),
        ("investment core", 1300, 1800),
        ("medium limestone", 2160, 2560),
    ],
)
def test_remembered_ranges_are_kept_and_marked(name: str, low: float, high: float) -> None:
    row = find(name)
    assert (row.low_kg_m3, row.high_kg_m3, row.mark) == (low, high, "M")


ELEMENTS = [
    ("aluminium", "Al", "7429-90-5"),
    ("copper", "Cu", "7440-50-8"),
    ("gold", "Au", "7440-57-5"),
    ("iron", "Fe", "7439-89-6"),
    ("lead", "Pb", "7439-92-1"),
    ("magnesium", "Mg", "7439-95-4"),
    ("nickel", "Ni", "7440-02-0"),
    ("platinum", "Pt", "7440-06-4"),
    ("silver", "Ag", "7440-22-4"),
    ("tin", "Sn", None),  # the other library carries grey tin only, another substance
    ("titanium", "Ti", "7440-32-6"),
    ("tungsten", "W", "7440-33-7"),
    ("zinc", "Zn", "7440-66-6"),
]


def solid_density(cas: str) -> float:
    """kg/m3 from the molar volume of the CRC table that ``chemicals`` ships."""
    table = Path(chemicals.__file__).parent / "Density" / "CRC Solid Inorganic Constant Densities.tsv"
    volumes = {line.split("\t")[0]: float(line.split("\t")[2]) for line in table.read_text().splitlines()[1:]}
    return float(chemicals.MW(cas)) / 1000 / volumes[cas]


@pytest.mark.parametrize(("name", "symbol", "cas"), ELEMENTS)
def test_pure_metals_against_two_element_tables(name: str, symbol: str, cas: str | None) -> None:
    row = find(name)
    figures = [1000 * getattr(periodictable, symbol).density]
    if cas is not None:
        figures.append(solid_density(cas))
    # The molar mass may have changed since the volumes were worked out: parts in a million.
    assert all(row.low_kg_m3 * (1 - 1e-5) <= figure <= row.high_kg_m3 * (1 + 1e-5) for figure in figures), figures
    assert row.family == "pure metal"


def test_every_pure_metal_is_checked() -> None:
    assert {row.name for row in materials() if row.family == "pure metal"} == {name for name, _, _ in ELEMENTS}


@pytest.mark.parametrize(
    ("name", "cas"), [("gypsum alabaster", "10101-41-4"), ("calcite alabaster", "471-34-1"), ("marble", "471-34-1")]
)
def test_stones_of_one_mineral(name: str, cas: str) -> None:
    # The mineral without pores (CRC, in `chemicals`) lies within, and in the upper half for the porous alabaster.
    row = find(name)
    assert row.low_kg_m3 < solid_density(cas) < row.high_kg_m3


def test_water_by_the_iapws_formulation() -> None:
    row = find("water")
    # 0, 4, 20 and 30 C at one atmosphere.
    for kelvin in (273.15, 277.13, 293.15, 303.15):
        assert row.low_kg_m3 < chemicals.iapws.iapws95_rho(kelvin, 101325.0) < row.high_kg_m3


@pytest.mark.parametrize("row", [row for row in materials() if row.family == "wood"], ids=lambda row: row.name)
def test_woods_by_the_wood_handbook_formula(row: Material) -> None:
    # rho = rho_water G (1 + MC/100), USDA Wood Handbook FPL-GTR-190 (quoted); G and moisture as the note states them.
    numbers = re.search(r"G ([\d.]+) to ([\d.]+), moisture (\d+) to (\d+) %", row.note)
    assert numbers is not None
    least, most, dry, damp = map(float, numbers.groups())
    # The table is rounded to the nearest 5 kg/m3.
    assert row.low_kg_m3 == pytest.approx(wood_density(least, dry / 100), abs=2.5)
    assert row.high_kg_m3 == pytest.approx(wood_density(most, damp / 100), abs=2.5)


def test_wood_density() -> None:
    # Wood Handbook (quoted): G 0.40 at 12 % gives 448 kg/m3.
    assert wood_density(0.40, 0.12) == pytest.approx(448.0, rel=1e-15)
    with pytest.raises(ValueError, match=r"lies within \(0, 1.5\], got 40"):
        wood_density(40, 0.12)
    with pytest.raises(ValueError, match="moisture must be 0 or more"):
        wood_density(0.4, -0.1)


# Use


def test_density_is_alike_anywhere_in_the_range() -> None:
    density = find("cast plaster").density()
    draws = density.draw(seeds.stream(0, "materials"), 20_000)
    assert density.value == 1225.0
    assert density.std == pytest.approx(450 / math.sqrt(12), rel=1e-14)
    # Fixed seed: a right sampler falls below this at one seed in 10 000.
    assert stats.kstest(draws, stats.uniform(1000, 450).cdf).pvalue > 1e-4
    assert np.all((draws >= 1000) & (draws <= 1450))


@pytest.mark.parametrize(
    ("name", "row"),
    [
        ("Gray Iron", "grey cast iron"),
        ("aluminum", "aluminium"),
        ("GUN-METAL", "gun metal C90500"),
        ("Statuary  Bronze", "statuary bronze"),
        ("fiberglass", "glass-fibre reinforced plastic"),
    ],
)
def test_spellings(name: str, row: str) -> None:
    assert find(name).name == row


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("marbel", "material 'marbel' is not in the table; did you mean marble?"),
        ("statury bronze", "did you mean statuary bronze?"),
        ("alabaster", "did you mean gypsum alabaster or calcite alabaster?"),
        ("steel mild", "did you mean mild steel?"),
        ("granit", "did you mean granite or black granite?"),
        ("unobtainium", "is not in the table; 'scanmass materials' lists all"),
        ("", "material '' is not in the table; 'scanmass materials' lists all"),
    ],
)
def test_unknown_material(name: str, words: str) -> None:
    with pytest.raises(UserFault) as caught:
        find(name)
    assert words in str(caught.value)
    assert str(caught.value).endswith("'scanmass materials WORD' searches them")


def test_search() -> None:
    assert {row.name for row in search("plaster")} >= {"cast plaster", "hard plaster", "investment core"}
    assert search("") == materials()
    assert search("no such thing") == ()
    # All the words, in any order, wherever they stand: the note of statuary bronze names silicon bronze.
    assert {row.name for row in search("bronze SILICON")} == {"statuary bronze", "silicon bronze C87300"}


def test_what_is_assumed_is_said_in_a_sentence() -> None:
    notes = find("grey cast iron").assumptions()
    assert notes[0].text == (
        "grey cast iron: any density from 6600 to 7400 kg/m3 is taken as equally likely "
        "(published general engineering tables)."
    )
    assert notes[1].text == (
        "grey cast iron: gas and shrinkage pores in a casting only lower its density, at worst below the range."
    )


def row_with(**changes: object) -> Material:
    fields: dict[str, object] = {
        "name": "clay",
        "aliases": (),
        "family": "ceramic",
        "low_kg_m3": 1500.0,
        "high_kg_m3": 2000.0,
        "source": "value from memory",
        "mark": "M",
        "note": "",
    }
    return Material(**(fields | changes))  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"low_kg_m3": 2000.0}, "clay: no density range: 2000.0 to 2000.0 kg/m3"),
        ({"low_kg_m3": 1.5}, "no density range"),
        ({"high_kg_m3": 30000.0}, "no density range"),
        ({"high_kg_m3": math.nan}, "no density range"),
        ({"mark": "X"}, f"mark 'X' is none of {', '.join(MARKS)}"),
        ({"source": ""}, "source is empty"),
    ],
)
def test_a_row_that_is_not_sound_is_refused(changes: dict[str, object], words: str) -> None:
    with pytest.raises(ValueError, match=re.escape(words)):
        row_with(**changes)
