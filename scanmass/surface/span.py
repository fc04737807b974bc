"""Shapes that span a gap: from the membrane on its rim to the farthest that the unseen surface could reach."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt
from scipy.spatial import cKDTree

from scanmass.geometry.harmonic import harmonic, neighbour_matrix
from scanmass.geometry.loops import area_vector, rim_edges
from scanmass.geometry.planes import plane_axes
from scanmass.surface.level import UNSURE_END
from scanmass.surface.mesh import FloatArray, Mesh
from scanmass.surface.refine import vertex_normals

Mask = npt.NDArray[np.bool_]

STEEPEST = 1.0
"""Walls go on below the rim along the surface's own slope, at most this far sideways for each step down."""
LONGEST_SLOPE = 0.05
"""... and sideways at most this share of the object's size; below that, straight down."""
LEVELLED = 0.5
"""Where the surface at the rim is flatter than this (horizontal part of its unit normal), the wall goes straight."""
SMOOTHING = 5
CONVERGING = 0.3
STEEPEST_CONE = 2.0
UNEVEN = 4.0
"""A rim is level when its heights lie within so many pitches: of each end it is known to the two by which gaps are
widened (``coverage.WIDEN``)."""
TOP = 0.95
"""... but for a twentieth of its vertices at either end."""
NEAR_RIM = 6.0
"""Samples within so many grid cells of a rim vertex belong to the wall below it."""


@dataclass(frozen=True)
class Span:
    """One gap: ``region`` (m,) faces, its vertices on the membrane ``near`` (n, 3) and at the other end ``far`` (n, 3).

    ``share`` in [0, 1]: where between the two the best guess lies. ``bracket``: whether both ends are possible.
    ``lid`` (n, 3): a third possible shape, or None.
    """

    region: Mask
    near: FloatArray
    far: FloatArray
    share: float
    bracket: bool
    kind: Literal["underside", "hole"]
    lid: FloatArray | None = None


def corners(mesh: Mesh, region: Mask) -> tuple[Mask, Mask]:
    """Vertices (n,) of the region, and those of them on its rim (n,)."""
    inside = np.zeros(len(mesh.vertices), bool)
    inside[mesh.faces[region]] = True
    rim = np.zeros(len(mesh.vertices), bool)
    rim[rim_edges(mesh.faces, region)[:, 0]] = True
    return inside, rim


def membrane(mesh: Mesh, region: Mask) -> FloatArray:
    """Vertices (n, 3) with the region's pulled tight on its rim: each is the mean of its neighbours."""
    _, rim = corners(mesh, region)
    return harmonic(mesh.faces[region], mesh.vertices, rim)


def low_membrane(
    mesh: Mesh, region: Mask, normals: FloatArray, up: FloatArray, level: float, samples: FloatArray, pitch: float
) -> FloatArray:
    """The least body over a gap that faces down, if nothing is recessed above its rim.

    The rim goes down the walls as far as samples do: the region was widened past the edge of the data; ``samples``
    (k, 3) near the rim tell how far down it reaches, to half a ``pitch`` of theirs. A mesh's own rim (``pitch`` 0)
    stays where it is. Nowhere below ``up . r = level``. Over a rim that is level but for what sampling leaves open the
    least body ends at a membrane. Over one that is not, as of a table with legs, it ends as high as the rim does:
    a membrane would hang down between the legs.
    """
    inside, rim = corners(mesh, region)
    ends = mesh.vertices @ up
    if pitch > 0.0:
        ends[rim] = np.minimum(ends[rim], _data_ends(mesh, region, rim, up, samples) + UNSURE_END * pitch)
    ends = np.maximum(ends, np.minimum(level, mesh.vertices @ up))
    result = _dropped(mesh, region, normals, up, ends, inward=True)
    inner = inside & ~rim
    least = level
    lowest, highest = np.quantile(ends[rim], [1.0 - TOP, TOP])
    if highest - lowest > UNEVEN * max(pitch, mesh.resolution if pitch == 0.0 else 0.0):
        least = max(level, float(highest))
    heights = result[inner] @ up
    result[inner] += (
        np.maximum(np.minimum(least, _seen_above(mesh, region, up, result[inner])) - heights, 0.0)[:, None] * up
    )
    return result


def _seen_above(mesh: Mesh, region: Mask, up: FloatArray, places: FloatArray) -> FloatArray:
    """Height (k,) of the lowest surface outside the gap that looks up over each of ``places`` (k, 3); inf for none."""
    flat = plane_axes(up)
    corner = mesh.vertices[mesh.faces[~region]]
    rising = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0]) @ up > 0
    middles = corner[rising].mean(axis=1)
    result = np.full(len(places), np.inf)
    if len(middles) == 0 or len(places) == 0:
        return result
    distance, index = cKDTree(middles @ flat.T).query(places @ flat.T, k=min(4, len(middles)))
    tall = middles[index] @ up
    above = (distance < mesh.resolution) & (tall > (places @ up)[:, None])
    lowest: FloatArray = np.where(above, tall, np.inf).min(axis=1)
    return lowest


