"""What a view's scanner looked through: nothing can be there."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy import ndimage

from scanmass.geometry.planes import plane_axes

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

PIXEL = 2.0
"""Spacings a pixel of the sight is wide: gaps between samples must not look like holes."""
FINEST = 220
"""Pixels along the longer side at most."""


@dataclass(frozen=True)
class Sight:
    """A range image of a view, made from its samples: ``eye`` (3,), ``axes`` (3, 3) right, down and forward.

    ``nearest`` (rows, columns): the least range in and round each pixel, in metres; NaN where nothing was seen.
    ``pixel``: its width as a tangent; ``low`` (2,): tangents at the first pixel's corner.
    """

    eye: FloatArray
    axes: FloatArray
    nearest: FloatArray
    pixel: float
    low: FloatArray

    def before(self, points: FloatArray, margin: float) -> BoolArray:
        """Which points (n, 3) stand in its line of sight: in front of all that it saw there by over ``margin``."""
        local = (points - self.eye) @ self.axes.T
        ahead = local[:, 2] > 1e-9
        depth = np.where(ahead, local[:, 2], 1.0)
        place = np.floor((local[:, :2] / depth[:, None] - self.low) / self.pixel)
        rows, columns = self.nearest.shape
        inside = ahead & (place >= 0).all(axis=1) & (place[:, 0] < rows) & (place[:, 1] < columns)
        cell = np.where(inside[:, None], place, 0).astype(np.int64)
        limit = self.nearest[cell[:, 0], cell[:, 1]]
        judged = inside & np.isfinite(limit)
        front: BoolArray = judged & (np.linalg.norm(local, axis=1) < np.where(judged, limit, 0.0) - margin)
        return front


def sight(points: FloatArray, eye: FloatArray, spacing: float, around: int) -> Sight:
    """The sight of an ``eye`` (3,) that saw points (n, 3); ranges are the least within ``around`` pixels each way."""
    middle = points.mean(axis=0)
    forward = (middle - eye) / np.linalg.norm(middle - eye)
    axes = np.concatenate([plane_axes(forward), forward[None]])
    local = (points - eye) @ axes.T
    flat = local[:, :2] / local[:, 2:]
    extent = float(np.ptp(flat, axis=0).max())
    pixel = max(PIXEL * spacing / float(np.median(local[:, 2])), extent / FINEST)
    low = flat.min(axis=0)
    place = np.floor((flat - low) / pixel).astype(np.int64)
    image = np.full(place.max(axis=0) + 1, np.inf)
    np.minimum.at(image, (place[:, 0], place[:, 1]), np.linalg.norm(local, axis=1))
    seen = np.isfinite(image)
    least = ndimage.minimum_filter(image, size=2 * around + 1, mode="nearest")
    return Sight(eye, axes, np.where(seen, least, np.nan), pixel, low)


def hidden(points: FloatArray, normals: FloatArray, eye: FloatArray, spacing: float) -> float:
    """Share of the samples (n, 3) that an eye (3,) could not have seen: behind others, or turned away."""
    towards = eye - points
    far = np.linalg.norm(towards, axis=1)
    away = float(np.mean(np.einsum("ij,ij->i", towards, normals) < -0.05 * far))
    forward = -(towards.mean(axis=0)) / np.linalg.norm(towards.mean(axis=0))
    axes = plane_axes(forward)
    depth = -(towards @ forward)
    if float(depth.min()) <= 0.1 * float(depth.max()):
        return 1.0
    flat = -(towards @ axes.T) / depth[:, None]
    cell = 2.5 * spacing / float(np.median(depth))
    place = np.floor((flat - flat.min(axis=0)) / cell).astype(np.int64)
    key = place[:, 0] * (place[:, 1].max() + 1) + place[:, 1]
    order = np.lexsort((far, key))
    same = key[order][1:] == key[order][:-1]
    # Six spacings of cell in depth are a slope of 80 degrees; more is another sheet.
    leap = same & (np.diff(far[order]) > 15.0 * spacing)
    return away + float(leap.sum()) / len(points)
