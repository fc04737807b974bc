"""From scans to the closed surface that is weighed: the stages in order, with the settings each takes."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy.spatial import cKDTree

from scanmass.cloud.align_copies import refuse_copies
from scanmass.cloud.clean import drop_edges
from scanmass.cloud.cloud import REASONS, Cloud, Removed
from scanmass.cloud.orient import orient
from scanmass.cloud.outliers import outliers
from scanmass.cloud.place import ViewsPlaced, view_names
from scanmass.cloud.separate import Separated, separate
from scanmass.cloud.thin import Thinned, thin
from scanmass.errors import Declined, Note, ScanFault
from scanmass.geometry.moments import scaled, translated
from scanmass.pipeline.models import Pipeline
from scanmass.pipeline.placing import Placed, check_shared, place_given, place_own
from scanmass.progress import Progress
from scanmass.scans.scan import Scan
from scanmass.surface.from_cloud import surface_from_cloud
from scanmass.surface.from_mesh import from_mesh
from scanmass.surface.mesh import FaceArray
from scanmass.surface.reconstruct import reconstruct
from scanmass.surface.refine import vertex_normals
from scanmass.surface.shells import require_one_object
from scanmass.surface.surface import Closure, Surface

FloatArray = npt.NDArray[np.float64]

_FEW_SAMPLES = 100_000
"""An object left with fewer samples than this by a thinned scan of much else is thinned again by itself."""
_COARSE_CELLS = 16
"""Cells along the longest side of the coarse surface that bounds unknown noise from above (design 5.12)."""


@dataclass(frozen=True)
class Shape:
    """A closed surface and what led to it, in metres in the working frame: the scan's frame less ``origin`` (3,).

    ``cloud``: the samples the surface was fitted to, None for a mesh; ``up`` (3,) unit or None;
    ``base_height``: ``up . r`` of the plane the object stands on, None without up; ``views``: how several views lie.
    """

    surface: Surface
    cloud: Cloud | None
    removed: Removed
    origin: FloatArray
    up: FloatArray | None
    up_from: str | None
    base_height: float | None
    assumptions: tuple[Note, ...]
    warnings: tuple[Note, ...]
    views: ViewsPlaced | None = None


def shape_of(scans: Sequence[Scan], settings: Pipeline, seed: int, progress: Progress) -> Shape:
    """The surface of one object: of its mesh if the scan is one, else of the points of all scans together."""
    if len(scans) == 1 and scans[0].faces is not None:
        return _of_mesh(scans[0], scans[0].faces, settings, progress)
    return _of_points(scans, settings, seed, progress)


def _of_mesh(scan: Scan, faces: FaceArray, settings: Pipeline, progress: Progress) -> Shape:
    vertices = scan.points()
    origin = 0.5 * (vertices.min(axis=0) + vertices.max(axis=0))
    up = None if settings.scan.up is None else np.array(settings.scan.up)
    surface = from_mesh(
        vertices - origin,
        faces,
        underside=settings.surface.underside_kind,
        hollow_depth=settings.surface.hollow_depth,
        up=up,
        progress=progress,
    )
    return _finished(surface, None, Removed.nothing(), origin, up, None, settings, (), ())


def _of_points(scans: Sequence[Scan], settings: Pipeline, seed: int, progress: Progress) -> Shape:
    declared = None if settings.scan.up is None else np.array(settings.scan.up)
    several = sum(len(scan.views) for scan in scans) > 1
    placed, poses = None, None
    if several and settings.scan.poses:
        scans, poses = place_given(scans, settings)
    elif several and settings.scan.frames == "own":
        placed = place_own(scans, settings, seed, progress)
        declared = placed.up
    thinned = thin(scans, progress=progress) if placed is None else placed.thinned
    if several and placed is None:
        refuse_copies(thinned, view_names(scans))
    origin = 0.5 * (thinned.cloud.points.min(axis=0) + thinned.cloud.points.max(axis=0))
    tidy = settings.clean.outliers
    cloud, edges, notes = _moved(thinned.cloud, -origin), Removed.nothing(), thinned.warnings
    if tidy == "auto":
        cloud, edges, said = drop_edges(cloud)
        notes += said
    try:
        found = separate(
            cloud,
            support=settings.clean.support if placed is None else "none",
            clutter=tidy,
            up=declared,
            seed=seed,
            progress=progress,
        )
    except ScanFault:
        # Views that are not in one frame look like several objects.
        if several and placed is None:
            check_shared(_moved(cloud, origin), scans, settings, poses)
        raise
    removed, notes = edges.joined(found.removed), notes + found.warnings
    if placed is None:
        cloud = _finer(scans, thinned, found, origin, progress)
        views, said = check_shared(_moved(cloud, origin), scans, settings, poses)
        notes += said
    else:
        found, cloud, views = _with_support(found, placed, origin), found.cloud, placed.views
        away = replace(placed.removed, points=placed.removed.points - origin)
        removed, notes = removed.joined(away), notes + placed.warnings
    if tidy == "auto":
        cloud, strays, said = outliers(cloud)
        removed, notes = removed.joined(strays), notes + said
    floor = None if found.up is None or found.contact_height is None else (found.up, found.contact_height)
    oriented = orient(cloud, floor=floor, progress=progress)
    resolution = settings.surface.resolution
    surface = surface_from_cloud(
        oriented.cloud,
        resolution=None if isinstance(resolution, str) else resolution,
        underside=settings.surface.underside_kind,
        hollow_depth=settings.surface.hollow_depth,
        up=found.up,
        contact_height=found.contact_height,
        floor_samples=_removed_as(found.removed, "support plane", "turntable"),
        edge_samples=_removed_as(removed, "grid edge"),
        progress=progress,
    )
    return _finished(
        surface,
        oriented.cloud,
        removed,
        origin,
        found.up,
        found.contact_height,
        settings,
        found.assumptions + oriented.assumptions,
        notes + oriented.warnings,
        views,
    )


def _with_support(found: Separated, placed: Placed, origin: FloatArray) -> Separated:
    """What the first of several aligned views stood on, in the working frame."""
    contact = None if placed.contact is None or placed.up is None else placed.contact - float(origin @ placed.up)
    said = placed.assumptions + found.assumptions
    return replace(found, up=placed.up, contact_height=contact, assumptions=said)


def _finer(scans: Sequence[Scan], thinned: Thinned, found: Separated, origin: FloatArray, progress: Progress) -> Cloud:
    """The object's own samples, thinned again where the first thinning was spent on what lies around it."""
    coarse = found.cloud
    if thinned.cell is None or len(coarse.points) >= _FEW_SAMPLES:
        return coarse
    margin = 2.0 * thinned.cell
    box = (coarse.points.min(axis=0) + origin - margin, coarse.points.max(axis=0) + origin + margin)
    again = _moved(thin(scans, within=box, progress=progress).cloud, -origin)
    distance, _ = cKDTree(coarse.points).query(again.points, distance_upper_bound=margin)
    return again.keep(np.isfinite(distance))