def _data_ends(mesh: Mesh, region: Mask, rim: Mask, up: FloatArray, samples: FloatArray) -> FloatArray:
    """Heights (r,) down to which samples near each rim vertex reach; the third lowest, as one may be astray."""
    place = mesh.vertices[rim]
    heights = place @ up
    distance, nearest = cKDTree(place).query(samples, distance_upper_bound=NEAR_RIM * mesh.resolution)
    close = np.isfinite(distance)
    found, depth = np.asarray(nearest)[close], samples[close] @ up
    order = np.lexsort([depth, found])
    owner, height = found[order], depth[order]
    count = np.bincount(owner, minlength=len(place))
    first = np.cumsum(count) - count
    third = heights.copy()
    third[count >= 3] = height[first[count >= 3] + 2]
    drop = np.zeros(len(mesh.vertices))
    drop[rim] = np.maximum(heights - third, 0.0)
    edges = rim_edges(mesh.faces, region)
    for _ in range(SMOOTHING):
        total, degree = drop.copy(), np.ones(len(drop))
        np.add.at(total, edges.ravel(), drop[edges[:, ::-1]].ravel())
        np.add.at(degree, edges.ravel(), 1.0)
        drop = total / degree
    ends: FloatArray = heights - drop[rim]
    return ends


def outward(mesh: Mesh, region: Mask) -> FloatArray:
    """Direction (3,) in which the region looks, times the area of its shadow that way."""
    return area_vector(mesh.vertices, mesh.faces[region])


def converges(mesh: Mesh, region: Mask, up: FloatArray) -> bool:
    """Whether the seen surface looks downward at the region's rim, on average, so that it may go on and close below."""
    _, rim = corners(mesh, region)
    normals = vertex_normals(mesh.vertices, mesh.faces[~region])[rim]
    return bool(np.mean(normals @ up) < -CONVERGING)


def tangent_cone(mesh: Mesh, region: Mask, normals: FloatArray) -> FloatArray:
    """Vertices (n, 3) with the region as far out as the surface's tangents at the rim lead.

    Over the membrane, each vertex rises by its distance to the rim times the slope of the seen surface there (2 at
    most): a cone over a cap of a sphere, the missing corner of a box. Where the body is convex the unseen surface
    lies between membrane and cone; where it is a hollow, the cone leads inward and bounds likewise.
    """
    inside, rim = corners(mesh, region)
    flat = membrane(mesh, region)
    axis = outward(mesh, region)
    axis = axis / max(float(np.linalg.norm(axis)), 1e-300)
    edges = rim_edges(mesh.faces, region)
    away = np.zeros_like(flat)
    for end in (0, 1):
        np.add.at(away, edges[:, end], np.cross(flat[edges[:, 1]] - flat[edges[:, 0]], axis))
    for _ in range(SMOOTHING):
        sums = away.copy()
        for end in (0, 1):
            np.add.at(sums, edges[:, end], away[edges[:, 1 - end]])
        away = sums / 3.0
    away /= np.maximum(np.linalg.norm(away, axis=1), 1e-300)[:, None]
    lean, face = np.einsum("ij,ij->i", normals, away), normals @ axis
    slope = np.clip(lean / np.maximum(face, 0.1), -STEEPEST_CONE, STEEPEST_CONE)[rim]
    inner = inside & ~rim
    distance, nearest = cKDTree(flat[rim]).query(flat[inner])
    result = flat.copy()
    result[inner] += (slope[nearest] * distance)[:, None] * axis
    return result


def floor(
    mesh: Mesh, region: Mask, normals: FloatArray, up: FloatArray, level: float | FloatArray, *, inward: bool
) -> FloatArray:
    """Vertices (n, 3) with the region in the plane ``up . r = level``, its rim dropped there along the walls.

    Walls follow the slope of the seen surface at the rim where it leads outward, and, with ``inward``, also where it
    leads inward; else they are plumb. ``level`` (n,) may be of each vertex: the rim goes down to its own.
    """
    return _dropped(mesh, region, normals, up, np.broadcast_to(level, len(mesh.vertices)), inward=inward)


def _dropped(
    mesh: Mesh, region: Mask, normals: FloatArray, up: FloatArray, ends: FloatArray, *, inward: bool
) -> FloatArray:
    """Vertices (n, 3) with the rim's taken along the walls to heights ``ends`` (n,), the region's harmonic between."""
    inside, rim = corners(mesh, region)
    result = mesh.vertices.copy()
    heights = mesh.vertices @ up
    sideways = _slopes(normals, rim, up, inward) * np.maximum(heights - ends, 0.0)[:, None]
    length = np.linalg.norm(sideways, axis=1)
    longest = LONGEST_SLOPE * float(np.ptp(mesh.vertices[~inside | rim], axis=0).max())
    sideways *= (np.minimum(length, longest) / np.where(length > 0, length, 1.0))[:, None]
    result[rim] += sideways[rim] - (heights - ends)[rim, None] * up
    return harmonic(mesh.faces[region], result, rim)


def _slopes(normals: FloatArray, rim: Mask, up: FloatArray, inward: bool) -> FloatArray:
    """Sideways way (n, 3) of the wall for each step down, at the rim's vertices."""
    rise = normals @ up
    level = normals - rise[:, None] * up
    run = np.linalg.norm(level, axis=1)
    slope = np.where(run > LEVELLED, rise / np.where(run > 0, run, 1.0), 0.0)
    slope = np.clip(slope, -STEEPEST if inward else 0.0, STEEPEST)
    ways: FloatArray = np.where(rim, slope / np.where(run > 0, run, 1.0), 0.0)[:, None] * level
    return ways


def seen_normals(mesh: Mesh, seen: Mask) -> FloatArray:
    """Unit normals (n, 3) of the ``seen`` (m,) faces at vertices, averaged over some rings of neighbours."""
    faces = mesh.faces[seen]
    normals = vertex_normals(mesh.vertices, faces)
    ring = neighbour_matrix(faces, len(normals))
    for _ in range(SMOOTHING):
        normals = normals + ring @ normals
        normals /= np.maximum(np.linalg.norm(normals, axis=1), 1e-300)[:, None]
    return normals
