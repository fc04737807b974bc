"""What a rehearsal takes for granted, and its outcome as rows to print."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from scanmass.errors import Note
from scanmass.report.rows import Row, Section
from scanmass.studies.rehearse_plan import Plan

_LABELS = {"moment": "principal moment", "axis": "principal axis", "centre": "centre of mass,"}


def assumptions(plan: Plan) -> tuple[Note, ...]:
    """Every way in which the simulated scans are not the real one."""
    found = [
        Note(
            "finished-surface-is-the-truth",
            "The finished surface stands for the object. It is smoother than the object, so detail that the scan "
            "missed, or that the reconstruction gets wrong every time, does not show.",
        ),
        Note(
            "errors-common-to-all-views-not-simulated",
            "Errors that all views share (a wrong scale, spray, a common offset) are simulated only as far as they "
            "are declared in the pipeline file.",
        ),
        Note(
            "density-not-rehearsed",
            "The density is taken as known: the volume stands for the mass. What fills the object is not rehearsed.",
        ),
    ]
    if plan.source == "mesh":
        text = "The corners of the finished mesh are moved by the noise; what was not seen of it is left open."
        return (*found, Note("mesh-moved", text))
    known = int((~np.isnan(plan.scanners).any(axis=1)).sum())
    ways = f"by rays from the scanner's place in {known} of {len(plan.scanners)} views, " if known else ""
    found.append(
        Note(
            "views-as-they-were",
            f"Each view sees what it saw, at other places up to half the way to the next sample off: {ways}"
            f"{'else ' if known else ''}at the nearest places of the surface. What was not seen stays unseen.",
        )
    )
    if len(plan.strays) or len(plan.beside):
        text = (
            "What was removed as outliers, support or clutter is in the simulated scans again, near where it was, and "
            "has to be found again. Points dropped at edges of a range grid are not."
        )
        found.append(Note("removed-points-planted", text))
    if plan.frames != "shared":
        text = "Views were aligned with one another; in the simulated scans they are, but for the fitted errors."
        found.append(Note("alignment-not-rehearsed", text))
    if plan.noise.basis == "upper_bound":
        text = "The noise of the scan is only known as an upper bound, and simulated scans are as noisy as that."
        found.append(Note("noise-upper-bound", text))
    return tuple(found)


def sections(outcome: Mapping[str, Any]) -> list[Section]:
    """The outcome in the order it is read: the verdict, the table, what it cannot show."""
    stated = f"{100 * outcome['level']:g} %"
    narrow = any(row["widen_by"] is not None and row["widen_by"] > 1 for row in outcome["figures"])
    found = [
        Section("Outcome", "warning" if narrow else "result", (Row(outcome["verdict"]),)),
        Section(
            "How often the stated bounds held",
            "measured",
            tuple(_row(row, stated) for row in outcome["figures"]),
            f"Out of {outcome['measured']} simulated scans; in brackets what the share would be in very many, 19 times "
            f"in 20. Bounds stated as {stated} are too narrow where {stated} lies above the bracket.",
        ),
    ]
    if outcome["failed"]:
        reasons = dict.fromkeys(str(entry["reason"]) for entry in outcome["failed"])
        found.append(Section("Simulated scans that could not be measured", "warning", tuple(map(Row, reasons))))
    chance = (
        "With so many figures, one may come out too narrow by chance in about one rehearsal of five; rehearse more "
        "scans, or with another seed, to see whether it stays."
    )
    notes = (*(Row(note["text"], remark=f"[{note['code']}]") for note in outcome["assumptions"]), Row(chance))
    return [*found, Section("What this cannot show", "assumed", notes)]


def _row(row: Mapping[str, Any], stated: str) -> Row:
    first, *rest = str(row["figure"]).split(" ", 1)
    label = " ".join([_LABELS.get(first, first), *rest])
    if not row["of"]:
        return Row(label, "no bounds")
    share = f"({100 * row['share_low']:.0f} to {100 * row['share_high']:.0f} %)"
    remarks = []
    if row["widen_by"] > 1:
        remarks.append(f"too narrow for {stated}: {row['widen_by']:.2f} times as wide would have held")
    if row["random_held"] is not None:
        remarks.append(f"the random part alone held {row['random_held']}; the rest is what the unseen part could be")
    if row["determined"] is not None and row["determined"] < row["of"]:
        remarks.append(f"not claimed in {row['of'] - row['determined']}, which counts as held")
    if row["bias"] is not None and row["spread"] is not None:
        remarks.append(f"errors: mean {row['bias']:+.2f}, spread {row['spread']:.2f} of the stated std")
    return Row(label, f"{row['held']} of {row['of']}", share, "; ".join(remarks))
