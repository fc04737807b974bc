"""Counting how often stated bounds held, and testing the counts: exact binomial tests, and Holm's over all of them."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.optimize import brentq
from scipy.stats import binomtest, chi2, norm
from scipy.stats import f as fisher
from scipy.stats import t as student

FloatArray = npt.NDArray[np.float64]
Line = dict[str, Any]

UNDETERMINED = "undetermined"
FAMILY = 0.01
"""Chance that a study whose every quantity is covered within its range fails one anywhere."""


@dataclass(frozen=True)
class Range:
    """What true coverage is asked to lie in; ``high`` None where more is no fault."""

    low: float
    high: float | None


AT_95 = Range(0.93, 0.98)
AT_68 = Range(0.63, 0.76)
RANGES = {UNDETERMINED: Range(0.93, None), **{f"axis {k}": Range(0.95, None) for k in (1, 2, 3)}}
"""Quantities with a range of their own."""
QUANTITIES = ("volume", "x", "y", "z", "region", "moment 1", "moment 2", "moment 3", UNDETERMINED)
AXES = ("axis 1", "axis 2", "axis 3")


@dataclass(frozen=True)
class Count:
    """``held`` of ``of`` bounds held the truth."""

    held: int
    of: int

    def __add__(self, other: Count) -> Count:
        return Count(self.held + other.held, self.of + other.of)

    @property
    def share(self) -> float:
        """Held of all, NaN of none."""
        return self.held / self.of if self.of else float("nan")

    def p_value(self, wanted: Range) -> float:
        """Chance of a count so far beyond the nearer end of ``wanted``, if true coverage were at that end; else 1."""
        if self.of == 0:
            return 1.0
        if self.share < wanted.low:
            return float(binomtest(self.held, self.of, wanted.low, "less").pvalue)
        if wanted.high is not None and self.share > wanted.high:
            return float(binomtest(self.held, self.of, wanted.high, "greater").pvalue)
        return 1.0


def holm(p_values: Sequence[float]) -> list[float]:
    """P-values adjusted for how many there are (Holm 1979): reject where they are at most the family's level.

    >>> [round(p, 3) for p in holm([0.01, 0.04, 0.03, 0.005])]
    [0.03, 0.06, 0.06, 0.02]
    """
    order = np.argsort(p_values, kind="stable")
    adjusted, least = np.empty(len(p_values)), 0.0
    for rank, k in enumerate(order):
        least = max(least, min(1.0, (len(p_values) - rank) * p_values[k]))
        adjusted[k] = least
    return [float(p) for p in adjusted]


def wanted_range(quantity: str) -> Range:
    """The range asked of the 95 % bounds of a quantity."""
    return RANGES.get(quantity, AT_95)


def held(line: Line) -> dict[str, list[bool]]:
    """Whether each stated 95 % bound of one scan held, by quantity: one answer, or more for undetermined moments.

    A quantity without a bound has no answer. The ends are the stated ``low`` and ``high``, brackets included.
    """
    true, found = line["truth"], dict[str, list[bool]]()
    if line["volume"]["low"] is not None:
        found["volume"] = [line["volume"]["low"] <= true["volume"] <= line["volume"]["high"]]
    com = line["com"]
    if com["low"] is not None:
        for name, low, value, high in zip("xyz", com["low"], true["com"], com["high"], strict=True):
            found[name] = [low <= value <= high]
    if com["region"] is not None and com["bracket"] is None:
        # With a bracket the region is that of the random part alone, and says so.
        along = np.array(com["region"]["axes"]) @ np.subtract(true["com"], com["region"]["center_m"])
        found["region"] = [bool(np.sum((along / np.array(com["region"]["radii_m"])) ** 2) <= 1.0)]
    for k, axis in enumerate(line["principal"]):
        moment = axis["moment_kg_m2"]
        if moment["low"] is not None:
            name = f"moment {k + 1}" if axis["determined"] else UNDETERMINED
            found.setdefault(name, []).append(moment["low"] <= true["principal"][k] <= moment["high"])
        if not axis["determined"] or axis["cone_deg"] is not None:
            off = np.degrees(np.arccos(min(1.0, abs(float(np.dot(axis["axis"], true["axes"][k]))))))
            found[f"axis {k + 1}"] = [not axis["determined"] or bool(off <= axis["cone_deg"])]
    return found


def held_68(line: Line) -> dict[str, list[bool]]:
    """Whether 68 % bounds held: value and standard deviation with Student's t (F for the region) at the stated
    degrees of freedom. Not stated for a bracket or for undetermined moments, so not counted there.
    """
    true, found = line["truth"], dict[str, list[bool]]()
    if line["volume"]["std"] is None or line["volume"]["bracket"] is not None:
        return found
    found["volume"] = [_within_68(line["volume"], true["volume"], line["volume"]["degrees_of_freedom"])]
    com = line["com"]
    degrees = [np.inf if nu is None else nu for nu in com["degrees_of_freedom"] or [None] * 3]
    for k, name in enumerate("xyz"):
        one = {"value": com["value"][k], "std": com["std"][k]}
        found[name] = [_within_68(one, true["com"][k], degrees[k])]
    off = np.subtract(true["com"], com["value"])
    square = float(off @ np.linalg.solve(np.array(com["covariance"]), off))
    least = min(degrees)
    limit = 3.0 * fisher.ppf(0.68, 3, least) if least < 1e9 else chi2.ppf(0.68, 3)
    found["region"] = [bool(square <= limit)]
    for k, axis in enumerate(line["principal"]):
        moment = axis["moment_kg_m2"]
        if axis["determined"] and moment["std"]:
            factor = 0.5 * (moment["high"] - moment["low"]) / moment["std"]
            nu = degrees_behind(factor, line["level"])
            found[f"moment {k + 1}"] = [_within_68(moment, true["principal"][k], nu)]
    return found


def _within_68(figure: Line, true: float, nu: float | None) -> bool:
    factor = float(norm.ppf(0.84)) if nu is None or nu > 1e9 else float(student.ppf(0.84, nu))
    return bool(abs(true - figure["value"]) <= factor * figure["std"])


def degrees_behind(factor: float, level: float = 0.95) -> float:
    """Degrees of freedom for which Student's t at ``level`` is ``factor``; infinite at the normal factor.

    >>> round(degrees_behind(3.182446), 3)
    3.0
    """
    tail = 0.5 * (1.0 + level)
    if factor <= float(norm.ppf(tail)) + 1e-6:
        return float("inf")
    return float(brentq(lambda nu: float(student.ppf(tail, nu)) - factor, 0.5, 1e7))


def count(lines: Iterable[Line], answers: Any = held) -> dict[str, Count]:
    """Counts by quantity over scans; declined scans state nothing and count nowhere."""
    found: dict[str, Count] = {}
    for line in lines:
        if "volume" not in line:
            continue
        for name, held_ones in answers(line).items():
            found[name] = found.get(name, Count(0, 0)) + Count(sum(held_ones), len(held_ones))
    return found
