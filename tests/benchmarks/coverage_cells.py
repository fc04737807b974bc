"""The cells of the coverage study: which body, which errors, how many views, and what the pipeline file declares.

A fractional design: every noise model meets several bodies and numbers of views, not all of them. It was written
down before results were seen, but for cells added since for a reason that is named beside them.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

from tests.benchmarks.coverage_generators import Planted

Kind = Literal["views", "own", "declared", "upper", "certificate", "unknown", "flat"]
Group = Literal["noise", "one cloud", "unseen", "common", "axes"]

_TURN = float(np.radians(0.1))


@dataclass(frozen=True)
class Cell:
    """``noise``: the model's name in the pooled tables; ``kind``: what the pipeline file is told;
    ``floor``: it is left in the scan; ``stations``: looks that make one view (more than one: repeat scans of the
    whole); ``points``: of each view;
    ``support``: of the pipeline file. Looking for a table takes a third of the time, so most cells say that none was
    scanned.
    """

    name: str
    group: Group
    noise: str
    body: str
    views: int
    planted: Planted
    stations: int = 1
    points: int = 5000
    kind: Kind = "views"
    support: str = "none"
    floor: bool = False

    @property
    def standing(self) -> bool:
        """On the floor, its underside never seen."""
        return self.group == "unseen"

    def pipeline(self, size: float) -> dict[str, Any]:
        """The blocks of the pipeline file for a body of ``size`` metres."""
        scan: dict[str, Any] = {"unit": "mm"}
        if self.kind == "own":
            scan["frames"] = "own"
        if self.planted.scale > 0:
            scan["scale"] = f"1 ± {2.0 * self.planted.scale:.6f}"
        if self.kind in ("declared", "certificate"):
            scan["noise_length"] = _mm(self.planted.length * size)
        if self.kind == "declared":
            scan["noise_std"] = _mm(self.planted.field * size)
        if self.kind == "certificate":
            limits = {"PF": 4.0 * self.planted.field, "PS": 2.0 * self.planted.offset_limit}
            scan["certificate"] = {
                name: _mm(limit * size) for name, limit in (limits | {"E": self.planted.scale_limit}).items()
            }
        surface: dict[str, Any] = {"underside": self.kind if self.kind in ("unknown", "flat") else "seen"}
        if self.standing:
            scan["up"] = "0 0 1"
        return {
            "scan": scan,
            "clean": {"support": self.support},
            "surface": surface,
            "inside": {"body": {"density": "1000 ± 0 kg/m3"}},
            "bounds": {"replicates": 500},
        }


def _mm(metres: float) -> str:
    return f"{1000 * metres:.6f} mm"


_WHITE = Planted(white=0.001)
_SHORT, _MIDDLE, _LONG = (Planted(field=0.001, length=length) for length in (0.03, 0.07, 0.15))
_POSE = Planted(field=0.0005, shift=0.0005, turn=_TURN)
_BAD = Planted(field=0.0007, shift=0.0003, turn=0.5 * _TURN, bad=3.0)
_REAL = Planted(field=0.0007, growth=0.7, quantum=0.0002, footprint=0.6, strays=6, turn=_TURN)
_SCALE = Planted(field=0.0007, scale=0.0004)
_UNEVEN = Planted(field=0.001, length=0.15, uneven=25.0)
_UNEVEN_POSE = Planted(field=0.0005, shift=0.0005, turn=_TURN, uneven=25.0)
_OWN = Planted(field=0.0007, own_frames=True)
_STRIPES = Planted(stripes=0.001)
_WARP = Planted(warp=0.001)
_SHARED = Planted(white=0.0003, field=0.001, common=True)
_CERTIFIED = Planted(white=0.0003, field=0.001, common=True, scale_limit=0.0006, offset_limit=0.0004)

SHARP = 10_000
"""Points a view of bodies with edges and walls: at fewer, the doubt of edges would hide that of the noise.
With these a scan takes some 3 s of one core; 20 000 a view take 7 s, and 13 s where there is an underside to close."""
THIN = 120_000
"""Points of all views of the bowl: at 45 000 its wall is three spacings thick, and the scan is declined as patchy."""

CELLS: tuple[Cell, ...] = (
    Cell("white-pebble-4", "noise", "white", "pebble", 4, _WHITE),
    Cell("white-wedge-8", "noise", "white", "wedge", 8, _WHITE, stations=2, points=SHARP, support="auto"),
    Cell("white-bowl-6", "noise", "white", "bowl", 6, _WHITE, stations=8, points=THIN // 6),
    Cell("short-bracket-8", "noise", "field 0.03", "bracket", 8, _SHORT),
    Cell("short-bored-5", "noise", "field 0.03", "bored", 5, _SHORT, stations=6, points=SHARP),
    Cell("middle-pebble-6", "noise", "field 0.07", "pebble", 6, _MIDDLE),
    Cell("middle-spindle-6", "noise", "field 0.07", "spindle", 6, _MIDDLE, stations=2),
    Cell("middle-bored-4", "noise", "field 0.07", "bored", 4, _MIDDLE, stations=6, points=SHARP),
    Cell("middle-wedge-8", "noise", "field 0.07", "wedge", 8, _MIDDLE, stations=2, points=SHARP),
    Cell("long-gourd-10", "noise", "field 0.15", "gourd", 10, _UNEVEN),
    Cell("long-bowl-3", "noise", "field 0.15", "bowl", 3, _LONG, stations=8, points=THIN // 3),
    Cell("long-pebble-5", "noise", "field 0.15", "pebble", 5, _LONG),
    Cell("pose-gourd-6", "noise", "pose", "gourd", 6, _UNEVEN_POSE),
    Cell("pose-wedge-4", "noise", "pose", "wedge", 4, _POSE, stations=2, points=SHARP),
    Cell("pose-spindle-10", "noise", "pose", "spindle", 10, _POSE),
    Cell("bad-pebble-8", "noise", "one bad view", "pebble", 8, _BAD),
    Cell("bad-bored-5", "noise", "one bad view", "bored", 5, _BAD, stations=6, points=SHARP),
    Cell("mixed-bracket-6", "noise", "outliers", "bracket", 6, _REAL, points=SHARP, support="auto"),
    Cell("scale-pebble-6", "noise", "scale", "pebble", 6, _SCALE),
    Cell("own-bracket-8", "noise", "alignment", "bracket", 8, _OWN, kind="own"),
    Cell("own-pebble-6", "noise", "alignment", "pebble", 6, _OWN, stations=2, kind="own"),
    Cell("stripes-gourd-6", "noise", "stripes", "gourd", 6, _STRIPES),
    Cell("warp-bracket-8", "noise", "warp", "bracket", 8, _WARP),
    Cell("declared-pebble", "one cloud", "declared", "pebble", 6, _SHARED, kind="declared"),
    Cell("upper-bracket", "one cloud", "upper bound", "bracket", 6, _SHARED, kind="upper"),
    Cell("certificate-gourd", "one cloud", "certificate", "gourd", 6, _CERTIFIED, kind="certificate"),
    Cell("unseen-column", "unseen", "unseen", "column", 8, _MIDDLE, kind="unknown", support="auto"),
    Cell("unseen-mound", "unseen", "unseen", "mound", 8, _MIDDLE, kind="unknown", support="auto"),
    Cell("unseen-drum", "unseen", "unseen", "drum", 8, _MIDDLE, kind="unknown", support="auto"),
    Cell("unseen-torso", "unseen", "unseen", "torso", 8, _MIDDLE, kind="unknown", support="auto"),
    Cell("unseen-mound-floor", "unseen", "unseen", "mound", 8, _MIDDLE, kind="unknown", support="auto", floor=True),
    Cell("flat-mound-floor", "unseen", "flat", "mound", 8, _MIDDLE, kind="flat", support="auto", floor=True),
    Cell("flat-mound", "unseen", "flat", "mound", 8, _MIDDLE, kind="flat", support="auto"),
    Cell("axial-pebble-6", "common", "axial shift", "pebble", 6, Planted(field=0.0003, axial=0.0004)),
    Cell("axial-wedge-8", "common", "axial shift", "wedge", 8, Planted(field=0.0003, axial=-0.001), points=SHARP),
    Cell("cosine-bracket-8", "common", "cosine bias", "bracket", 8, Planted(field=0.0003, cosine=0.0008)),
    *(Cell(f"axes-{gap}", "axes", "field 0.07", gap, 6, _MIDDLE) for gap in ("gap000", "gap005", "gap010")),
    *(Cell(f"axes-{gap}", "axes", "field 0.07", gap, 6, _MIDDLE) for gap in ("gap020", "gap050")),
)

FIRST = "white-pebble-4,short-bracket-8,middle-pebble-6,middle-spindle-6,pose-gourd-6,middle-wedge-8,middle-bored-4"
"""The cells of a first look."""


def named(names: str | None) -> tuple[Cell, ...]:
    """Cells by their names, comma-separated, or all; a name of a group or of a noise model stands for its cells.

    Raises
    ------
    ValueError
        With the names that are none.
    """
    if names is None:
        return CELLS
    wanted = [name.strip() for name in (FIRST if names == "first" else names).split(",")]
    unknown = [w for w in wanted if not any(w in (c.name, c.group, c.noise) for c in CELLS)]
    if unknown:
        raise ValueError(f"no cell, group or noise model is called {', '.join(unknown)}")
    return tuple(c for c in CELLS if {c.name, c.group, c.noise} & set(wanted))
