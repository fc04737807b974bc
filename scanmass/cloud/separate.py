"""Separate the object from what it stands on and from clutter."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Literal

import numpy as np
import numpy.typing as npt

from scanmass.cloud.cloud import Cloud, Removed
from scanmass.cloud.normals import raw_normals
from scanmass.cloud.pieces import sort_pieces
from scanmass.cloud.support import Judged, judge_plane
from scanmass.errors import Note, ScanFault
from scanmass.geometry.neighbours import nearest, sample_areas
from scanmass.geometry.planes import largest_plane
from scanmass.progress import Progress, silent
from scanmass.seeds import stream

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

MOST_LOOKED_AT = 60_000
"""Samples that planes are looked for in, evenly drawn from all."""
CANDIDATES = 8
"""Planes looked at, the largest first."""
LEAST_SHARE = 0.02
"""Share of the cloud's area below which a plane is not looked at."""
TILT = 15.0
"""Degrees between a declared up and the normal of a plane within which it can be the support."""
WARN_CLUTTER = 0.05
BASE_KEPT = Note(
    "flat-base-kept",
    "The object stands on a flat base that reaches beyond it. It may be its own foot or plinth, a turntable or a "
    "board; it was kept and weighed with the object. If it is a turntable's disc, set clean.support to turntable; if "
    "it is a board, crop the scan above it.",
)


Support = Literal["auto", "turntable", "none"]


@dataclass(frozen=True)
class Separated:
    """``cloud``: the object; ``removed``: what was taken away, each with a reason.

    ``up`` (3,) unit: as declared, else the normal of the support towards the object, else None.
    ``contact_height``: the plane the object stood on is {x: x.up = contact_height}; None without a support.
    """

    cloud: Cloud
    removed: Removed
    up: FloatArray | None
    contact_height: float | None
    assumptions: tuple[Note, ...] = field(default=())
    warnings: tuple[Note, ...] = field(default=())


def separate(
    cloud: Cloud,
    *,
    support: Support = "auto",
    clutter: Literal["auto", "none"] = "auto",
    up: FloatArray | None = None,
    seed: int = 0,
    progress: Progress = silent,
) -> Separated:
    """The object alone, with what it stood on and what lay about taken away.

    Parameters
    ----------
    support : "auto" looks for the lowest plane that goes on beyond the object's outline, or a turntable's disc;
        "turntable" takes away a disc that stands on that plane too (it could be a round foot of the object's own, so
        this must be said); "none" takes all planes for the object's own.
    clutter : "auto" takes away small pieces that lie apart from the object, "none" keeps them.
    up : (3,) declared direction, of any length; only planes within 15 degrees of level are then looked at.

    Raises
    ------
    ScanFault
        The scan holds several separate objects of similar size, or nothing but a support.
    """
    declared = None if up is None else np.asarray(up, np.float64) / np.linalg.norm(up)
    removed, notes, warnings = Removed.nothing(), list[Note](), list[Note]()
    contact: float | None = None
    looks = {"none": 0, "auto": 1, "turntable": 2}[support]
    for look in range(max(looks, 1)):
        found, base = _find_support(cloud, declared, seed) if look < looks else (None, None)
        if found is not None and (look == 0 or found.kind == "turntable"):
            cloud, taken, said = _without_support(cloud, found)
            removed = removed.joined(taken)
            (warnings if found.kind == "turntable" and support == "auto" else notes).append(said)
            contact = _contact(cloud, found, declared)
            declared = found.up if declared is None else declared
        if base is not None and support == "auto":
            warnings.append(BASE_KEPT)
        # A disc shows as round only without the strays and the tools that lie about it.
        if clutter == "auto":
            cloud, away, also, warned = _without_clutter(cloud, seed)
            removed, notes, warnings = removed.joined(away), [*notes, *also], [*warnings, *warned]
        progress("separate", look + 1, max(looks, 1))
        if found is None or found.kind == "turntable":
            break
    return Separated(cloud, removed, declared, contact, tuple(notes), tuple(warnings))


