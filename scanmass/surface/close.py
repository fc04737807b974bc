"""Closing what the scan did not see, and bracketing what it could be."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from scipy.spatial import cKDTree

from scanmass.cloud.cloud import Cloud
from scanmass.errors import Declined, Note
from scanmass.geometry.edges import count_edges, parted, shell_labels
from scanmass.geometry.loops import rim_edges
from scanmass.geometry.planes import plane_axes
from scanmass.geometry.polyhedron import face_areas
from scanmass.progress import Progress, silent
from scanmass.surface.assemble import assembled, closures
from scanmass.surface.coverage import gaps, inferred_faces, seen_vertices
from scanmass.surface.level import lowest_level, standing_level
from scanmass.surface.mesh import FloatArray, Mesh
from scanmass.surface.onesided import require_all_round
from scanmass.surface.span import Mask, Span, converges, corners, floor, low_membrane, membrane, outward, tangent_cone
from scanmass.surface.surface import Surface, Underside

NEGLIGIBLE = 1e-4
"""A hole whose membrane and tangent cone differ by less than this share of the volume is left as it is."""
FACING = 0.5
"""A gap is the underside's when its outward direction is within 60 degrees of straight down,"""
STANDING = 0.25
"""... and its rim begins in the lowest quarter of the object."""
COVERED = 0.3
"""... and no more than this share of it has seen surface of the object below it."""
LARGE_GAP = 0.05
"""A gap of more than this share of the area contradicts ``underside: seen``, and is warned about."""


@dataclass(frozen=True)
class Base:
    """How the object stands and what is known of its underside.

    ``level`` is the height of the contact plane, ``lowest`` the height below which nothing is; ``samples`` (k, 3) are
    the scan's and ``pitch`` their spacing, 0 where they are a mesh's; ``supported``: a support gave the plane.
    """

    underside: Underside
    hollow_depth: float | None
    up: FloatArray | None
    level: float | None
    lowest: float | None
    samples: FloatArray
    pitch: float
    supported: bool = False


def close(
    mesh: Mesh,
    cloud: Cloud,
    *,
    underside: Underside = "unknown",
    hollow_depth: float | None = None,
    up: FloatArray | None = None,
    contact_height: float | None = None,
    progress: Progress = silent,
) -> Surface:
    """The reconstructed mesh with what no sample supports replaced by a declared or bracketed closure.

    Parameters
    ----------
    mesh : closed, from :func:`.reconstruct` and :func:`.refine`
    underside : ``seen``, ``flat`` (a cap in the contact plane), ``hollow`` (the cap raised by ``hollow_depth``),
        ``unknown`` (bracketed between a membrane on the rim of what was seen and the floor)
    up : (3,), unit, or None
    contact_height : ``up . r`` of the contact plane in metres; from the lowest samples where None

    Raises
    ------
    Declined
        One-sided scans; ``flat`` or ``hollow`` without up; a recess deeper than the body.
    """
    up = None if up is None else np.asarray(up, np.float64) / np.linalg.norm(up)
    require_declared(underside, hollow_depth, up)
    progress("close", 0, 3)
    distance, pitch = seen_vertices(mesh, cloud)
    notes: list[Note] = []
    base = standing_base(underside, hollow_depth, up, contact_height, cloud.points, float(np.median(pitch)), notes)
    require_all_round(mesh, inferred_faces(mesh, distance), up, base.level)
    progress("close", 1, 3)
    inferred, regions = _missed(mesh, cloud, base)
    bubbles = [region for region in regions if len(rim_edges(mesh.faces, region)) == 0]
    if bubbles and not np.any(bubbles, axis=0).all():
        mesh = _without(mesh, bubbles)
        inferred, regions = _missed(mesh, cloud, base)
    progress("close", 2, 3)
    surface = close_gaps(mesh, regions, inferred, base, notes, "points")
    progress("close", 3, 3)
    return surface


def _missed(mesh: Mesh, cloud: Cloud, base: Base) -> tuple[Mask, list[Mask]]:
    """Faces (m,) with no sample near, and the gaps to close."""
    distance, pitch = seen_vertices(mesh, cloud)
    below = None
    if base.underside != "seen" and base.up is not None and base.lowest is not None:
        below = (mesh.vertices @ base.up < base.lowest - pitch) & (distance > 1.0)
    return inferred_faces(mesh, distance), gaps(mesh, distance, pitch, below)


