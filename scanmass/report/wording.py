"""The sentences a summary needs beside its numbers."""

from __future__ import annotations

from typing import Any

from scanmass.report.figures import Ruler, share

Document = dict[str, Any]

CAUTIONS = (
    "The bounds are what the stated level says, not a worst case. For a lift, take the upper end of the mass and "
    "add rigging, packing, base and any water held.",
    "The bounds cover the doubts listed under 'Where the doubt comes from'. An error that is in every view of a scan "
    "(its scale, its unit, a coating) shows only if it is declared, or if the object is weighed.",
    "Hidden parts (a core, an armature, lead, a cavity, concrete fill) move mass and centre of mass and are "
    "not seen by a scan of the outside.",
    "scanmass does not judge whether the object or a pick point can bear the load.",
    "Raise a hand's breadth first, look how it hangs, and set it down again if it tilts. Local codes and a "
    "qualified person decide.",
)

KINDS = {"random": "", "declared": ", declared", "bracket": ", bracketed"}
"""What a source's name carries behind it; most are random."""

COMMON_ERROR = "pose or incidence error common to all views"
"""The budget's row of what laying the views on one another anew would change."""

SOURCES = {
    "scan noise": "scatter of the surface, alike over some distance, so that it does not average out",
    "scan noise (upper bound)": "all that strays from a coarse surface, true shape and scatter together",
    "view shifts": "how well the views were laid on one another (shifts)",
    "view turns": "how well the views were laid on one another (turns)",
    "weights of the views (incidence)": "what other weights of grazing and square sight would say",
    "reconstruction": "what fitting a surface through the points may have moved",
    "edges finer than the points": "corners and ridges that fall between the points",
    "scale": "the scanner's lengths as a whole too long or too short",
    "surface offset": "the whole surface too far out or too far in",
    "unseen surface": "between the least and the greatest shape that what was not scanned could have",
    COMMON_ERROR: "what all views could have wrong alike; a known length on the object or a weighing settles it",
}
"""The budget's sources in plain words; densities speak for themselves."""

_UNDERSIDES = {
    "seen": "the underside counts as scanned",
    "flat": "the underside is declared flat, at the contact plane",
    "hollow": "the underside is declared hollow",
    "unknown": "the underside is not declared: what was not seen is bracketed",
}


def underside(document: Document) -> str:
    """What the lower side counts as."""
    kind = document["surface"]["underside"]
    if kind == "unknown" and document["mass_kg"]["bracket"] is None:
        return "the underside is not declared; no part is bracketed"
    return _UNDERSIDES[kind]


def views(document: Document, ruler: Ruler) -> str:
    """How several views came into one frame, and how well they lie on each other."""
    block = document["views"]
    how = {
        "shared": "taken as lying in one frame",
        "own": "aligned to the first",
        "poses": "laid by the poses of the pipeline file",
    }[block["frames"]]
    pairs = block["pairs"]
    if not pairs:
        return f"{how}; no two overlap enough to check it"
    worst = max(pair["rms_m"] for pair in pairs)
    met = "1 pair overlaps" if len(pairs) == 1 else f"{len(pairs)} pairs overlap"
    return f"{how}; {met}, at most {ruler.std(worst)} rms apart"


def noise(document: Document, length: Ruler) -> str:
    """What the bounds of the surface rest on, in a sentence."""
    found = document["noise"]
    size = "" if found["std_m"] is None else f" of {length.std(found['std_m'])} (one standard deviation)"
    reach = "" if found["length_m"] is None else f", alike over {length.std(found['length_m'])}"
    if found["shift_std_m"] is not None:
        reach += f", each view shifted by {length.std(found['shift_std_m'])}"
    where = "taken from the scanner's certificate" if _certified(document) else "declared in the pipeline file"
    return {
        "views": f"random, between views: noise{size}{reach}, from how {found['views']} views of the same places "
        "differ. An error common to all views does not show in it.",
        "declared": f"{where}: noise{size}{reach}.",
        "upper_bound": f"an upper bound: noise{size}{reach}, from one cloud without views, so true shape "
        "that is finer than the comparison surface counts as noise. The scanner's stated noise, or two more scans, "
        "would settle it.",
        "none": "nothing to go by: the scan does not show its own noise and none is declared.",
    }[found["basis"]]


def basis(document: Document) -> str:
    """What the random part of the bounds rests on, in a sentence or two, and what more scans would buy."""
    found = document["noise"]
    more = found.get("more_scans")
    buys = "" if more is None else f" {more['text']}"
    if found["basis"] == "views":
        return (
            f"measured; the random part comes from how {found['views']} views differ where they overlap. What all "
            "views have wrong alike does not show in it."
        )
    if found["basis"] == "declared":
        if found["std_m"] == 0:
            return "declared; the surface is taken as exact (noise 0), as a drawing is, and other doubts alone count."
        who = "the scanner's certificate, read in scanmass's own way" if _certified(document) else "the pipeline file"
        return f"declared; the scan does not show its own noise, and {who} says what it is.{buys}"
    if found["basis"] == "upper_bound":
        return f"an upper bound; nothing tells the scan's noise, so all that could be noise is counted as noise.{buys}"
    return f"none; nothing tells the scan's noise.{buys}"


