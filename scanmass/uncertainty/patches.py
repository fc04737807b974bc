"""The surface in about a thousand patches: what moving each one does, and where each view saw it."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy.spatial import cKDTree

from scanmass.cloud.cloud import Cloud
from scanmass.geometry.polyhedron import face_areas, face_moments
from scanmass.surface.surface import Surface
from scanmass.uncertainty.distances import farthest_seeds, signed_distances, split_long
from scanmass.uncertainty.following import shares_of, unfollowed, weights_of_views

FloatArray = npt.NDArray[np.float64]
IndexArray = npt.NDArray[np.int64]

_NORMAL_WEIGHT = 0.15
"""How far apart two opposite faces of a thin wall count, as a share of the size: half of twice this."""
_CLIP = 4.0 * 1.4826
"""Residuals beyond this many median absolute deviations are not noise of the surface (design 5.1)."""
_LEAST_SAMPLES = 3


@dataclass(frozen=True)
class Patches:
    """``J`` patches of a surface and the residuals of ``V`` views on them. Metres, about ``centre``.

    ``moments`` (J, 10): change of the ten volume moments about ``centre`` when a patch moves outward by one metre;
    ``centres``, ``normals`` (J, 3): area-weighted, centres relative to ``centre``; ``areas`` (J,);
    ``size``: longest side of the body's box; ``inferred`` (J,): share of each patch where no scan point lies;
    ``residuals`` (J, V): mean signed distance of a view's samples outward from the surface, NaN where unseen or where
    the surface follows that view alone;
    ``counts`` (J, V): scan points behind it; ``samples`` (J, V): samples behind it;
    ``within`` (J, V): variance of one scan point about that mean, NaN below three samples;
    ``towards`` (J, V): cosine between the patch's normal and the direction to the view's scanner, NaN if unknown;
    ``clipped``: share of scan points left out as outliers.
    """

    centre: FloatArray
    moments: FloatArray
    centres: FloatArray
    normals: FloatArray
    areas: FloatArray
    inferred: FloatArray
    size: float
    residuals: FloatArray
    counts: FloatArray
    samples: FloatArray
    within: FloatArray
    towards: FloatArray
    clipped: float = 0.0

    def __post_init__(self) -> None:
        j = len(self.areas)
        for name, shape in (("moments", (j, 10)), ("centres", (j, 3)), ("normals", (j, 3)), ("inferred", (j,))):
            if getattr(self, name).shape != shape:
                raise ValueError(f"{name} must be {shape}, got {getattr(self, name).shape}")
        for name in ("counts", "samples", "within", "towards"):
            if getattr(self, name).shape != self.residuals.shape:
                raise ValueError(f"{name} must be {self.residuals.shape}, got {getattr(self, name).shape}")

    @property
    def views(self) -> int:
        """Number of views (columns of ``residuals``)."""
        return int(self.residuals.shape[1])

    def some_seen(self) -> Patches:
        """Without the views that saw no patch."""
        able = self.seen.any(axis=0)
        names = ("residuals", "counts", "samples", "within", "towards")
        return replace(self, **{name: getattr(self, name)[:, able] for name in names})

    @property
    def seen(self) -> npt.NDArray[np.bool_]:
        """(J, V): enough samples of the view lie on the patch to use it."""
        result: npt.NDArray[np.bool_] = self.samples >= _LEAST_SAMPLES
        return result

    @property
    def observed_fraction(self) -> float:
        """Share of the surface's area that is not inferred."""
        return float(1.0 - np.sum(self.inferred * self.areas) / self.areas.sum())

    def shares(self) -> FloatArray:
        """(J, V) weight of each view in the surface there: scan points; where nothing was seen, as next to it.

        Rows sum to one; all zero only if no patch was seen at all.
        """
        counts = np.where(self.seen, self.counts, 0.0)
        some = counts.sum(axis=1) > 0
        if not some.any():
            return np.zeros_like(counts)
        if not some.all():
            _, nearest = cKDTree(self.centres[some]).query(self.centres[~some])
            counts[~some] = counts[some][nearest]
        return shares_of(counts)


