"""What a reader must know before any table: the bounds, what they rest on, the largest doubt, what to measure next."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

from scanmass.report import wording
from scanmass.report.figures import Ruler, share

Document = dict[str, Any]
MUCH_CLUTTER = 0.05
"""Share of the points taken for clutter above which a reader must know before the figures."""


def sentences(document: Document, mass: Ruler, length: Ruler) -> Iterator[str]:
    """The lines of "Read this first", in order; ``mass`` and ``length`` print in the reader's units."""
    reason = wording.no_bound(document)
    if reason is not None:
        yield f"No bound can be given: {reason}"
    yield from _bounds(document, mass, length)
    unseen = wording.bracket_leads(document)
    if unseen is not None:
        yield unseen
    yield f"Basis: {wording.basis(document)}"
    largest = _largest(document, mass, length)
    if largest:
        yield f"Largest doubt {'; '.join(largest)}."
    advised = document.get("next_measurement")
    if advised is not None:
        yield f"Measure next: {advised['text'][:1].lower()}{advised['text'][1:]}"
    clutter = sum(removed["share"] for removed in document["removed"] if removed["reason"] == "clutter")
    if clutter > MUCH_CLUTTER:
        yield f"{share(clutter)} of the points were taken for clutter and not weighed: look at removed.ply."
    undetermined = sum(not p["determined"] for p in document["principal"])
    if undetermined:
        which = (
            "None of the principal axes can" if undetermined == 3 else f"{undetermined} of the 3 principal axes cannot"
        )
        yield f"{which} be told from this scan; see below."
    yield _lift(document, mass)


def _bounds(document: Document, mass: Ruler, length: Ruler) -> Iterator[str]:
    """The bounds of mass and centre in one sentence, as far as there are any."""
    said = []
    figure = document["mass_kg"]
    if figure["low"] is not None and figure["high"] is not None:
        words = mass.words(figure["value"], figure["low"], figure["high"])
        same = words.ends == mass.same
        said.append(f"mass {words.value}" if same else f"mass {words.ends}")
    centre = document["center_of_mass_m"]
    if centre["low"] is not None and centre["high"] is not None:
        halves = [
            max(value - low, high - value)
            for value, low, high in zip(centre["value"], centre["low"], centre["high"], strict=True)
        ]
        if not all(length.is_nothing(half) for half in halves):
            said.append(f"centre of mass known to ± {length.stds(halves, ' / ')} along x / y / z")
    if said:
        yield f"Bounds: {', '.join(said)}, at {share(document['level'])}, given what is assumed below."


def _largest(document: Document, mass: Ruler, length: Ruler) -> list[str]:
    """For mass and centre the source that is worth most, half ranges against half-widths at the stated level."""
    found = []
    for name, block, key, unit, ruler in (
        ("mass", "mass_kg", "mass", "kg", mass),
        ("centre of mass", "center_of_mass_m", "com", "m", length),
    ):
        sizes, reach = {}, _reach(document[block])
        for row in document["budget"]:
            ends = row["kind"] == "bracket"
            size = row[f"{key}_half_range_{unit}" if ends else f"{key}_std_{unit}"]
            if size is not None:
                sizes[f"{row['source']}{wording.KINDS[row['kind']]}"] = _norm(size) * (1.0 if ends else reach)
        most = max(sizes, key=sizes.__getitem__, default="")
        if most and not ruler.is_nothing(sizes[most]):
            found.append(f"of the {name}: {most}, by itself ± {ruler.std(sizes[most])}")
    return found


def _reach(figure: Document) -> float:
    """Half-width of the random and declared part over its standard deviation."""
    low, high = figure["random"]["low"], figure["random"]["high"]
    if figure["std"] is None or low is None or high is None or _norm(figure["std"]) == 0:
        return 2.0
    width = [b - a for a, b in zip(low, high, strict=True)] if isinstance(low, list) else high - low
    return 0.5 * _norm(width) / _norm(figure["std"])


def _norm(size: float | list[float]) -> float:
    return math.hypot(*size) if isinstance(size, list) else abs(size)


def _lift(document: Document, mass: Ruler) -> str:
    """What a rigger does with the mass; the cautions stand at the end of the summary."""
    solid = any(note["code"] == "solid-throughout" for note in document["assumptions"])
    inside = " Solid is assumed: a hollow, core or filling that was not scanned is in no bound." if solid else ""
    figure = document["mass_kg"]
    if figure["high"] is None:
        return f"Before a lift: weigh it, for the mass below has no upper end.{inside}"
    words = mass.words(figure["value"], figure["low"], figure["high"])
    top = words.value if words.ends == mass.same else words.ends.split(" to ")[-1]
    return f"Before a lift: count on no less than {top}, add rigging, packing, base and water; cautions below.{inside}"
