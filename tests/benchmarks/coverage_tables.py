"""The tables of the coverage study: all cells, good or bad, and the pooled ones."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.stats import t as student

from tests.benchmarks.coverage_bodies import body
from tests.benchmarks.coverage_cells import CELLS, Cell
from tests.benchmarks.coverage_tally import (
    AT_68,
    AXES,
    FAMILY,
    QUANTITIES,
    UNDETERMINED,
    Count,
    Line,
    Range,
    count,
    held_68,
    holm,
    wanted_range,
)

FloatArray = npt.NDArray[np.float64]
Lines = list[Line]
_SHORT = {**{name: name for name in "xyz"}, "volume": "vol", "region": "reg", UNDETERMINED: "und"}


def tables(lines: Iterable[Line]) -> str:
    """Every table, as text."""
    by_cell: dict[str, Lines] = {}
    for line in lines:
        by_cell.setdefault(line["cell"], []).append(line)
    known = {cell.name: cell for cell in CELLS}
    cells = [(known[name], found) for name, found in by_cell.items() if name in known]
    if not cells:
        return "no scan in the ledger yet"
    parts = [
        _coverage(cells),
        _level_68(cells),
        _pooled(cells),
        _widths(cells),
        _noise(cells),
        _brackets(cells),
        _failed(cells),
    ]
    return "\n\n".join(parts)


def _grid(title: str, head: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    width = [max(len(str(row[k])) for row in [head, *rows]) for k in range(len(head))]
    text = [
        "  ".join(v.ljust(w) if k == 0 else v.rjust(w) for k, (v, w) in enumerate(zip(row, width, strict=True)))
        for row in [head, *rows]
    ]
    return "\n".join([title, *text])


def _judged(cell: Cell) -> bool:
    """Whether the figures to reach ask this cell's coverage to lie in its range: four or more views, all seen."""
    return cell.group in ("noise", "axes") and cell.views >= 4


def _share(found: Count | None, mark: str = "") -> str:
    return "-" if found is None or not found.of else f"{100 * found.share:.1f}{mark}"


def adjusted(cells: Sequence[tuple[Cell, Lines]]) -> dict[tuple[str, str], float]:
    """Holm's p-values of all judged cells and quantities that have counts, by (cell, quantity)."""
    tested, values = [], []
    for cell, lines in cells:
        if _judged(cell):
            for name, found in count(lines).items():
                tested.append((cell.name, name))
                values.append(found.p_value(wanted_range(name)))
    return dict(zip(tested, holm(values), strict=True))


def _coverage(cells: Sequence[tuple[Cell, Lines]]) -> str:
    holms = adjusted(cells)
    rows = []
    for cell, lines in cells:
        counts = count(lines)
        marks = {n: "!" if holms.get((cell.name, n), 1.0) <= FAMILY else "" for n in counts}
        shares = [_share(counts.get(n), marks.get(n, "")) for n in (*QUANTITIES, *AXES)]
        declined = sum("declined" in line for line in lines)
        rows.append([cell.name, str(len(lines)), str(declined), *shares])
    head = ["cell", "scans", "declined", *(_SHORT.get(n, n.replace("moment ", "I")) for n in QUANTITIES), *AXES]
    title = (
        "Coverage of 95 % bounds, per cent (asked: 93 to 98; undetermined moments at least 93, axes at least 95).\n"
        "!: outside that range by an exact binomial test at a family-wise 1 % (Holm, over all judged cells)"
    )
    return _grid(title, head, rows)


def _level_68(cells: Sequence[tuple[Cell, Lines]]) -> str:
    names = [n for n in QUANTITIES if n != UNDETERMINED]
    rows = []
    for cell, lines in cells:
        counts = count(lines, held_68)
        rows.append([cell.name, *(_share(counts.get(n)) for n in names)])
    title = "Coverage of 68 % bounds (value, std and t at the stated degrees of freedom), per cent (asked: 63 to 76)"
    return _grid(title, ["cell", *(_SHORT.get(n, n.replace("moment ", "I")) for n in names)], rows)