def make(
    surface: Surface,
    cloud: Cloud | None,
    *,
    centre: FloatArray,
    count: int = 1000,
) -> Patches:
    """Part ``surface`` into about ``count`` patches and gather the residuals of ``cloud`` on them.

    Parameters
    ----------
    cloud : None where there are no samples; every patch is then unseen
    centre : (3,), the point moments are taken about, metres in the scan's frame

    Notes
    -----
    A surface made from the cloud follows each view's noise where that view's samples are; residuals are freed of that
    (:mod:`.following`), and are NaN where nothing is left of them.
    Seeds are spread by farthest point in (position, 0.15 x size x normal), so the two sides of a thin wall part.
    """
    vertices = surface.vertices - centre
    size = float(np.ptp(vertices, axis=0).max())
    area, _ = face_areas(vertices, surface.faces)
    points, faces, owner = split_long(vertices, surface.faces, float(np.sqrt(area.sum() / count)))
    area, normal = face_areas(points, faces)
    middle = points[faces].mean(axis=1)
    features = np.hstack([middle, _NORMAL_WEIGHT * size * normal])
    seeds = _seeds(features, area, count)
    patch: IndexArray = np.asarray(cKDTree(features[seeds]).query(features)[1], np.int64)
    j = len(seeds)
    areas = _sums(patch, area, j)
    shape = (j, 0 if cloud is None else len(cloud.view_names))
    result = Patches(
        centre=np.asarray(centre, np.float64),
        moments=_sums(patch, face_moments(points, faces), j),
        centres=_sums(patch, area[:, None] * middle, j) / areas[:, None],
        normals=_unit(_sums(patch, area[:, None] * normal, j), normal[seeds]),
        areas=areas,
        inferred=_sums(patch, area * surface.inferred[owner], j) / areas,
        size=size,
        residuals=np.full(shape, np.nan),
        counts=np.zeros(shape),
        samples=np.zeros(shape),
        within=np.full(shape, np.nan),
        towards=np.full(shape, np.nan),
    )
    if cloud is None or len(cloud.points) == 0:
        return result
    residual, face = signed_distances(cloud.points - centre, points, faces)
    followed = None
    if surface.source == "points" and len(cloud.view_names) > 1:
        followed = weights_of_views(vertices, surface.faces, cloud, cloud.points - centre, owner[face])
    return _with_residuals(result, cloud, residual, patch[face], followed)


def _seeds(features: FloatArray, area: FloatArray, count: int) -> IndexArray:
    """Seeds among at most 20 per patch candidates, taken evenly by area in the order of the faces."""
    able = np.flatnonzero(area > 0)
    if len(able) > 20 * count:
        ends = np.cumsum(area[able])
        able = able[np.unique(np.searchsorted(ends, (np.arange(20 * count) + 0.5) / (20 * count) * ends[-1]))]
    result: IndexArray = able[farthest_seeds(features[able], count)]
    return result


def _with_residuals(
    patches: Patches, cloud: Cloud, residual: FloatArray, home: IndexArray, followed: FloatArray | None
) -> Patches:
    middle = np.median(residual)
    spread = np.median(np.abs(residual - middle))
    kept = np.abs(residual - middle) <= _CLIP * spread if spread > 0 else np.ones(len(residual), bool)
    j, v = patches.residuals.shape
    cell = (home * v + cloud.view)[kept]
    r, n = residual[kept], cloud.count[kept].astype(np.float64)
    counts = _sums(cell, n, j * v)
    samples = _sums(cell, np.ones_like(n), j * v)
    mean = np.full(j * v, np.nan)
    np.divide(_sums(cell, n * r, j * v), counts, out=mean, where=counts > 0)
    within = np.full(j * v, np.nan)
    about = _sums(cell, n * (r - mean[cell]) ** 2, j * v)
    np.divide(about, samples - 1, out=within, where=samples >= _LEAST_SAMPLES)
    found = mean.reshape(j, v)
    if followed is not None:
        weights = _sums(cell, n[:, None] * followed[kept], j * v).reshape(j, v, v)
        each = np.maximum(counts, 1.0).reshape(j, v, 1)
        enough = samples.reshape(j, v) >= _LEAST_SAMPLES
        found = unfollowed(np.where(enough, found, np.nan), counts.reshape(j, v), weights / each)
    direction = cloud.scanners[None] - patches.centre - patches.centres[:, None]
    towards = np.einsum("jvk,jk->jv", direction, patches.normals) / np.linalg.norm(direction, axis=2)
    return replace(
        patches,
        residuals=found,
        counts=counts.reshape(j, v),
        samples=samples.reshape(j, v),
        within=within.reshape(j, v),
        towards=towards,
        clipped=float(1.0 - n.sum() / cloud.count.sum()),
    )


def _sums(group: IndexArray, values: FloatArray, groups: int) -> FloatArray:
    if values.ndim == 1:
        total: FloatArray = np.bincount(group, values, groups).astype(np.float64)
        return total
    return np.stack([np.bincount(group, column, groups) for column in values.T], axis=1)


def _unit(vectors: FloatArray, instead: FloatArray) -> FloatArray:
    length = np.linalg.norm(vectors, axis=1, keepdims=True)
    return np.where(length > 0, vectors / np.where(length > 0, length, 1.0), instead)