def _find_support(cloud: Cloud, up: FloatArray | None, seed: int) -> tuple[Judged | None, Judged | None]:
    """The lowest of the largest planes that is a support, and another above it that may be one or the object's own.

    Lowest among those that face the same way: the flange of a casting that stands on a table looks like a table too.
    """
    # A plane shows in some of the samples as well as in all of them.
    some = np.arange(0, len(cloud.points), -(-len(cloud.points) // MOST_LOOKED_AT))
    whole, cloud = cloud, cloud.keep(np.isin(np.arange(len(cloud.points)), some))
    raw = raw_normals(cloud.points)
    areas = sample_areas(raw.distance[:, : min(8, raw.distance.shape[1])])
    areas = np.minimum(areas, 50.0 * np.median(areas))
    cell = gap_cell(raw.distance)
    # Samples are within four sigma of their plane; a floor also bends a little.
    tolerance = max(4.0 * raw.noise, 0.001 * cloud.size)
    rng = stream(seed, "support")
    left = np.ones(len(cloud.points), np.bool_)
    slab: Judged | None = None
    best: Judged | None = None
    for _ in range(CANDIDATES):
        plane = largest_plane(cloud.points[left], raw.normals[left], areas[left], tolerance, rng)
        if plane is None:
            break
        normal, offset = plane
        near = left & (np.abs(cloud.points @ normal - offset) <= 2.0 * tolerance)
        near &= np.abs(raw.normals @ normal) > 0.9
        if areas[near].sum() < LEAST_SHARE * areas.sum():
            break
        level = up is None or abs(float(normal @ up)) > np.cos(np.radians(TILT))
        if level:
            judged = judge_plane(cloud.points, raw.normals, areas, normal, offset, tolerance, cell)
            if up is None or judged.up @ up > 0:
                if judged.kind in ("support plane", "turntable") and (best is None or _is_lower(judged, best)):
                    best, judged = judged, best or judged
                if judged is not best and judged.kind in ("slab", "turntable") and slab is None:
                    slab = judged
        left &= ~near
    return None if best is None else _for_all(best, whole.points, cloud.points, tolerance), slab


def _for_all(judged: Judged, points: FloatArray, looked_at: FloatArray, tolerance: float) -> Judged:
    """The same, with what goes told for all points: those on the plane or under it whose nearest judged one goes."""
    low = np.flatnonzero(points @ judged.up - judged.offset <= tolerance)
    _, near = nearest(looked_at, 1, points[low])
    remove = np.zeros(len(points), np.bool_)
    remove[low] = judged.remove[near[:, 0]]
    return replace(judged, remove=remove)


def _is_lower(one: Judged, other: Judged) -> bool:
    return float(one.up @ other.up) > np.cos(np.radians(TILT)) and one.offset < other.offset


def gap_cell(distance: FloatArray) -> float:
    """Edge of the cells that pieces are joined over: twice the reach of eight neighbours on the sparse side."""
    reach = distance[:, min(8, distance.shape[1]) - 1]
    return 2.0 * float(np.quantile(reach, 0.9))


def _without_support(cloud: Cloud, found: Judged) -> tuple[Cloud, Removed, Note]:
    share = float(cloud.count[found.remove].sum() / cloud.count.sum())
    removed = Removed.from_cloud(cloud, found.remove, found.kind)
    what = "A round disc under the object" if found.kind == "turntable" else "A plane under the object"
    text = (
        f"{what} goes on beyond its outline and was taken for a {found.kind.split()[0]}: {100 * share:.0f} % of the "
        "points were removed. If it is part of the object, set clean.support to none."
    )
    return cloud.keep(~found.remove), removed, Note(f"{found.kind.split()[0]}-removed", text)


def _contact(cloud: Cloud, found: Judged, declared: FloatArray | None) -> float:
    """Height along ``up`` of the support below the object's middle."""
    if declared is None:
        return found.offset
    middle = 0.5 * (cloud.points.min(axis=0) + cloud.points.max(axis=0))
    foot = middle - (middle @ found.up - found.offset) * found.up
    return float(foot @ declared)


def _without_clutter(cloud: Cloud, seed: int) -> tuple[Cloud, Removed, list[Note], list[Note]]:
    if len(cloud.points) < 30:
        raise ScanFault(
            f"only {len(cloud.points)} points are left once the support is taken away",
            allowed="scan the object itself, or set clean.support to none",
        )
    asked = cloud.points[:: -(-len(cloud.points) // MOST_LOOKED_AT)]
    distance, _ = nearest(cloud.points, 9, asked)
    pieces = sort_pieces(cloud.points, gap_cell(distance[:, 1:]), stream(seed, "pieces"))
    if pieces.rivals:
        sizes = ", ".join(f"{1000 * s:.4g} mm" for s in (pieces.size, *pieces.rivals))
        raise ScanFault(
            f"the scan holds {1 + len(pieces.rivals)} separate objects of similar size ({sizes})",
            allowed="give one object a scan: crop the others away",
        )
    said, warned = list[Note](), list[Note]()
    if pieces.joined:
        text = f"{pieces.joined} pieces that were seen apart from the rest were kept as parts of the object."
        said.append(Note("pieces-joined", text))
    share = float(cloud.count[pieces.clutter].sum() / cloud.count.sum())
    if pieces.clutter.any():
        text = f"Separate pieces, {100 * share:.1f} % of the points, were taken for clutter and removed."
        (warned if share > WARN_CLUTTER else said).append(Note("clutter-removed", text))
    away = Removed.from_cloud(cloud, pieces.clutter, "clutter")
    away = away.joined(Removed.from_cloud(cloud, pieces.strays, "outlier"))
    return cloud.keep(~(pieces.clutter | pieces.strays)), away, said, warned
