"""Which of the gaps in a surface is the side that the object stands on."""

from __future__ import annotations

import numpy as np
from scipy.spatial import ConvexHull, cKDTree

from scanmass.geometry.planes import plane_axes
from scanmass.geometry.polyhedron import face_areas
from scanmass.surface.base import Base
from scanmass.surface.coverage import WIDEN
from scanmass.surface.mesh import FloatArray, Mesh
from scanmass.surface.span import Mask, corners, membrane, outward

FACING = 0.5
"""A gap is the underside's when its outward direction is within 60 degrees of straight down,"""
STANDING = 0.25
"""... and its rim begins in the lowest quarter of the object,"""
COVERED = 0.3
"""... and no more than this share of it has seen surface of the object below it,"""
FOOT = 0.05
"""... and its rim begins no higher than the rim of the object's foot reaches: of the gaps with a shadow of at least
this share of the largest, the lowest is the foot. What begins above it hangs: the underside of a shoulder."""


def standing(mesh: Mesh, regions: list[Mask], base: Base) -> list[bool]:
    """Which of the gaps are the underside."""
    if base.underside == "seen" or not regions:
        return [False] * len(regions)
    shadows = np.array([outward(mesh, region) for region in regions])
    sizes = np.linalg.norm(shadows, axis=1)
    if base.up is None or base.level is None:
        return [k == int(np.argmax(sizes)) for k in range(len(regions))]
    seen = ~np.any(regions, axis=0)
    heights = mesh.vertices @ base.up - base.level
    rims = [heights[corners(mesh, region)[1]] for region in regions]
    begins = np.array([float(rim.min(initial=np.inf)) for rim in rims])
    low = (np.abs(shadows @ base.up) > FACING * sizes) & (begins < STANDING * float(heights.max()))
    low &= [
        bool(one) and not _covered_below(mesh, region, base.up, seen) for one, region in zip(low, regions, strict=True)
    ]
    if low.any():
        wide = low & (sizes >= FOOT * sizes[low].max())
        foot = int(np.flatnonzero(wide)[np.argmin(begins[wide])])
        low &= begins <= float(rims[foot].max(initial=0.0)) + WIDEN * base.pitch
    return [bool(one) for one in low]


def resting_plane(mesh: Mesh, region: Mask, samples: FloatArray) -> tuple[FloatArray, float]:
    """Up (3,) and height of the plane, touching all samples, that the object would rest on over the gap.

    It is the face of the samples' convex hull through which the gap looks out.
    """
    _, rim = corners(mesh, region)
    start = mesh.vertices[rim].mean(axis=0)
    way = outward(mesh, region)
    way /= np.linalg.norm(way)
    planes = ConvexHull(samples).equations
    facing = planes[:, :3] @ way > 1e-9
    distance = -(planes[facing, :3] @ start + planes[facing, 3]) / (planes[facing, :3] @ way)
    plane = planes[facing][np.argmin(distance)]
    return -plane[:3], float(plane[3])


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
