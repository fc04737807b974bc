"""How one simulated scan came out against the truth, and what many of them say of the bounds."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.stats import beta

from scanmass.studies.rehearse_plan import Truth

FloatArray = npt.NDArray[np.float64]
Plain = dict[str, Any]

SURE = 0.95
"""Of the interval round a share of scans, whatever the level of the bounds is."""
_FAR = 1e6
"""Half-widths: as far off as an error is counted, where a bound has no width at all."""


def score(document: Mapping[str, Any], truth: Truth) -> Plain:
    """Errors and bounds of one simulated scan, all less the truth: a small, plain entry for the ledger.

    Scalars: ``error``, ``std``, ``low``, ``high`` and ``random`` [low, high], SI. ``region``: how many times its own
    radius the region would have to be to hold the true centre. ``axes``: [degrees off, cone or None] for each.
    """
    volume, center = document["volume_m3"], document["center_of_mass_m"]
    found = {"volume": _scalar(volume, truth.volume)}
    for k, axis in enumerate("xyz"):
        along = {key: None if center[key] is None else center[key][k] for key in ("value", "std", "low", "high")}
        along["random"] = {end: None if center["random"][end] is None else center["random"][end][k] for end in _ENDS}
        found[f"centre {axis}"] = _scalar(along, float(truth.center[k]))
    for k, row in enumerate(document["principal"]):
        found[f"moment {k + 1}"] = _scalar(row["moment_kg_m2"], float(truth.moments[k]))
    return {
        "scalars": found,
        "region": _reach(center["region"], truth.center),
        "axes": [_turned(row, axis) for row, axis in zip(document["principal"], truth.axes, strict=True)],
    }


_ENDS = ("low", "high")


def _scalar(block: Mapping[str, Any], truth: float) -> Plain:
    def less(number: float | None) -> float | None:
        return None if number is None else number - truth

    random = block.get("random")
    return {
        "error": block["value"] - truth,
        "std": block["std"],
        "low": less(block["low"]),
        "high": less(block["high"]),
        "random": None if random is None else [less(random[end]) for end in _ENDS],
    }


def _reach(region: Mapping[str, Any] | None, center: FloatArray) -> float | None:
    if region is None:
        return None
    along = np.array(region["axes"]) @ (center - np.array(region["center_m"]))
    radii = np.array(region["radii_m"])
    ratio = np.divide(np.abs(along), radii, out=np.where(along == 0, 0.0, _FAR), where=radii > 0)
    return min(float(np.linalg.norm(ratio)), _FAR)


def _turned(row: Mapping[str, Any], axis: FloatArray) -> list[float | None]:
    """Degrees between the axis found and the true one, and the cone; None for a cone that is not claimed."""
    cosine = abs(float(np.dot(row["axis"], axis)))
    sine = float(np.linalg.norm(np.cross(row["axis"], axis)))
    return [math.degrees(math.atan2(sine, cosine)), row["cone_deg"] if row["determined"] else None]


def binomial_interval(held: int, of: int, level: float = SURE) -> tuple[float, float]:
    """The exact interval of a share (Clopper and Pearson 1934): ends beta quantiles, never narrower than stated.

    >>> [round(end, 4) for end in binomial_interval(19, 20)]
    [0.7513, 0.9987]
    """
    tail = 0.5 * (1.0 - level)
    low = 0.0 if held == 0 else float(beta.ppf(tail, held, of - held + 1))
    high = 1.0 if held == of else float(beta.ppf(1.0 - tail, held + 1, of - held))
    return low, high


def summarise(scores: Sequence[Plain], level: float) -> list[Plain]:
    """One row a figure, over all simulated scans that were measured.

    ``held`` of ``of``, ``share`` with its binomial interval; ``bias`` and ``spread``: mean and standard deviation of
    the errors over the stated standard deviation; ``factor``: times its half-width at which the stated share of scans
    would have been held; ``widen_by``: that factor where the interval lies below the stated level, else 1;
    ``random_held``: by the random part alone, where low and high hold a bracket too.
    """
    rows = []
    for name in scores[0]["scalars"]:
        rows.append(_scalar_row(name, [s["scalars"][name] for s in scores], level))
    rows.append(_row("centre region", [s["region"] for s in scores], level))
    for k in range(3):
        rows.append(_axis_row(f"axis {k + 1}", [s["axes"][k] for s in scores], level))
    return rows


def _scalar_row(name: str, entries: Sequence[Plain], level: float) -> Plain:
    row = _row(name, [_times_half_width(e["error"], e["low"], e["high"]) for e in entries], level)
    errors = np.array([e["error"] for e in entries])
    stds = [e["std"] for e in entries if e["std"] is not None]
    stated = math.sqrt(sum(std * std for std in stds) / len(stds)) if stds else 0.0
    if stated > 0:
        row["bias"] = float(errors.mean() / stated)
        row["spread"] = float(errors.std(ddof=1) / stated) if len(errors) > 1 else None
    random = [e["random"] for e in entries if e["random"] is not None and e["random"][0] is not None]
    if len(random) == len(entries) and any(e["random"] != [e["low"], e["high"]] for e in entries):
        row["random_held"] = sum(low <= 0.0 <= high for low, high in random)
    return row


def _times_half_width(error: float, low: float | None, high: float | None) -> float | None:
    """How many times as far from the value the bound would have to lie to hold the truth; 1 or less where it does."""
    if low is None or high is None:
        return None
    width = error - low if error > 0 else high - error
    times = 0.0 if error == 0 else min(abs(error) / width, _FAR) if width > 0 else _FAR
    return min(times, 1.0) if low <= 0.0 <= high else times


def _axis_row(name: str, entries: Sequence[Sequence[float | None]], level: float) -> Plain:
    def times(angle: float, cone: float | None) -> float:
        if cone is None or angle == 0:
            return 0.0
        return min(angle / cone, _FAR) if cone > 0 else _FAR

    row = _row(name, [times(float(angle or 0.0), cone) for angle, cone in entries], level)
    row["determined"] = sum(cone is not None for _, cone in entries)
    return row


def _row(name: str, ratios: Sequence[float | None], level: float) -> Plain:
    known = sorted(ratio for ratio in ratios if ratio is not None)
    row: Plain = {"figure": name, "held": sum(ratio <= 1.0 for ratio in known), "of": len(known)}
    empty = ("share", "share_low", "share_high", "bias", "spread", "factor", "widen_by", "random_held", "determined")
    row |= dict.fromkeys(empty)
    if not known:
        return row
    low, high = binomial_interval(row["held"], row["of"])
    factor = known[math.ceil(round(level * len(known), 9)) - 1]
    row |= {"share": row["held"] / row["of"], "share_low": low, "share_high": high, "factor": factor}
    row["widen_by"] = max(factor, 1.0) if high < level else 1.0
    return row


def verdict(rows: Sequence[Plain], level: float, failed: int, scans: int) -> str:
    """The outcome in a sentence or two of plain words."""
    stated = f"{100 * level:g} %"
    judged = [row for row in rows if row["of"]]
    narrow = [row for row in judged if row["widen_by"] > 1.0]
    tail = f" {failed} of {scans} simulated scans could not be measured at all." if failed else ""
    if not judged:
        return f"No simulated scan came with bounds, so nothing is said of them.{tail}"
    if narrow:
        worst = max(narrow, key=lambda row: float(row["widen_by"]))
        bracketed = any(row["random_held"] is not None for row in rows)
        which = _and([_named(str(row["figure"]), bracketed) for row in narrow])
        return (
            f"Bounds stated as {stated} held too seldom for {which}: widen them {_times(worst['widen_by'])} "
            f"(the most any needs) before relying on them.{tail}"
        )
    least = min(judged, key=lambda row: float(row["share"]))
    return (
        f"Nothing asks for wider bounds: stated as {stated}, they held in {least['held']} of {least['of']} simulated "
        f"scans or more for every figure. So many scans would not have shown it, had they held in only "
        f"{100 * least['share_low']:.0f} %.{tail}"
    )


def _named(figure: str, bracketed: bool) -> str:
    """The region is of the random part: where there is a bracket, misses may lie in what the unseen part could be."""
    return f"{figure} (which leaves out what the unseen part could be)" if bracketed and "region" in figure else figure


def _times(factor: float) -> str:
    return "by more than 100 times" if factor > 100 else f"{math.ceil(round(10 * factor, 6)) / 10:g} times"


def _and(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"
