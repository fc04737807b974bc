"""What of the coverage study is short of the figures to reach, and the widths and biases it is judged by."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.stats import binomtest
from scipy.stats import t as student

from tests.benchmarks.coverage_cells import Cell
from tests.benchmarks.coverage_tally import FAMILY, Line, count, holm, wanted_range

FloatArray = npt.NDArray[np.float64]
Lines = list[Line]
_SURE = 0.01
"""A mean or a share counts as short of its figure where chance alone would do that in fewer than this of studies."""


@dataclass(frozen=True)
class Widths:
    """Shares of the true volume: mean error, its standard error, spread of the errors, stated std (root mean square).

    ``degrees``: median degrees of freedom; ``ratios`` (5,): median half-width over the oracle's of volume, centre
    (three axes together) and moments; ``target``: what these are asked to stay below.
    """

    bias: float
    bias_doubt: float
    spread: float
    std: float
    degrees: float
    ratios: tuple[float, ...]
    target: float


def judged(cell: Cell) -> bool:
    """Whether the figures to reach ask this cell's coverage to lie in its range: four or more views, all seen."""
    return cell.group in ("noise", "axes") and cell.views >= 4


def adjusted(cells: Sequence[tuple[Cell, Lines]]) -> dict[tuple[str, str], float]:
    """Holm's p-values of all judged cells and quantities that have counts, by (cell, quantity)."""
    tested, values = [], []
    for cell, lines in cells:
        if judged(cell):
            for name, found in count(lines).items():
                tested.append((cell.name, name))
                values.append(found.p_value(wanted_range(name)))
    return dict(zip(tested, holm(values), strict=True))


def widths(cell: Cell, every: Lines) -> Widths | None:
    """Widths and bias of a cell; None with fewer than three scans that have bounds."""
    lines = [line for line in every if line.get("volume", {}).get("low") is not None]
    if len(lines) < 3:
        return None
    true = float(np.mean([line["truth"]["volume"] for line in lines]))
    off = _errors(lines, lambda line: (line["volume"]["value"], line["truth"]["volume"])) / true
    spread = float(off.std(ddof=1))
    degrees = [line["volume"]["degrees_of_freedom"] for line in lines]
    nu = float(np.median([1e9 if d is None else d for d in degrees]))
    return Widths(
        bias=float(off.mean()),
        bias_doubt=spread / float(np.sqrt(len(lines))),
        spread=spread,
        std=float(np.sqrt(np.mean([line["volume"]["std"] ** 2 for line in lines]))) / true,
        degrees=nu,
        ratios=_ratios(lines),
        target=1.3 if cell.views >= 8 else 1.1 * float(student.ppf(0.975, nu)) / 1.96,
    )


def _errors(lines: Lines, figure: Callable[[Line], Any]) -> FloatArray:
    """Stated less true, a row a scan; ``figure`` takes a line and gives (stated, true)."""
    return np.array([np.subtract(*figure(line)) for line in lines])


def _ratios(lines: Lines) -> tuple[float, ...]:
    def ratio(figure: Callable[[Line], Any], ends: Callable[[Line], Any]) -> float:
        spread = np.sqrt(np.mean(_errors(lines, figure).var(axis=0, ddof=1)))
        half = np.median([0.5 * np.subtract(*ends(line)) for line in lines])
        return float(half / (1.96 * spread)) if spread > 0 else float("inf")

    def moment(k: int) -> float:
        return ratio(
            lambda line: (line["principal"][k]["moment_kg_m2"]["value"], line["truth"]["principal"][k]),
            lambda line: [line["principal"][k]["moment_kg_m2"][end] for end in ("high", "low")],
        )

    volume = ratio(
        lambda line: (line["volume"]["value"], line["truth"]["volume"]),
        lambda line: (line["volume"]["high"], line["volume"]["low"]),
    )
    centre = ratio(
        lambda line: (line["com"]["value"], line["truth"]["com"]),
        lambda line: (line["com"]["high"], line["com"]["low"]),
    )
    stated = all(axis["moment_kg_m2"]["low"] is not None for line in lines for axis in line["principal"])
    return (volume, centre, *(moment(k) if stated else float("nan") for k in range(3)))


def bracketed(line: Line) -> bool:
    """Whether a scan's volume has a bracket."""
    return line["volume"]["bracket"] is not None


def pose_bracket(line: Line) -> bool:
    """Whether a scan's budget has a bracket of an error that all views share."""
    return any(row[1] == "bracket" and "common to all views" in row[0] for row in line["budget"])


def shortfalls(cells: Sequence[tuple[Cell, Lines]]) -> list[list[str]]:
    """Rows (cell, what, seen, asked) of all that is short of its figure beyond chance; brackets must never miss."""
    rows = []
    counts = {cell.name: count(lines) for cell, lines in cells}
    for (name, quantity), p in sorted(adjusted(cells).items(), key=lambda item: item[1]):
        if p <= FAMILY:
            found, wanted = counts[name][quantity], wanted_range(quantity)
            asked = f"{100 * wanted.low:g} to {100 * (wanted.high or 1.0):g} %"
            rows.append([name, f"95 % of {quantity}", f"{found.held}/{found.of}, Holm p {p:.1e}", asked])
    for cell, lines in cells:
        rows += _of_cell(cell, [line for line in lines if "volume" in line])
    return rows


def _of_cell(cell: Cell, lines: Lines) -> list[list[str]]:
    rows = []
    found = widths(cell, lines)
    if found is not None and judged(cell):
        most = 0.0025 if cell.planted.uneven > 1.0 else 0.001
        if abs(found.bias) - most > float(student.ppf(1.0 - _SURE, len(lines) - 1)) * found.bias_doubt:
            asked = f"within {100 * most:g} %"
            rows.append([cell.name, "bias", f"{100 * found.bias:+.3f} ± {100 * found.bias_doubt:.3f} %", asked])
        # The spread of n errors is known to 1 in sqrt(2 (n - 1)).
        slack = 1.0 + 2.33 / float(np.sqrt(2 * (len(lines) - 1)))
        for name, ratio in zip(("volume", "centre", "moment 1", "moment 2", "moment 3"), found.ratios, strict=True):
            if ratio > slack * found.target:
                rows.append(
                    [cell.name, f"half-width of {name}", f"{ratio:.2f} x", f"{found.target:.2f} x the oracle's"]
                )
    pose = sum(pose_bracket(line) for line in lines)
    if cell.group in ("unseen", "common") and lines:
        for name, held_all in count(lines).items():
            if name in ("volume", "x", "y", "z") and held_all.held < held_all.of:
                rows.append([cell.name, f"bounds with bracket of {name}", f"{held_all.held}/{held_all.of}", "all"])
    if cell.group == "common" and pose < len(lines):
        rows.append([cell.name, "pose bracket", f"{pose}/{len(lines)}", "all"])
    elif cell.group != "common" and pose and float(binomtest(pose, len(lines), 0.05, "greater").pvalue) <= _SURE:
        rows.append([cell.name, "pose bracket", f"{pose}/{len(lines)}", "at most 5 %"])
    return rows