def _pooled(cells: Sequence[tuple[Cell, Lines]]) -> str:
    groups: dict[str, Lines] = {}
    for cell, lines in cells:
        if _judged(cell):
            groups.setdefault(f"noise: {cell.noise}", []).extend(lines)
            groups.setdefault(f"views: {cell.views}", []).extend(lines)
    groups = dict(sorted(groups.items(), key=lambda item: (item[0][:5], len(item[0]), item[0])))
    rows = []
    for name, lines in groups.items():
        wide, narrow = count(lines), count(lines, held_68)
        shares = [_share(wide.get(n), _beyond(wide.get(n), wanted_range(n))) for n in QUANTITIES]
        inner = [_share(narrow.get(n), _beyond(narrow.get(n), AT_68)) for n in ("volume", "x", "y", "z", "region")]
        rows.append([name, str(len(lines)), *shares, *inner])
    head = ["pooled", "scans", *(_SHORT.get(n, n.replace("moment ", "I")) for n in QUANTITIES)]
    head += [f"{_SHORT[n]} 68" for n in ("volume", "x", "y", "z", "region")]
    title = "Pooled per noise model and number of views (four views or more). <, >: observed share beyond the range"
    return _grid(title, head, rows)


def _beyond(found: Count | None, wanted: Range) -> str:
    if found is None or not found.of:
        return ""
    if found.share < wanted.low:
        return "<"
    return ">" if wanted.high is not None and found.share > wanted.high else ""


def errors(lines: Lines, figure: Callable[[Line], Any]) -> FloatArray:
    """Stated less true, a row a scan; ``figure`` takes a line and gives (stated, true)."""
    return np.array([np.subtract(*figure(line)) for line in lines])


def _widths(cells: Sequence[tuple[Cell, Lines]]) -> str:
    rows = []
    for cell, every in cells:
        lines = [line for line in every if line.get("volume", {}).get("low") is not None]
        if len(lines) < 3:
            continue
        true = np.mean([line["truth"]["volume"] for line in lines])
        off = errors(lines, lambda line: (line["volume"]["value"], line["truth"]["volume"])) / true
        spread = off.std(ddof=1)
        std = np.sqrt(np.mean([line["volume"]["std"] ** 2 for line in lines])) / true
        nu = float(np.median([_finite(line["volume"]["degrees_of_freedom"]) for line in lines]))
        target = 1.3 if cell.views >= 8 else 1.1 * float(student.ppf(0.975, nu)) / 1.96
        rows.append(
            [
                cell.name,
                f"{100 * off.mean():+.4f}",
                f"{100 * spread / np.sqrt(len(lines)):.4f}",
                f"{100 * spread:.4f}",
                f"{100 * std:.4f}",
                f"{nu:.0f}",
                *(f"{ratio:.2f}" for ratio in _ratios(lines)),
                f"{target:.2f}",
            ]
        )
    head = ["cell", "bias %", "± se", "SD %", "stated std %", "df", "vol", "com", "I1", "I2", "I3", "target"]
    title = (
        "Bias and spread of the volume, and median half-width over the oracle's (1.96 x the errors' spread) for\n"
        "volume, centre and moments; target 1.3 from 8 views, 1.1 t(df)/1.96 below"
    )
    return _grid(title, head, rows)


def _finite(nu: float | None) -> float:
    return 1e9 if nu is None else float(nu)


def _ratios(lines: Lines) -> list[float]:
    """Median half-width over 1.96 times the errors' spread: volume, centre (its three axes together), moments."""

    def ratio(figure: Callable[[Line], Any], ends: Callable[[Line], Any]) -> float:
        spread = np.sqrt(np.mean(errors(lines, figure).var(axis=0, ddof=1)))
        half = np.median([0.5 * np.subtract(*ends(line)) for line in lines])
        return float(half / (1.96 * spread))

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
    return [volume, centre, *(moment(k) if stated else float("nan") for k in range(3))]


