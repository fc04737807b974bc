"""A measured surface from an oriented cloud, start to finish."""

from __future__ import annotations

from dataclasses import replace

from scanmass.cloud.cloud import Cloud
from scanmass.geometry.polyhedron import polyhedron_moments
from scanmass.progress import Progress, silent
from scanmass.surface.check import thin_walls
from scanmass.surface.close import close
from scanmass.surface.mesh import FloatArray
from scanmass.surface.reconstruct import reconstruct
from scanmass.surface.refine import refine
from scanmass.surface.surface import Surface, Underside


def surface_from_cloud(
    cloud: Cloud,
    *,
    resolution: float | None = None,
    underside: Underside = "unknown",
    hollow_depth: float | None = None,
    up: FloatArray | None = None,
    contact_height: float | None = None,
    floor_samples: FloatArray | None = None,
    edge_samples: FloatArray | None = None,
    progress: Progress = silent,
) -> Surface:
    """Reconstruct, refine, close and check; see each for what it does, needs and raises."""
    coarse = reconstruct(cloud, resolution=resolution, progress=progress)
    refined = refine(coarse, cloud, progress=progress)
    surface = close(
        refined,
        cloud,
        underside=underside,
        hollow_depth=hollow_depth,
        up=up,
        contact_height=contact_height,
        floor_samples=floor_samples,
        edge_samples=edge_samples,
        progress=progress,
    )
    # What refinement changed of the seen surface, apart from what closing put in place of the unseen.
    settling = polyhedron_moments(surface.vertices, surface.faces) - (refined.moments - coarse.moments)
    surface = replace(surface, settling_moments=settling)
    return surface.noted(warnings=thin_walls(surface))