def _without(mesh: Mesh, bubbles: list[Mask]) -> Mesh:
    """The mesh without whole shells on which next to nothing was seen: the reconstruction's own."""
    text = f"{len(bubbles)} bubble(s) of the reconstruction on which next to no point lies were dropped"
    kept = mesh.keep(~np.any(bubbles, axis=0))
    return replace(kept, notes=(*kept.notes, Note("bubbles-dropped", text)))


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
) -> Base:
    """The contact plane: the support's where one was found, else from the lowest samples (and noted)."""
    if up is None:
        return Base(underside, hollow_depth, None, None, None, points, pitch)
    heights = points @ up
    if contact_height is not None:
        return Base(underside, hollow_depth, up, contact_height, contact_height, points, pitch, True)
    text = "the object is taken to stand on the plane through the lowest points of the scan (no support was found)"
    notes.append(Note("contact-at-lowest-point", text))
    level = lowest_level(heights) if pitch == 0.0 else standing_level(heights, pitch)
    return Base(underside, hollow_depth, up, level, lowest_level(heights), points, pitch)


def close_gaps(
    mesh: Mesh,
    regions: list[Mask],
    inferred: Mask,
    base: Base,
    notes: list[Note],
    source: Literal["points", "mesh"],
) -> Surface:
    """The surface with every region closed, shared by reconstructed clouds and open meshes."""
    warnings = list(mesh.notes)
    spans = _spans(mesh, regions, base, notes, warnings)
    whole, spanned = assembled(mesh, spans)
    spanned[: len(inferred)] |= inferred
    edges = count_edges(whole.faces)
    if not edges.balanced:
        text = f"closing the surface left {edges.open} open and {edges.clashing} clashing edges"
        raise Declined(text, allowed="scan what was missed")
    # Sheets that touch along an edge are parted: the faces stay where they are.
    vertices, faces = parted(whole.vertices, whole.faces)
    whole = replace(whole, vertices=vertices, faces=faces)
    if whole.moments[0] <= 0:
        raise Declined("the closed surface has no volume above zero", allowed="check surface.underside and scan.up")
    return Surface(
        vertices=whole.vertices,
        faces=whole.faces,
        inferred=spanned,
        source=source,
        resolution=mesh.resolution,
        underside=base.underside,
        shells=shell_labels(whole.faces)[0],
        closures=closures(mesh, spans),
        assumptions=tuple(dict.fromkeys(notes)),
        warnings=tuple(dict.fromkeys(warnings)),
    )


def _spans(mesh: Mesh, regions: list[Mask], base: Base, notes: list[Note], warnings: list[Note]) -> list[Span]:
    area, _ = face_areas(mesh.vertices, mesh.faces)
    volume = abs(float(mesh.moments[0]))
    spans = []
    standing = _standing(mesh, regions, base)
    for region, is_base in zip(regions, standing, strict=True):
        share = float(area[region].sum() / area.sum())
        if is_base:
            spans.append(_underside(mesh, region, base, notes))
            continue
        span = _hole(mesh, region, volume)
        if span is not None:
            spans.append(span)
            notes.append(_hole_note(share))
        if base.underside == "seen" and share > LARGE_GAP:
            text = f"the underside was declared seen, yet a part of {share:.0%} of the surface was not"
            warnings.append(Note("large-part-unseen", text))
    return spans


def _hole_note(share: float) -> Note:
    text = (
        f"a hole of {share:.1%} of the surface is closed half-way between a membrane on its rim and the cone of the "
        "tangents there; both are kept in the bracket"
    )
    return Note("hole-closed", text)


def _standing(mesh: Mesh, regions: list[Mask], base: Base) -> list[bool]:
    """Which of the gaps are the underside."""
    if base.underside == "seen" or not regions:
        return [False] * len(regions)
    shadows = [outward(mesh, region) for region in regions]
    seen = ~np.any(regions, axis=0)
    if base.up is None or base.level is None:
        largest = int(np.argmax([np.linalg.norm(shadow) for shadow in shadows]))
        return [k == largest for k in range(len(regions))]
    heights = mesh.vertices @ base.up - base.level
    tall = float(heights.max())
    found = []
    for region, shadow in zip(regions, shadows, strict=True):
        _, rim = corners(mesh, region)
        begins = float(heights[rim].min(initial=np.inf))
        facing = abs(float(shadow @ base.up)) > FACING * float(np.linalg.norm(shadow))
        low = facing and begins < STANDING * tall
        found.append(bool(low and not _covered_below(mesh, region, base.up, seen)))
    return found


