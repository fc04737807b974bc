"""Whether a wall ends where its samples end, or only turns out of sight there."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.spatial import cKDTree

from scanmass.cloud.cloud import Cloud
from scanmass.surface.mesh import FloatArray, Mesh
from scanmass.surface.span import NEAR_RIM, Mask, corners

GRAZING = float(np.sin(np.radians(15.0)))
"""Cosine of incidence above which a scanner has returns: surfaces seen at less than 15 degrees may be missing."""
OVERHANG = float(np.sin(np.radians(30.0)))
"""Where no view's scanner is known a wall that leans over by less than 30 degrees counts as in sight: as if somebody
looked from no more than 45 degrees above the level."""
MOSTLY = 0.5


@dataclass(frozen=True)
class Sights:
    """Samples (n, 3), the view (n,) that each is from, and scanner positions (v, 3), NaN where unknown; metres."""

    points: FloatArray
    view: npt.NDArray[np.int32]
    scanners: FloatArray

    @classmethod
    def of(cls, cloud: Cloud) -> Sights | None:
        """Of a cloud; None where no view's scanner is known."""
        if not np.isfinite(cloud.scanners).all(axis=1).any():
            return None
        return cls(cloud.points, cloud.view, cloud.scanners)


def ends_in_sight(mesh: Mesh, region: Mask, normals: FloatArray, up: FloatArray, sights: Sights | None) -> bool:
    """Whether the wall over most of the region's rim was in full sight, so that it would show if it went on.

    ``normals`` (n, 3): of the seen surface. A view counts where it has a sample near the rim: nothing hid it there.
    """
    _, rim = corners(mesh, region)
    place, facing = mesh.vertices[rim], normals[rim]
    if sights is None:
        return bool(np.mean(facing @ up > -OVERHANG) > MOSTLY)
    shown = np.zeros(len(place), bool)
    for view in np.flatnonzero(np.isfinite(sights.scanners).all(axis=1)):
        way = sights.scanners[view] - place
        way /= np.linalg.norm(way, axis=1)[:, None]
        own = sights.points[sights.view == view]
        if len(own) == 0:
            continue
        distance, _ = cKDTree(own).query(place, distance_upper_bound=NEAR_RIM * mesh.resolution)
        shown |= np.isfinite(distance) & (np.einsum("ij,ij->i", facing, way) > GRAZING)
    return bool(np.mean(shown) > MOSTLY)
