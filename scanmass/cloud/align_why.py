"""Why views do not fit: another unit, a mirror image, or two objects."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy.spatial import cKDTree

from scanmass.cloud.align_match import Candidate, Scale, candidates
from scanmass.cloud.align_samples import ViewSamples, recut
from scanmass.errors import Declined

UNITS = {
    1000.0: "as if one were in m and read in mm",
    10.0: "as if one were in cm and read in mm",
    25.4: "as if one were in inch and read in mm",
    2.54: "as if one were in inch and read in cm",
    100.0: "as if one were in m and read in cm",
    39.3701: "as if one were in m and read in inch",
    304.8: "as if one were in ft and read in mm",
}
"""Ratios of length units."""
UNLIKE = 1.9
"""Ratio of the sizes of two views above which another unit is thought of."""
NEAR = 1.6
WELL = 0.12
"""Overlap at which a view that was changed fits, where as it is it does not."""
CLEAN = 0.01
CLEARLY = 1.5
"""How many times better a mirrored view must fit."""


def explained(fault: Declined, views: list[ViewSamples]) -> Declined:
    """The fault with what would make the views fit, where that can be told."""
    said = _unit(views) or _mirrored(views)
    return fault if said is None else said


def unit_ratio(ratio: float) -> float | None:
    """The ratio of two units that a ratio of sizes is near, None where it is near none."""
    near = min(UNITS, key=lambda r: abs(np.log(ratio / r)))
    return near if 1.0 / NEAR < ratio / near < NEAR else None


def _unit(views: list[ViewSamples]) -> Declined | None:
    sizes = np.array([view.size for view in views])
    middle = float(np.median(sizes))
    odd = int(np.argmax(np.abs(np.log(sizes / middle))))
    other = int(np.argmin(np.abs(np.log(sizes / middle)) + 10.0 * (np.arange(len(sizes)) == odd)))
    ratio = float(sizes[odd] / sizes[other])
    if len(views) == 2 or max(ratio, 1.0 / ratio) < UNLIKE:
        odd, other = (int(np.argmax(sizes)), int(np.argmin(sizes))) if len(views) == 2 else (odd, other)
        ratio = float(sizes[odd] / sizes[other])
    large = max(ratio, 1.0 / ratio)
    if large < UNLIKE:
        return None
    near = unit_ratio(large)
    seen = (
        f"the views {views[other].name} and {views[odd].name} differ in size: {_length(sizes[other])} and "
        f"{_length(sizes[odd])}, {large:.3g} times"
    )
    if near is None:
        return Declined(seen, allowed="give views of one object, all in one unit")
    return Declined(
        f"{seen}, near {near:g}, {UNITS[near]}",
        allowed="export all views in one unit: scan.unit holds for all of them",
    )


def _length(metres: float) -> str:
    return f"{metres:.3g} m" if metres >= 1.0 else f"{1000 * metres:.3g} mm"


def _mirrored(views: list[ViewSamples]) -> Declined | None:
    """A view that fits only as its mirror image."""
    size = float(np.median([view.size for view in views]))
    scale = Scale(size, max(5.0 * float(np.median([v.noise for v in views])), 0.001 * size))
    found: list[tuple[float, int, int]] = []
    for odd in range(len(views)):
        changed = list(views)
        changed[odd] = mirrored(views[odd])
        best, as_it_is = _best(changed, odd, scale), _best(views, odd, scale)
        if best is None or best.fit.overlap < WELL or best.fit.contradiction > CLEAN:
            continue
        before = 0.0 if as_it_is is None else as_it_is.score
        if best.score > CLEARLY * before:
            found.append((best.score - before, odd, best.one))
    if not found:
        return None
    _, odd, other = max(found)
    return Declined(
        f"{views[odd].name} fits {views[other].name} only as its mirror image: one of the two is mirrored",
        allowed="export it again without mirroring: one axis is turned round, or two are exchanged",
    )


def _best(views: list[ViewSamples], odd: int, scale: Scale) -> Candidate | None:
    """The pose of view ``odd`` on another that is least spoken against."""
    found = [c for v in range(len(views)) if v != odd for c in candidates(views, v, odd, scale)[:1]]
    return max(found, key=lambda c: c.score, default=None)


def mirrored(view: ViewSamples) -> ViewSamples:
    """The mirror image of a view, x turned round."""
    flip = np.array([-1.0, 1.0, 1.0])
    points = view.points * flip
    seen = None if view.sight is None else recut(points, view.sight.eye * flip, view.spacing)
    return replace(
        view,
        points=points,
        normals=view.normals * flip,
        coarse=view.coarse * np.tile(flip, 2),
        sight=seen,
        tree=cKDTree(points),
    )
