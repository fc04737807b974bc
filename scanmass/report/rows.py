"""A result as rows of text, made once and printed many ways."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from typing import Any, Literal, Protocol

from scanmass.report import lead, wording
from scanmass.report.figures import EXACT, UNKNOWN_DOUBT, Ruler, System, share

Document = dict[str, Any]
LEAST_NAMED = 1e-3
"""Shares of the doubt below this are not told apart."""
Kind = Literal["lead", "result", "measured", "bracketed", "declared", "assumed", "declined", "warning", "caution"]


class Understood(Protocol):
    """A quantity of the pipeline file as it was understood."""

    @property
    def key(self) -> str: ...
    @property
    def text(self) -> str: ...


@dataclass(frozen=True)
class Row:
    """One line: what, its value, its bounds, and a remark. Any but the first may be empty."""

    label: str
    value: str = ""
    bounds: str = ""
    remark: str = ""


@dataclass(frozen=True)
class Section:
    """Rows that belong together; ``kind`` tells how sure a reader may be, ``note`` how to read them."""

    title: str
    kind: Kind
    rows: tuple[Row, ...]
    note: str = field(default="")


@dataclass(frozen=True)
class Rulers:
    """The units one result is printed in."""

    mass: Ruler
    length: Ruler
    volume: Ruler
    area: Ruler
    inertia: Ruler
    density: Ruler

    @classmethod
    def of(cls, document: Document, name: System) -> Rulers:
        """The units that suit the sizes in ``document``."""
        moments = [p["moment_kg_m2"]["value"] for p in document["principal"]]
        area = document["surface"]["area_m2"]
        noise = document["noise"]
        same = EXACT if noise["basis"] == "declared" and noise["std_m"] == 0 else UNKNOWN_DOUBT
        return cls(
            Ruler.of("mass", document["mass_kg"]["value"], name, same),
            Ruler.of("length", area**0.5, name, same),
            Ruler.of("volume", document["volume_m3"]["value"], name, same),
            Ruler.of("area", area, name),
            Ruler.of("inertia", max(moments), name, same),
            Ruler.of("density", document["density"]["mean_kg_m3"]["value"], name),
        )


def rows(document: Document, name: System = "metric", understood: Iterable[Understood] = ()) -> tuple[Section, ...]:
    """The sections of a summary, in the order they are read; empty ones are left out.

    Parameters
    ----------
    document
        A valid ``result.json``.
    name
        "metric" (kg, mm) or "us" (lb, in).
    understood
        The quantities of the pipeline file, to be echoed.
    """
    use = Rulers.of(document, name)
    sections = (
        Section("Read this first", "lead", tuple(Row(text) for text in lead.sentences(document, use.mass, use.length))),
        Section("Warnings", "warning", tuple(_notes(document["warnings"]))),
        Section("Weight and volume", "result", tuple(_weight(document, use)), _level(document)),
        Section("Centre of mass", "result", tuple(_centre(document, use)), "In the coordinates of the first scan."),
        Section(wording.bracketed(document), "bracketed", tuple(_bracketed(document, use)), _BRACKET),
        Section("Where the doubt comes from", "result", tuple(_budget(document, use)), _dominant(document, use)),
        Section("Principal moments and axes", "result", tuple(_principal(document, use)), _TURNING),
        Section("Inertia tensor", "result", tuple(_inertia(document, use)), _sign(document)),
        Section("Measured: the scan", "measured", tuple(_scan(document, use))),
        Section("Taken away before weighing", "measured", tuple(_removed(document))),
        Section("Declared: quantities as understood", "declared", tuple(Row(q.key, q.text) for q in understood), _READ),
        Section("Assumed", "assumed", tuple(_notes(document["assumptions"]))),
        Section("Declined: not claimed", "declined", tuple(_declined(document))),
        Section("Before you lift", "caution", tuple(Row(text) for text in wording.CAUTIONS)),
    )
    return tuple(section for section in sections if section.rows)


_TURNING = "How hard it is to set turning about its centre of mass: least, middle and greatest, and the axis of each."
_READ = "As read from the pipeline file, in metric units."
_BRACKET = "Least and greatest over all it could be, taken alone. Not random: no percentage attaches to it."


def _level(document: Document) -> str:
    if wording.no_bound(document) is not None:
        return "Best figures only: no bound is claimed, so nothing is known of how far off they are."
    return f"Bounds are at {share(document['level'])}, given what is assumed below; scanmass rehearse tries them."


def _sign(document: Document) -> str:
    return (
        f"About the centre of mass, along the axes of the scan; {document['inertia_kg_m2']['sign']}, so that products "
        "carry the minus sign: Ixy = -integral x y dm."
    )


def _dominant(document: Document, use: Rulers) -> str:
    rulers = (("mass", use.mass), ("com", use.length))
    most = " ".join(filter(None, (wording.dominant(document, of, ruler) for of, ruler in rulers)))
    return f"{most} Below: one standard deviation of each source, and its share." if most else ""


def _figure(label: str, figure: Document, ruler: Ruler, remark: str = "") -> Row:
    words = ruler.words(figure["value"], figure["low"], figure["high"])
    return Row(label, words.value, words.ends, remark)


def _axes(label: str, figure: Document, ruler: Ruler) -> Iterator[Row]:
    for k, axis in enumerate("xyz"):
        low, high = (None if figure[end] is None else figure[end][k] for end in ("low", "high"))
        words = ruler.words(figure["value"][k], low, high)
        yield Row(f"{label}{axis}", words.value, words.ends)


def _weight(document: Document, use: Rulers) -> Iterator[Row]:
    yield _figure("mass", document["mass_kg"], use.mass)
    yield _figure("volume", document["volume_m3"], use.volume)
    yield _figure("mean density", document["density"]["mean_kg_m3"], use.density)
    parts = document["density"]["parts"]
    for part in parts if len(parts) > 1 else ():
        yield Row(f"of it {part['name']}", f"{use.mass.plain(part['mass_kg'])} {use.mass.unit}")


def _centre(document: Document, use: Rulers) -> Iterator[Row]:
    centre = document["center_of_mass_m"]
    yield from _axes("", centre, use.length)
    height = centre.get("height_above_base_m")
    if height is not None:
        yield _figure("height above the base", height, use.length)
    for offset in centre.get("offsets", ()):
        yield from _axes(f"from {offset['name']}: ", offset["offset_m"], use.length)
    region = centre["region"]
    if region is not None and not all(use.length.is_nothing(radius) for radius in region["radii_m"]):
        radii = use.length.stds(region["radii_m"], " x ")
        remark = f"{share(region['level'])} region of the random and declared doubt, all three axes together"
        if centre["bracket"] is not None:
            remark += "; what is bracketed comes on top"
        yield Row("region, half-axes", "", radii, remark)


def _principal(document: Document, use: Rulers) -> Iterator[Row]:
    said = [wording.direction(principal) for principal in document["principal"]]
    for k, (label, principal) in enumerate(zip(("least", "middle", "greatest"), document["principal"], strict=True)):
        # Moments that share a plane, or have no axis at all, share a sentence: it stands under the last of them.
        remark = "" if said[k] in said[k + 1 :] else said[k]
        yield _figure(label, principal["moment_kg_m2"], use.inertia, remark)


def _inertia(document: Document, use: Rulers) -> Iterator[Row]:
    tensor = document["inertia_kg_m2"]
    for i, j in ((0, 0), (1, 1), (2, 2), (0, 1), (1, 2), (0, 2)):
        ends = {end: None if tensor[end] is None else tensor[end][i][j] for end in ("low", "high")}
        yield _figure(f"I{'xyz'[i]}{'xyz'[j]}", {"value": tensor["value"][i][j], **ends}, use.inertia)


def _scan(document: Document, use: Rulers) -> Iterator[Row]:
    for scan in document["scans"]:
        how = "declared" if scan["unit_from"] == "declared" else f"from the {scan['unit_from']}"
        views = "1 view" if scan["views"] == 1 else f"{scan['views']} views"
        used = f"{scan['points_used']} of {scan['points']} points used, {views}"
        yield Row(scan["file"], f"read in {scan['unit']} ({how})", "", used)
    surface = document["surface"]
    shells = "1 shell" if surface["shells"] == 1 else f"{surface['shells']} shells"
    made = "reconstructed from points" if surface["source"] == "points" else "the mesh of the scan itself"
    detail = f"{made}: {surface['triangles']} triangles, {shells}; {wording.underside(document)}"
    yield Row("surface", use.area.words(surface["area_m2"], None, None).value, "", detail)
    seen = surface["observed_fraction"]
    yield Row("seen", f"{share(seen)} of the area", "", f"inferred, where no point lies near: {share(1 - seen)}")
    if document["frame"]["up"] is not None:
        found = {"declared": "declared", "support": "square to the support that was found"}
        yield Row("up", wording.triple(document["frame"]["up"]), "", found[document["frame"]["up_from"]])
    if document.get("views") is not None:
        yield Row("views", remark=wording.views(document, use.length))
    yield Row("noise", remark=wording.noise(document, use.length))
    difference = document["checks"]["routes_relative_difference"]
    known = [d for d in difference.values() if d is not None]
    if known:
        yield Row(
            "arithmetic", f"right to {max(known):.1g}", "", "two independent ways of adding up the body, relative"
        )


def _removed(document: Document) -> Iterator[Row]:
    for removed in document["removed"]:
        if removed["points"]:
            yield Row(removed["reason"], f"{removed['points']} points", share(removed["share"]))


def _bracketed(document: Document, use: Rulers) -> Iterator[Row]:
    for label, key, ruler in (("mass", "mass_kg", use.mass), ("volume", "volume_m3", use.volume)):
        figure = document[key]
        if figure["bracket"] is not None:
            ends = ruler.words(figure["value"], figure["bracket"]["low"], figure["bracket"]["high"]).ends
            yield Row(label, "", ends, _beside(figure, ruler))
    centre = document["center_of_mass_m"]
    if centre["bracket"] is not None:
        for k, axis in enumerate("xyz"):
            low, high = centre["bracket"]["low"][k], centre["bracket"]["high"][k]
            words = use.length.words(centre["value"][k], low, high)
            same = use.length.is_nothing(high - low)
            yield Row(f"centre of mass {axis}", "", "the same for all" if same else words.ends)


def _beside(figure: Document, ruler: Ruler) -> str:
    random = figure["random"]
    words = ruler.words(figure["value"], random["low"], random["high"])
    return f"random and declared doubt alone: {words.ends}"


def _budget(document: Document, use: Rulers) -> Iterator[Row]:
    """The sources, the greatest first; brackets, which are no part of the shares, last."""
    if document["budget"]:
        yield Row("source, random if not named", "mass", "centre of mass")
    for row in sorted(document["budget"], key=lambda row: -max(row["share_mass"] or 0.0, row["share_com"] or 0.0)):
        checked = wording.only_checked(row)
        ends = row["kind"] == "bracket" or checked
        mass, centre = (row[key] for key in (_HALVES if ends else _STDS))
        length = None if centre is None else math.hypot(*(centre if isinstance(centre, list) else [centre]))
        on_mass = _doubt(mass, use.mass, row["share_mass"], ends)
        on_centre = _doubt(length, use.length, row["share_com"], ends)
        yield Row(row["source"] + (", checked" if checked else wording.KINDS[row["kind"]]), on_mass, on_centre)
    for source in dict.fromkeys(row["source"] for row in document["budget"]):
        if source in wording.SOURCES:
            yield Row(f"{source}: {wording.SOURCES[source]}")
    if any(wording.only_checked(row) for row in document["budget"]):
        yield Row("checked: no more than chance makes of the doubt above, so it is not added to the bounds")


_STDS, _HALVES = ("mass_std_kg", "com_std_m"), ("mass_half_range_kg", "com_half_range_m")


def _doubt(size: float | None, ruler: Ruler, part: float | None, ends: bool) -> str:
    if size is None or ruler.is_nothing(size):
        return "none" if size is not None else ""
    of = "" if part is None else f", {'under 0.1 %' if part < LEAST_NAMED else share(part)}"
    return f"{'± ' if ends else ''}{ruler.std(size)}{of}"


def _notes(notes: list[Document]) -> Iterator[Row]:
    for note in notes:
        text = note["text"]
        first = text.split(" ", 1)[0].rstrip(":")
        end = "" if text.endswith((".", "?", "!")) else "."
        # File names keep their case.
        yield Row((text[:1].upper() + text[1:] if first.isalpha() else text) + end, remark=f"[{note['code']}]")


def _declined(document: Document) -> Iterator[Row]:
    centre = document["center_of_mass_m"]
    if document["frame"]["up"] is None:
        yield Row(
            "height above the base, rest and tilt: no up direction is declared (scan.up) and no support was found."
        )
    if centre["low"] is None or centre["high"] is None:
        yield Row("bounds of the centre of mass: " + (wording.no_bound(document) or "nothing to go by."))
    if any(not p["determined"] for p in document["principal"]):
        yield Row("directions of the axes called undetermined.")
