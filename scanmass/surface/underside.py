"""The side that an object stands on: from the rim of what was seen down to the floor, as declared or bracketed."""

from __future__ import annotations

import numpy as np
from scipy.spatial import cKDTree

from scanmass.errors import Declined, Note
from scanmass.geometry.planes import plane_axes
from scanmass.geometry.polyhedron import face_areas
from scanmass.surface.base import Base
from scanmass.surface.level import UNSURE_END, standing_level
from scanmass.surface.mesh import FloatArray, Mesh
from scanmass.surface.sight import ends_in_sight
from scanmass.surface.span import Mask, Span, converges, corners, floor, low_membrane, tangent_cone
from scanmass.surface.standing import resting_plane
from scanmass.surface.whereabouts import whereabouts


def underside_span(mesh: Mesh, region: Mask, base: Base, normals: FloatArray, notes: list[Note]) -> Span:
    """The gap that the object stands on, closed as declared.

    ``normals`` (n, 3): of the seen surface at vertices, smoothed. What is assumed goes to ``notes``.

    Raises
    ------
    Declined
        A declared recess deeper than the object is tall.
    """
    up, level, lowest = base.up, base.level, base.lowest
    if up is None or level is None or lowest is None:
        up, lowest = resting_plane(mesh, region, base.samples)
        level = standing_level(base.samples @ up, base.pitch) if base.pitch > 0.0 else lowest
        text = "up is not known: the largest unseen part is taken for the underside, on a plane that touches all points"
        notes.append(Note("underside-from-gap", text))
    near = low_membrane(mesh, region, normals, up, level, base.samples, base.pitch)
    if base.underside in ("flat", "hollow"):
        return _declared(mesh, region, base, normals, near, up, level, notes)
    # Walls go on below their lowest samples by some of the spacing; a support, or a mesh, ends where it ends.
    lowest -= 0.0 if base.supported else UNSURE_END * base.pitch
    far, _ = _down(mesh, region, base, normals, near, up, lowest, inward=False)
    # ... and a surface that turned out of sight may go on, but not a wall that was in full sight where it ends.
    open_below = not base.supported and converges(mesh, region, up)
    open_below = open_below and not ends_in_sight(mesh, region, normals, up, base.sights)
    lid = tangent_cone(mesh, region, normals) if open_below else None
    if lid is not None:
        lid = np.where((lid @ up < far @ up)[:, None], lid, far)
    notes.append(_unknown_note(mesh, region, near, lid is not None))
    return Span(region, near, far, 0.5, True, "underside", lid=lid)


def _unknown_note(mesh: Mesh, region: Mask, near: FloatArray, narrows: bool) -> Note:
    text = (
        f"the underside ({_share(mesh, region, near)}) was not seen: it is taken to be solid down to some surface "
        "between the rim of what was seen and the floor, with nothing recessed above the rim. If it may be hollow or "
        "cut out below, mass and volume may lie below their bounds: feel under it, and declare surface.underside"
    )
    if narrows:
        text += (
            "; the surface turns out of sight at the rim and no support was found, so it may also close below the "
            "lowest points"
        )
    return Note("nothing-recessed-above-rim", text)


def _share(mesh: Mesh, region: Mask, near: FloatArray) -> str:
    """The gap's part of the surface, spanned by a membrane: the reconstruction's own lid may be any size."""
    seen, _ = face_areas(mesh.vertices, mesh.faces[~region])
    spanned, _ = face_areas(near, mesh.faces[region])
    return f"{100 * spanned.sum() / (spanned.sum() + seen.sum()):.2g} % of the surface"


