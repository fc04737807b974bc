"""Last looks at a surface before it is weighed: thin walls."""

from __future__ import annotations

import numpy as np

from scanmass import libraries
from scanmass.errors import Note
from scanmass.geometry.polyhedron import face_areas
from scanmass.surface.surface import Surface

CELLS = 5.0
"""Walls thinner than so many cells are warned about."""
MESH_CELLS = 128
RAYS = 20_000
LEAST_SHARE = 0.01
OPPOSITE = 0.5
"""A wall is where the ray inward leaves through a face within 60 degrees of parallel: edges and tips are not walls."""


def wall_thicknesses(surface: Surface) -> tuple[np.ndarray, np.ndarray]:
    """Thickness (k,) in metres along the inward normal at up to RAYS faces, and the area (k,) each stands for.

    Infinite where the ray leaves through a face at an angle.
    """
    open3d = libraries.open3d()
    size = float(np.ptp(surface.vertices, axis=0).max())
    middle = surface.vertices.mean(axis=0)
    unit = (surface.vertices - middle) / size
    area, normals = face_areas(unit, surface.faces)
    step = max(1, len(area) // RAYS)
    chosen = np.arange(0, len(area), step)
    chosen = chosen[area[chosen] > 0]
    scene = open3d.t.geometry.RaycastingScene(nthreads=1)
    scene.add_triangles(
        open3d.core.Tensor(unit.astype(np.float32)), open3d.core.Tensor(surface.faces.astype(np.uint32))
    )
    start = unit[surface.faces[chosen]].mean(axis=1) - 1e-5 * normals[chosen]
    rays = np.concatenate([start, -normals[chosen]], axis=1).astype(np.float32)
    hits = scene.cast_rays(open3d.core.Tensor(rays), nthreads=1)
    distance = hits["t_hit"].numpy().astype(np.float64) + 1e-5
    leaving = np.einsum("ij,ij->i", hits["primitive_normals"].numpy().astype(np.float64), -normals[chosen])
    wall = np.abs(leaving) > OPPOSITE
    return np.where(wall, distance * size, np.inf), area[chosen] * size**2


def thin_walls(surface: Surface, cell: float | None = None) -> tuple[Note, ...]:
    """A warning where more than a hundredth of the surface has a wall under five cells behind it, else nothing.

    ``cell`` in metres: the reconstruction's own where None, and of a mesh that was used as it is a 128th of its size.
    """
    if cell is None:
        size = float(np.ptp(surface.vertices, axis=0).max())
        cell = surface.resolution if surface.source == "points" else size / MESH_CELLS
    thickness, area = wall_thicknesses(surface)
    thin = thickness < CELLS * cell
    share = float(area[thin].sum() / area.sum())
    if share < LEAST_SHARE:
        return ()
    text = (
        f"walls of about {float(np.median(thickness[thin])) * 1000:.3g} mm lie behind {100 * share:.0f} % of the "
        f"surface: under five cells of {cell * 1000:.3g} mm, so their thickness is poorly resolved."
    )
    return (Note("thin-wall", text),)
