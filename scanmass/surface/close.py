"""Closing what the scan did not see, and bracketing what it could be."""

from __future__ import annotations

from dataclasses import replace
from typing import Literal

import numpy as np

from scanmass.cloud.cloud import Cloud
from scanmass.errors import Declined, Note
from scanmass.geometry.edges import count_edges, parted, shell_labels
from scanmass.geometry.loops import rim_edges
from scanmass.geometry.polyhedron import face_areas
from scanmass.progress import Progress, silent
from scanmass.surface.assemble import assembled, closures
from scanmass.surface.base import Base, require_declared, standing_base
from scanmass.surface.columns import swept_volume
from scanmass.surface.coverage import gaps, inferred_faces, seen_vertices
from scanmass.surface.mesh import FloatArray, Mesh
from scanmass.surface.onesided import require_all_round
from scanmass.surface.sight import Sights
from scanmass.surface.span import Mask, Span, membrane, seen_normals, tangent_cone
from scanmass.surface.standing import standing
from scanmass.surface.surface import Surface, Underside
from scanmass.surface.underside import underside_span
from scanmass.surface.whereabouts import whereabouts

NEGLIGIBLE = 1e-4
"""A hole whose membrane and tangent cone differ by less than this share of the volume is left as it is."""
NAMED = 4
"""So many unseen parts are named one by one in a note."""
LARGE_GAP = 0.05
"""A gap of more than this share of the area contradicts ``underside: seen``, and is warned about."""


def close(
    mesh: Mesh,
    cloud: Cloud,
    *,
    underside: Underside = "unknown",
    hollow_depth: float | None = None,
    up: FloatArray | None = None,
    contact_height: float | None = None,
    floor_samples: FloatArray | None = None,
    edge_samples: FloatArray | None = None,
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
    floor_samples : (k, 3) of the support the object stands on: above what was seen of it nothing reaches down to it
    edge_samples : (k, 3) that cleaning took away at edges of range grids: where no support was found they tell how far
        down the object reaches

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
    spacing = float(np.median(pitch))
    base = standing_base(
        underside, hollow_depth, up, contact_height, cloud.points, spacing, notes, floor_samples, edge_samples
    )
    base = replace(base, sights=Sights.of(cloud))
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
    normals = seen_normals(mesh, ~np.any(regions, axis=0)) if regions else mesh.vertices
    spans, holes = [], []
    for region, is_base in zip(regions, standing(mesh, regions, base), strict=True):
        share = float(area[region].sum() / area.sum())
        if is_base:
            spans.append(underside_span(mesh, region, base, normals, notes))
            continue
        span = _hole(mesh, region, normals, volume)
        if span is not None:
            spans.append(span)
            holes.append((share, whereabouts(mesh, region, base.up)))
        if base.underside == "seen" and share > LARGE_GAP:
            text = f"the underside was declared seen, yet a part of {100 * share:.0f} % of the surface was not"
            warnings.append(Note("large-part-unseen", text))
    if holes:
        notes.append(_hole_note(holes))
    return spans


def _hole_note(holes: list[tuple[float, str]]) -> Note:
    """One note of all the holes: how many, how large, and where the largest are."""
    holes = sorted(holes, reverse=True)
    named = "; ".join(f"{100 * share:.2g} % {where}" for share, where in holes[:NAMED])
    count = "1 part" if len(holes) == 1 else f"{len(holes)} parts"
    more = "" if len(holes) <= NAMED else f"; and {len(holes) - NAMED} smaller"
    text = (
        f"{count} of the surface beside the underside, {100 * sum(share for share, _ in holes):.2g} % of it, not seen "
        f"({named}{more}): closed half-way between a membrane on the rim and the cone of the tangents there; both are "
        "in the bracket, a pocket or bore that goes deeper than either is not: only a view into it would show it"
    )
    return Note("hole-closed", text)


def _hole(mesh: Mesh, region: Mask, normals: FloatArray, volume: float) -> Span | None:
    near, far = membrane(mesh, region), tangent_cone(mesh, region, normals)
    if abs(swept_volume(mesh.faces[region], near, far)) <= NEGLIGIBLE * volume:
        return None
    return Span(region, near, far, 0.5, True, "hole")
