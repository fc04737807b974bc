"""A measured surface from a scan that is a mesh: as it is where it is closed, closed where it is open."""

from __future__ import annotations

import numpy as np

from scanmass.cloud.cloud import Cloud
from scanmass.errors import Declined, Note
from scanmass.geometry.edges import boundary_loops, count_edges, half_edges, shell_labels, welded
from scanmass.geometry.polyhedron import face_areas
from scanmass.progress import Progress, silent
from scanmass.seeds import stream
from scanmass.surface.base import require_declared, standing_base
from scanmass.surface.cap import capped
from scanmass.surface.close import close_gaps
from scanmass.surface.from_cloud import surface_from_cloud
from scanmass.surface.mesh import FaceArray, FloatArray, Mesh
from scanmass.surface.onesided import require_all_round
from scanmass.surface.sampling import median_pitch
from scanmass.surface.shells import settled
from scanmass.surface.surface import Surface, Underside
from scanmass.surface.winding import clashes, oriented, without_duplicates

WELD = 1e-6
"""Vertices closer than this share of the size are one, where that closes edges (files that print few digits)."""
FLECK = 1e-3
SAMPLES = 300_000
"""A mesh too broken to close is sampled with so many points and reconstructed."""


def from_mesh(
    vertices: FloatArray,
    faces: FaceArray,
    *,
    underside: Underside = "unknown",
    hollow_depth: float | None = None,
    up: FloatArray | None = None,
    contact_height: float | None = None,
    progress: Progress = silent,
) -> Surface:
    """The surface of a scanned mesh: ``vertices`` (n, 3) in metres, ``faces`` (m, 3).

    A closed mesh is measured as it is (shells and cavities by sign). Holes with simple rims are filled and treated as
    unseen: the underside as declared or bracketed, see :func:`.close`. A mesh with edges of three faces or more, or
    with tangled rims, is sampled and reconstructed. All that was changed or assumed is noted.

    Raises
    ------
    Declined
        No faces with area; windings that cannot agree; shells that count twice; and all of :func:`.close`.
    """
    up = None if up is None else np.asarray(up, np.float64) / np.linalg.norm(up)
    require_declared(underside, hollow_depth, up)
    progress("mesh", 0, 2)
    middle = 0.5 * (vertices.min(axis=0) + vertices.max(axis=0))
    level = None if contact_height is None or up is None else contact_height - float(middle @ up)
    notes: list[Note] = []
    mesh, known = _cleaned(np.asarray(vertices, np.float64) - middle, np.asarray(faces, np.int64), notes)
    progress("mesh", 1, 2)
    if count_edges(mesh.faces).balanced:
        surface = _as_it_is(mesh, underside, notes, known=known)
    else:
        surface = _completed(mesh, underside, hollow_depth, up, level, notes, progress)
    progress("mesh", 2, 2)
    return surface.moved(middle)


def _cleaned(vertices: FloatArray, faces: FaceArray, notes: list[Note]) -> tuple[Mesh, bool]:
    """Welded, without faces that collapse or are there twice, windings in agreement; and whether those were given."""
    given = len(faces)
    points, joined = welded(vertices, faces)
    if len(joined) and count_edges(joined).open:
        closer = welded(points, joined, WELD * float(np.ptp(points, axis=0).max()))
        if count_edges(closer[1]).open < count_edges(joined).open:
            points, joined = closer
            notes.append(Note("welded", "vertices within a millionth of the size were joined: edges met only so"))
    if len(joined) < given:
        notes.append(Note("degenerate-faces-dropped", f"{given - len(joined)} faces without area were dropped"))
    single = without_duplicates(joined)
    if len(single) < len(joined):
        text = f"{len(joined) - len(single)} faces that are there twice (or once each way) were dropped"
        notes.append(Note("duplicate-faces-dropped", text))
    if len(single) == 0 or not face_areas(points, single)[0].sum() > 0:
        raise Declined("the mesh has no face with an area", allowed="give a scan of a surface")
    known = clashes(single) == 0
    if not known:
        single = _agreeing(single, notes)
    edges = half_edges(single)
    median = float(np.median(np.linalg.norm(points[edges[:, 0]] - points[edges[:, 1]], axis=1)))
    return Mesh(points, single, median), known


def _agreeing(faces: FaceArray, notes: list[Note]) -> FaceArray:
    turned = oriented(faces)
    left = clashes(turned)
    if left:
        raise Declined(
            f"faces disagree about which side is outside at {left} edges, and no way of turning them agrees",
            allowed="repair the mesh, or give the scan as points",
        )
    changed = int((turned != faces).any(axis=1).sum())
    notes.append(Note("winding-repaired", f"{changed} faces were turned to agree with their neighbours"))
    return turned