def _covered_below(mesh: Mesh, region: Mask, up: FloatArray, seen: Mask) -> bool:
    """Whether the object itself was seen under a gap, as a plinth under a belly: then the gap is no underside."""
    flat = plane_axes(up)
    middles = mesh.vertices[mesh.faces].mean(axis=1)
    _, normals = face_areas(mesh.vertices, mesh.faces)
    top = seen & (normals @ up > 0)
    if not top.any():
        return False
    spread = membrane(mesh, region)[mesh.faces[region]].mean(axis=1)
    distance, nearest = cKDTree(middles[top] @ flat.T).query(spread @ flat.T)
    under = (distance < mesh.resolution) & (middles[top][nearest] @ up < spread @ up - 2.0 * mesh.resolution)
    return bool(np.mean(under) > COVERED)


def _underside(mesh: Mesh, region: Mask, base: Base, notes: list[Note]) -> Span:
    up, level, lowest = base.up, base.level, base.lowest
    if up is None or level is None or lowest is None:
        up, lowest = _resting_plane(mesh, region, base.samples)
        level = standing_level(base.samples @ up, base.pitch) if base.pitch > 0.0 else lowest
        text = "up is not known: the largest unseen part is taken for the underside, on a plane that touches all points"
        notes.append(Note("underside-from-gap", text))
    near = low_membrane(mesh, region, up, level, base.samples, base.pitch)
    if base.underside == "flat":
        return Span(region, near, floor(mesh, region, up, level, inward=True), 1.0, False, "underside")
    if base.underside == "hollow":
        return _recess(mesh, region, near, up, level, base.hollow_depth, notes)
    text = (
        "what was not seen below the rim is taken to be solid down to some surface between the rim and the floor: "
        "nothing is recessed above the rim (if it may be hollow, declare surface.underside)"
    )
    lid = tangent_cone(mesh, region) if not base.supported and converges(mesh, region, up) else None
    if lid is not None:
        text += (
            "; the surface narrows at the rim and no support was found, so it may also close below the lowest points"
        )
    notes.append(Note("nothing-recessed-above-rim", text))
    return Span(region, near, floor(mesh, region, up, lowest, inward=False), 0.5, True, "underside", lid=lid)


def _resting_plane(mesh: Mesh, region: Mask, samples: FloatArray) -> tuple[FloatArray, float]:
    """Up (3,) and height of the plane, touching all samples, that the object would rest on over the gap.

    It is the face of the samples' convex hull through which the gap looks out.
    """
    from scipy.spatial import ConvexHull

    _, rim = corners(mesh, region)
    start = mesh.vertices[rim].mean(axis=0)
    way = outward(mesh, region)
    way /= np.linalg.norm(way)
    planes = ConvexHull(samples).equations
    facing = planes[:, :3] @ way > 1e-9
    distance = -(planes[facing, :3] @ start + planes[facing, 3]) / (planes[facing, :3] @ way)
    plane = planes[facing][np.argmin(distance)]
    return -plane[:3], float(plane[3])


def _recess(
    mesh: Mesh, region: Mask, near: FloatArray, up: FloatArray, level: float, depth: float | None, notes: list[Note]
) -> Span:
    tall = float((mesh.vertices @ up).max()) - level
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
    far = floor(mesh, region, up, level, inward=True)
    inside, _ = corners(mesh, region)
    far[inside] += depth * up
    return Span(region, near, far, 1.0, False, "underside")


def _hole(mesh: Mesh, region: Mask, volume: float) -> Span | None:
    near, far = membrane(mesh, region), tangent_cone(mesh, region)
    if abs(float(mesh.moved(far).moments[0] - mesh.moved(near).moments[0])) <= NEGLIGIBLE * volume:
        return None
    return Span(region, near, far, 0.5, True, "hole")