def _removed_as(removed: Removed, *reasons: str) -> FloatArray:
    """The samples (k, 3) taken away for any of ``reasons``."""
    kinds = [REASONS.index(reason) for reason in reasons]
    return removed.points[np.isin(removed.reason, kinds)]


def _moved(cloud: Cloud, shift: FloatArray) -> Cloud:
    return replace(cloud, points=cloud.points + shift, scanners=cloud.scanners + shift)


def _finished(
    surface: Surface,
    cloud: Cloud | None,
    removed: Removed,
    origin: FloatArray,
    up: FloatArray | None,
    contact: float | None,
    settings: Pipeline,
    assumptions: tuple[Note, ...],
    warnings: tuple[Note, ...],
    views: ViewsPlaced | None = None,
) -> Shape:
    """The shape with the declared scale applied about the object's own centre."""
    if settings.clean.outliers == "auto":
        require_one_object(surface.vertices, surface.faces)
    up_from = None if up is None else "declared" if settings.scan.up is not None else "support"
    if up is not None and contact is None:
        contact = float((surface.vertices @ up).min())
    scale = 1.0 if settings.scan.scale is None else float(settings.scan.scale.value)
    if scale != 1.0:
        middle = surface.vertices.mean(axis=0)
        surface = _scaled(surface, scale, middle)
        cloud = None if cloud is None else replace(cloud, points=middle + scale * (cloud.points - middle))
        if up is not None and contact is not None:
            contact = float(up @ middle + scale * (contact - up @ middle))
    return Shape(
        surface,
        cloud,
        removed,
        origin,
        up,
        up_from,
        contact,
        assumptions + surface.assumptions,
        warnings + surface.warnings,
        views,
    )


def _scaled(surface: Surface, factor: float, middle: FloatArray) -> Surface:
    def grown(moments: FloatArray) -> FloatArray:
        return translated(scaled(translated(moments, -middle), factor), middle)

    coarse = surface.settling_moments
    return replace(
        surface,
        vertices=middle + factor * (surface.vertices - middle),
        resolution=factor * surface.resolution,
        closures=tuple(Closure(c.name, grown(c.moments)) for c in surface.closures),
        settling_moments=None if coarse is None else grown(coarse),
    )


def coarse_surface(shape: Shape) -> tuple[FloatArray, FaceArray] | None:
    """Vertices and faces of a surface that follows the object but not its noise; None where none can be made."""
    surface = shape.surface
    cloud = shape.cloud
    if cloud is None:
        n = len(surface.vertices)
        normals = vertex_normals(surface.vertices, surface.faces)
        ones = np.ones(n, np.int32)
        cloud = Cloud(
            surface.vertices,
            np.zeros(n, np.int32),
            ones,
            ("mesh",),
            np.full((1, 3), np.nan),
            surface.resolution,
            normals,
        )
    size = float(np.ptp(surface.vertices, axis=0).max())
    try:
        mesh = reconstruct(cloud, resolution=size / _COARSE_CELLS)
    except Declined:
        return None
    return mesh.vertices, mesh.faces
