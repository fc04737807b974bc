"""How an object stands, and what is known of its underside."""

from __future__ import annotations

from dataclasses import dataclass

from scanmass.errors import Declined, Note
from scanmass.surface.ground import Ground
from scanmass.surface.level import lowest_level, standing_level
from scanmass.surface.mesh import FloatArray
from scanmass.surface.surface import Underside


@dataclass(frozen=True)
class Base:
    """How the object stands and what is known of its underside.

    ``level`` is the height of the contact plane, ``lowest`` of what was seen; ``samples`` (k, 3) are
    the scan's and ``pitch`` their spacing, 0 where they are a mesh's; ``supported``: a support gave the plane;
    ``ground``: where the support was seen, None where it was not.
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
) -> Base:
    """The contact plane: the support's where one was found, else from the lowest samples (and noted)."""
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
    level = lowest_level(heights) if pitch == 0.0 else standing_level(heights, pitch)
    return Base(underside, hollow_depth, up, level, lowest_level(heights), points, pitch)