def _noise(cells: Sequence[tuple[Cell, Lines]]) -> str:
    rows = []
    for cell, every in cells:
        lines = [line for line in every if "volume" in line]
        if not lines:
            continue
        size = float(np.ptp(body(cell.body).vertices, axis=0).max())
        planted = cell.planted
        fitted = [_middle(lines, key) for key in ("std_m", "length_m", "shift_std_m", "rotation_std_rad")]
        share = _shares(lines)
        rows.append(
            [
                cell.name,
                f"{1000 * planted.field:.2f} / {1000 * fitted[0] / size:.2f}",
                f"{planted.length if planted.field else 0:.3f} / {fitted[1] / size:.3f}",
                f"{1000 * planted.shift:.2f} / {1000 * fitted[2] / size:.2f}",
                f"{np.degrees(planted.turn):.3f} / {np.degrees(fitted[3]):.3f}",
                ", ".join(f"{name} {100 * part:.0f}" for name, part in share[:3]),
                str(int(np.median([sum(line["points"]) for line in lines]))),
                f"{np.mean([sum(line['seconds']) for line in lines]):.1f}",
            ]
        )
    head = ["cell", "std 1/1000", "length", "shift 1/1000", "turn deg", "variance of the mass, %", "points", "s"]
    title = (
        "Noise planted / fitted (median), as shares of the size. The planted std is along the ray: the surface feels\n"
        "it times the cosine of incidence. Then the mean shares of the sources, points used, seconds a scan"
    )
    return _grid(title, head, rows)


def _middle(lines: Lines, key: str) -> float:
    found = [line["noise"][key] for line in lines if line["noise"][key] is not None]
    return float(np.median(found)) if found else float("nan")


def _shares(lines: Lines) -> list[tuple[str, float]]:
    """Mean shares of the variance of the mass, greatest first."""
    total: dict[str, float] = {}
    for line in lines:
        parts = {row[0]: row[2] ** 2 for row in line["budget"] if row[2] is not None}
        whole = sum(parts.values()) or 1.0
        for name, part in parts.items():
            total[name] = total.get(name, 0.0) + part / whole / len(lines)
    return sorted(total.items(), key=lambda item: -item[1])


def _brackets(cells: Sequence[tuple[Cell, Lines]]) -> str:
    rows = []
    for cell, every in cells:
        lines = [line for line in every if "volume" in line]
        if not lines:
            continue
        all_held = count(lines)
        pose = sum(any(row[1] == "bracket" and "common to all views" in row[0] for row in x["budget"]) for x in lines)
        both = sum(line["volume"]["bracket"] is not None for line in lines)
        width = [np.ptp(list(x["volume"]["bracket"].values())) / x["truth"]["volume"] for x in lines if _has(x)]
        rows.append(
            [
                cell.name,
                str(len(lines)),
                str(both),
                str(pose),
                f"{100 * float(np.median(width)) if width else 0:.2f}",
                f"{100 * float(np.median([1 - x['observed'] for x in lines])):.1f}",
                *(f"{all_held[n].held}/{all_held[n].of}" if n in all_held else "-" for n in ("volume", "x", "y", "z")),
            ]
        )
    head = ["cell", "scans", "brackets", "pose brackets", "bracket %", "unseen %", "volume held", "x", "y", "z"]
    title = (
        "Brackets: of the volume, and those of errors common to all views (asked: in all runs of unseen and common\n"
        "cells they hold the truth; elsewhere the pose bracket appears in at most 5 % of runs)"
    )
    return _grid(title, head, rows)


def _has(line: Line) -> bool:
    return line["volume"]["bracket"] is not None


def _failed(cells: Sequence[tuple[Cell, Lines]]) -> str:
    bad = sorted((p, cell, name) for (cell, name), p in adjusted(cells).items() if p <= FAMILY)
    counts = {cell.name: count(lines) for cell, lines in cells}
    if not bad:
        return f"No judged cell and quantity outside its range at a family-wise {100 * FAMILY:g} %"
    rows = [[c, n, f"{counts[c][n].held}/{counts[c][n].of}", _share(counts[c][n]), f"{p:.1e}"] for p, c, n in bad]
    return _grid("Outside their range at a family-wise 1 %", ["cell", "quantity", "held", "%", "Holm p"], rows)