def _declared(
    mesh: Mesh,
    region: Mask,
    base: Base,
    normals: FloatArray,
    near: FloatArray,
    up: FloatArray,
    level: float,
    notes: list[Note],
) -> Span:
    """Flat, or raised by the declared depth, where the object can stand; bracketed where the floor below was seen."""
    far, hangs = _down(mesh, region, base, normals, near, up, level, inward=True)
    inside, _ = corners(mesh, region)
    recess = np.zeros((len(far), 1))
    if base.underside == "hollow":
        recess[inside & ~hangs] = _depth(mesh, base, up, level, notes)
    far = far + recess * up
    text = (
        f"the underside ({_share(mesh, region, near)}) was not seen, and is closed {base.underside} as declared: on "
        "feet or runners that hide what is between them the object weighs less"
    )
    foot = base.foot
    if foot is not None:
        text += (
            f"; where it ends is told by samples alone, to {1000 * (foot.highest - foot.lowest):.2g} mm: both ends are "
            "in the bracket"
        )
    notes.append(Note("underside-as-declared", text))
    if foot is not None:
        ends = [floor(mesh, region, normals, up, z, inward=True) + recess * up for z in (foot.highest, foot.lowest)]
        share = (foot.highest - foot.level) / (foot.highest - foot.lowest)
        return Span(region, ends[0], ends[1], share, True, "underside")
    if not hangs[inside].any():
        return Span(region, near, far, 1.0, False, "underside")
    spanned, _ = face_areas(near, mesh.faces[region])
    share = float(spanned[hangs[mesh.faces[region]].any(axis=1)].sum() / spanned.sum())
    text = (
        f"{100 * share:.2g} % of the underside that was declared {base.underside} hangs over floor that was seen "
        f"({whereabouts(mesh, region, up)}): there it is bracketed between the rim of what was seen and the lines of "
        "sight"
    )
    notes.append(Note("underside-partly-off-the-floor", text))
    return Span(region, np.where(hangs[:, None], near, far), far, 0.5, True, "underside")


def _depth(mesh: Mesh, base: Base, up: FloatArray, level: float, notes: list[Note]) -> float:
    """The declared depth of the recess."""
    tall = float((mesh.vertices @ up).max()) - level
    depth = base.hollow_depth
    if depth is None or depth >= tall:
        raise Declined(
            f"the declared recess of {0.0 if depth is None else depth * 1000:.4g} mm is deeper than the object is tall "
            f"({tall * 1000:.4g} mm)",
            allowed="check surface.underside",
        )
    text = (
        f"the underside is recessed by {depth * 1000:.4g} mm over the whole contact outline: the thickness of the rim "
        "is not known and taken as zero"
    )
    notes.append(Note("recess-without-rim", text))
    return depth


def _down(
    mesh: Mesh,
    region: Mask,
    base: Base,
    normals: FloatArray,
    near: FloatArray,
    up: FloatArray,
    level: float,
    *,
    inward: bool,
) -> tuple[FloatArray, Mask]:
    """Vertices (n, 3) with the region as low as it can be, and which (n,) of them hang.

    Where the floor was not seen, down to it. Where it was, a line of sight passes under the rim of the object and meets
    the floor: between the edge of what was seen of the floor and the rim, the body ends above the straight line
    between them. A place hangs where the floor below it was seen, or below the nearest part of the rim: nothing shows
    that the object stands there, for a line of sight may have missed what hides the floor.
    """
    plumb = floor(mesh, region, normals, up, level, inward=inward)
    clear = np.zeros(len(mesh.vertices))
    if base.ground is None:
        return plumb, clear > 0.0
    inside, rim = corners(mesh, region)
    # The rim itself: where it stands over the floor that was seen, no wall goes down from it.
    clear[rim] = base.ground.clear(near[rim])
    ends = np.where(clear > 0.0, np.maximum(near @ up, level), level)
    result = floor(mesh, region, normals, up, ends, inward=inward)
    inner = np.flatnonzero(inside & ~rim)
    flat = plane_axes(up)
    distance, index = cKDTree(near[rim] @ flat.T).query(result[inner] @ flat.T)
    clear[inner] = base.ground.clear(result[inner])
    whole = clear[inner] + distance
    part = clear[inner] / np.where(whole > 0.0, whole, 1.0)
    height = level + part * np.maximum((near[rim] @ up)[index] - level, 0.0)
    result[inner] += (height - result[inner] @ up)[:, None] * up
    hangs = clear > 0.0
    hangs[inner] |= hangs[rim][index]
    over = inner[clear[inner] > 0.0]
    if len(over):
        # The edge of what was seen of the floor is known to a margin either way.
        apart, _ = cKDTree(result[over] @ flat.T).query(result[inner] @ flat.T)
        hangs[inner] |= apart < 2.0 * base.ground.margin
    return result, hangs
