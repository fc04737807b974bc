"""How an object stands, and what is known of its underside."""

from __future__ import annotations

from dataclasses import dataclass

from scipy.spatial import cKDTree

from scanmass.errors import Declined, Note
from scanmass.surface.ground import Ground
from scanmass.surface.level import UNSURE_END, Foot, foot, lowest_level, standing_level
from scanmass.surface.mesh import FloatArray
from scanmass.surface.sight import Sights
from scanmass.surface.surface import Underside

BESIDE = 4.0
"""A sample within so many pitches of what was kept of the object is the object's: two rows at an edge of a view's grid
are some four pitches of all views together."""


@dataclass(frozen=True)
class Base:
    """How the object stands and what is known of its underside.

    ``level`` is the height of the contact plane, ``lowest`` of what was seen; ``samples`` (k, 3) are
    the scan's and ``pitch`` their spacing, 0 where they are a mesh's; ``supported``: a support gave the plane;
    ``ground``: where the support was seen, None where it was not; ``foot``: where samples alone put the contact plane,
    None where a support or a mesh gave it; ``sights``: what each view saw and from where, None where not known.
    """

    underside: Underside
    hollow_depth: float | None
    up: FloatArray | None
    level: float | None
    lowest: float | None
    samples: FloatArray
    pitch: float
    supported: bool = False
    ground: Ground | None = None
    foot: Foot | None = None
    sights: Sights | None = None


def require_declared(underside: Underside, hollow_depth: float | None, up: FloatArray | None) -> None:
    """Raise Declined where the declared underside lacks what it needs."""
    if underside in ("flat", "hollow") and up is None:
        raise Declined(
            f"surface.underside {underside} needs to know which way is up",
            allowed="declare scan.up, or scan the object with its support",
        )
    if underside == "hollow" and not (hollow_depth is not None and hollow_depth > 0):
        raise Declined("surface.underside hollow needs a depth above zero", allowed="write it as {hollow: 30 mm}")


def standing_base(
    underside: Underside,
    hollow_depth: float | None,
    up: FloatArray | None,
    contact_height: float | None,
    points: FloatArray,
    pitch: float,
    notes: list[Note],
    floor_samples: FloatArray | None = None,
    edge_samples: FloatArray | None = None,
) -> Base:
    """The contact plane: the support's where one was found, else from the lowest samples (and noted).

    ``edge_samples`` (k, 3): what cleaning took away at the edges of range grids. It takes the lowest rows of every
    view, so the samples that are left thin out above the foot, and would put it too high.
    """
    if up is None:
        return Base(underside, hollow_depth, None, None, None, points, pitch)
    heights = points @ up
    if contact_height is not None:
        ground = None
        if floor_samples is not None:
            ground = Ground.of(floor_samples, up, contact_height, points)
        return Base(underside, hollow_depth, up, contact_height, contact_height, points, pitch, True, ground)
    text = "the object is taken to stand on the plane through the lowest points of the scan (no support was found)"
    notes.append(Note("contact-at-lowest-point", text))
    if pitch == 0.0:
        return Base(underside, hollow_depth, up, lowest_level(heights), lowest_level(heights), points, pitch)
    edges = heights[:0] if edge_samples is None else _beside(edge_samples, points, pitch) @ up
    stands = foot(heights, edges, pitch)
    # The least body stands on what cleaning left; what it took may be displaced.
    level, lowest = standing_level(heights, pitch), stands.lowest + UNSURE_END * pitch
    return Base(underside, hollow_depth, up, level, lowest, points, pitch, foot=stands)


def _beside(dropped: FloatArray, points: FloatArray, pitch: float) -> FloatArray:
    """The samples (k, 3) of ``dropped`` that lie on the object, not on what else was in the scan."""
    distance, _ = cKDTree(points).query(dropped)
    beside: FloatArray = dropped[distance < BESIDE * pitch]
    return beside