def _certified(document: Document) -> bool:
    return bool(document["noise"].get("declared_in") == "certificate")


def no_bound(document: Document) -> str | None:
    """Why no bound of the mass can be given, or None where there is one."""
    if document["mass_kg"]["low"] is not None and document["mass_kg"]["high"] is not None:
        return None
    for note in (*document["warnings"], *document["assumptions"]):
        if note["code"] == "noise-unknown":
            return str(note["text"])
    return "the scan does not show its own noise and none is declared; declare scan.noise_std, or scan it again."


def direction(principal: Document) -> str:
    """What is known of one principal axis."""
    if principal["determined"]:
        axis = f"along {triple(principal['axis'])}"
        if principal["cone_deg"] is None:
            return f"{axis}; no bound on its direction"
        return f"{axis}, true within {max(principal['cone_deg'], FINEST_CONE):.2g} deg"
    if principal["plane_normal"] is None:
        return "axis undetermined: the moments are too close to tell, any direction will do"
    return (
        "axis undetermined: two moments are too close to tell; it lies anywhere in the plane square to "
        f"{triple(principal['plane_normal'])}"
    )


FINEST_CONE = 0.01
"""Degrees: four places of a direction do not tell less."""


def triple(vector: list[float]) -> str:
    """A direction to four places.

    >>> triple([0.0, -1e-9, 1.0])
    '(0.0000, 0.0000, 1.0000)'
    """
    return "(" + ", ".join(f"{round(x, 4) + 0.0:.4f}" for x in vector) + ")"


def dominant(document: Document, of: str, ruler: Ruler) -> str | None:
    """The source most of the random and declared doubt comes from; ``of`` is "mass" or "com".

    None where there is no such doubt, or only what the arithmetic rounds.
    """
    rows = [row for row in document["budget"] if row[f"share_{of}"] is not None]
    stds = [row["mass_std_kg" if of == "mass" else "com_std_m"] for row in rows]
    if all(ruler.is_nothing(x) for std in stds for x in (std if isinstance(std, list) else [std])):
        return None
    most = max(rows, key=lambda row: float(row[f"share_{of}"]))
    what = "mass" if of == "mass" else "centre of mass"
    return f"Most of the random and declared doubt of the {what}: {most['source']} ({share(most[f'share_{of}'])})."


def only_checked(row: Document) -> bool:
    """A row of the budget that a check found, within chance: half ranges, and nothing of the bounds."""
    return row["kind"] == "random" and row["com_std_m"] is None and row["com_half_range_m"] is not None


def bracket_leads(document: Document) -> str | None:
    """Says so where what is bracketed is worth more than all random and declared doubt, and what settles it."""
    led: dict[bool, list[str]] = {}
    for name, field, key in (("mass", "mass_kg", "mass_half_range_kg"), ("centre of mass", *_CENTRE)):
        if _wider(document[field]["bracket"], document[field]["random"]):
            sizes = {row["source"]: _largest(row[key]) for row in document["budget"] if row["kind"] == "bracket"}
            common = max(sizes, key=sizes.__getitem__, default="") == COMMON_ERROR
            led.setdefault(common, []).append(name)
    said = []
    if False in led:
        said.append(
            f"What was not seen is worth more than all other doubt of the {' and the '.join(led[False])}: scan it, or "
            "declare it."
        )
    if True in led:
        said.append(
            "What all views may have wrong alike is worth more than all other doubt of the "
            f"{' and the '.join(led[True])}: one known length on the object, or a weighing, settles it."
        )
    return " ".join(said) or None


_CENTRE = ("center_of_mass_m", "com_half_range_m")


def bracketed(document: Document) -> str:
    """The heading of what is bracketed, by what is."""
    sources = {row["source"] for row in document["budget"] if row["kind"] == "bracket"}
    kinds = [
        said
        for said, there in (
            ("what was not seen", bool(sources - {COMMON_ERROR}) or not sources),
            ("what all views may have wrong alike", COMMON_ERROR in sources),
        )
        if there
    ]
    return f"Bracketed: {', and '.join(kinds)}"


def _largest(size: float | list[float] | None) -> float:
    return max((abs(x) for x in (size if isinstance(size, list) else [size or 0.0])), default=0.0)


def _wider(bracket: Document | None, random: Document) -> bool:
    if bracket is None or random["low"] is None or random["high"] is None:
        return False
    return _widest(bracket) > _widest(random)


def _widest(ends: Document) -> float:
    low, high = (side if isinstance(side, list) else [side] for side in (ends["low"], ends["high"]))
    return max(float(b) - float(a) for a, b in zip(low, high, strict=True))