def _as_it_is(mesh: Mesh, underside: Underside, notes: list[Note], *, known: bool) -> Surface:
    shells = settled(mesh.vertices, mesh.faces, known=known)
    warnings = list(shells.warnings)
    crowded = count_edges(mesh.faces).crowded
    if crowded:
        text = f"{crowded} edges are shared by four faces or more: parts touch there"
        warnings.append(Note("crowded-edges", text))
    if shells.cavities:
        text = f"{shells.cavities} closed cavity(ies) inside the surface: they count as empty"
        notes.append(Note("inner-cavities", text))
    return Surface(
        vertices=mesh.vertices,
        faces=shells.faces,
        inferred=np.zeros(len(shells.faces), bool),
        source="mesh",
        resolution=mesh.resolution,
        underside=underside,
        shells=shells.count,
        assumptions=(*notes, *shells.assumptions),
        warnings=tuple(warnings),
    )


def _completed(
    mesh: Mesh,
    underside: Underside,
    hollow_depth: float | None,
    up: FloatArray | None,
    level: float | None,
    notes: list[Note],
    progress: Progress,
) -> Surface:
    mesh = _without_flecks(mesh, notes)
    loops, simple = boundary_loops(mesh.faces)
    if not simple or count_edges(mesh.faces).crowded:
        return _resampled(mesh, underside, hollow_depth, up, level, notes, progress)
    whole, regions = capped(mesh, loops)
    if whole.moments[0] < 0:
        notes.append(
            Note("inside-out", "faces point inward (the volume is negative): the mesh is inside out, and was turned")
        )
        whole = Mesh(whole.vertices, whole.faces[:, ::-1].copy(), whole.resolution, whole.notes)
    inferred = np.any(regions, axis=0)
    notes.append(Note("rims-filled", f"the mesh is open: {len(loops)} rim(s) were filled"))
    require_all_round(whole, inferred, up)
    base = standing_base(underside, hollow_depth, up, level, mesh.vertices, 0.0, notes)
    return close_gaps(whole, regions, inferred, base, notes, "mesh")


def _without_flecks(mesh: Mesh, notes: list[Note]) -> Mesh:
    """Without the loose open scraps that scanners leave, each under a thousandth of the area."""
    count, labels = shell_labels(mesh.faces)
    if count == 1:
        return mesh
    area, _ = face_areas(mesh.vertices, mesh.faces)
    share = np.bincount(labels, area, minlength=count) / area.sum()
    flecks = [k for k in np.flatnonzero(share < FLECK) if count_edges(mesh.faces[labels == k]).open]
    if not flecks:
        return mesh
    text = (
        f"{len(flecks)} loose scrap(s) of surface, together {100 * share[flecks].sum():.2g} % of its area, were dropped"
    )
    notes.append(Note("flecks-dropped", text))
    return mesh.keep(~np.isin(labels, flecks))


def _resampled(
    mesh: Mesh,
    underside: Underside,
    hollow_depth: float | None,
    up: FloatArray | None,
    level: float | None,
    notes: list[Note],
    progress: Progress,
) -> Surface:
    edges = count_edges(mesh.faces)
    text = (
        f"the mesh cannot be closed as it is ({edges.open} open edges, {edges.crowded} with three faces or more): it "
        f"was sampled with {SAMPLES} points and reconstructed"
    )
    surface = surface_from_cloud(
        _sampled(mesh), underside=underside, hollow_depth=hollow_depth, up=up, contact_height=level, progress=progress
    )
    return surface.noted(assumptions=(*notes, Note("mesh-resampled", text)))


def _sampled(mesh: Mesh) -> Cloud:
    area, normals = face_areas(mesh.vertices, mesh.faces)
    rng = stream(0, "resample")
    chosen = np.searchsorted(np.cumsum(area), (np.arange(SAMPLES) + rng.random(SAMPLES)) * (area.sum() / SAMPLES))
    chosen = np.minimum(chosen, len(area) - 1)
    u, v = np.sqrt(rng.random(SAMPLES)), rng.random(SAMPLES)
    weights = np.stack([1.0 - u, u * (1.0 - v), u * v], axis=1)
    points = np.einsum("ij,ijk->ik", weights, mesh.vertices[mesh.faces[chosen]])
    one = np.ones(SAMPLES, np.int32)
    return Cloud(points, one - 1, one, ("mesh",), np.full((1, 3), np.nan), 0.5 * median_pitch(points), normals[chosen])
