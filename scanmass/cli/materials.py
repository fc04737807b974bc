"""``scanmass materials``: the density table, each row with its own range and source."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import asdict
from typing import TYPE_CHECKING, Annotated

import typer

from scanmass.cli.options import JsonOption, Units, UnitsOption

if TYPE_CHECKING:
    from scanmass.materials.table import Material
    from scanmass.report.rows import Row, Section


def materials(
    word: Annotated[
        str | None, typer.Argument(metavar="WORD", help="Part of a name, an alias or a family.", show_default=False)
    ] = None,
    units: UnitsOption = Units.metric,
    as_json: JsonOption = False,
) -> int:
    """List materials and their densities.

    Each with the range of its density, the source, and how it is known. A material
    is equally likely anywhere in its range. The name is what a pipeline file takes.

    \b
    Example:
      scanmass materials bronze
    """
    from scanmass.materials import table

    found = table.materials() if word is None else table.search(word)
    if word is not None and not found:
        found = (table.find(word),)  # its fault names the closest
    if as_json:
        print(json.dumps([asdict(material) for material in found], indent=1, ensure_ascii=False))
        return 0
    from scanmass.cli.streams import result_console
    from scanmass.report.terminal import show

    marks = "; ".join(f"[{mark}] {meaning}" for mark, meaning in table.MARKS.items())
    count = "1 material" if len(found) == 1 else f"{len(found)} materials"
    show(f"{count}. {marks}.", _sections(found, units), result_console())
    return 0


def _sections(found: Sequence[Material], units: Units) -> list[Section]:
    from scanmass.report.rows import Section

    families = dict.fromkeys(material.family for material in found)
    return [
        Section(family, "result", tuple(_row(m, units) for m in found if m.family == family)) for family in families
    ]


def _row(material: Material, units: Units) -> Row:
    from scanmass.report.figures import Ruler, number
    from scanmass.report.rows import Row

    ruler = Ruler.of("density", material.high_kg_m3, units.value)
    low, high = (number(end / ruler.si, 4) for end in (material.low_kg_m3, material.high_kg_m3))
    also = f"also: {', '.join(material.aliases)}. " if material.aliases else ""
    note = f" {material.note}" if material.note else ""
    return Row(
        material.name, f"{low} to {high} {ruler.unit}", remark=f"{also}[{material.mark}] {material.source}.{note}"
    )
