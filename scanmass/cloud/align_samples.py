"""What alignment looks at in one view: samples with normals at three densities, and which of them lie at its border."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
import numpy.typing as npt
from scipy.spatial import cKDTree

from scanmass.cloud.align_eye import density, find_eye
from scanmass.cloud.align_facing import facing
from scanmass.cloud.align_sight import Sight, sight
from scanmass.cloud.normals import raw_normals
from scanmass.errors import ScanFault
from scanmass.geometry.neighbours import median_spacing

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]
IndexArray = npt.NDArray[np.int64]

DENSE, ASKED = 20_000, 3_000
"""Samples a view is looked up in, and samples that are looked up in the others, at most about this many."""
LEAST = 60
"""Fewer samples than this are no view."""
LEAF = 0.045
"""Edge of the coarse cells over the size of the views."""
_ONE_SIDED = 0.35
"""Neighbours whose middle lies off a sample by more than this share of their reach are all on one side: a border."""
_CRISP = 0.8
"""Cosine to a neighbour's normal below which a sample is at an edge, or a mixed pixel: no word on what lies there."""


@dataclass(frozen=True)
class ViewSamples:
    """Samples of one view in metres: ``points``, ``normals`` (n, 3) outward as far as can be told.

    ``border`` (n,): at the border of what the view saw, or at an edge; ``asked`` (k,): numbers of the samples that are
    looked up in others; ``coarse`` (c, 6): places and normals of the cells that poses are voted with.
    ``certain``: whether the side of the normals is known; ``noise``: m, median deviation off local planes;
    ``sight``: what its scanner looked through, None where its place is not known and cannot be told.
    """

    name: str
    points: FloatArray
    normals: FloatArray
    border: BoolArray
    asked: IndexArray
    coarse: FloatArray
    spacing: float
    noise: float
    certain: bool
    sight: Sight | None
    tree: cKDTree

    @cached_property
    def middle(self) -> FloatArray:
        """Mean of the samples (3,)."""
        mean: FloatArray = self.points.mean(axis=0)
        return mean

    @property
    def size(self) -> float:
        """Diagonal of the box along the principal axes of the samples, which does not change with the frame."""
        return principal_size(self.points)

    def sketch(self) -> ViewSamples:
        """The view by the samples alone that are looked up in others: enough for a rough look, and quicker."""
        n = len(self.asked)
        wider = self.spacing * float(np.sqrt(len(self.points) / max(n, 1)))
        points = self.points[self.asked]
        return replace(
            self,
            points=points,
            normals=self.normals[self.asked],
            border=np.zeros(n, np.bool_),
            asked=np.arange(n),
            spacing=wider,
            tree=cKDTree(points),
        )


def principal_size(points: FloatArray) -> float:
    """Diagonal of the box round points (n, 3) along their principal axes."""
    middle = points - points.mean(axis=0)
    _, axes = np.linalg.eigh(middle.T @ middle)
    return float(np.linalg.norm(np.ptp(middle @ axes, axis=0)))


def view_samples(
    name: str,
    points: FloatArray,
    count: npt.NDArray[np.int32],
    size: float,
    *,
    scanner: FloatArray | None = None,
    file_normals: FloatArray | None = None,
) -> ViewSamples:
    """The samples of one view, made from its points (n, 3), each standing for ``count`` scan points.

    ``size``: metres, that of the views' object. Where the ``scanner`` (3,) stood is told from the samples if not known.

    Raises
    ------
    ScanFault
        If the view has too few points to tell a surface.
    """
    kept = one_a_cell(points, _cell_for(points, DENSE))
    if len(kept) < LEAST:
        raise ScanFault(f"{name} has only {len(kept)} points, too few to align it", allowed="leave the view out")
    fewer = np.ascontiguousarray(points[kept])
    raw = raw_normals(fewer)
    asked = one_a_cell(fewer, _cell_for(fewer, ASKED))
    spacing = median_spacing(fewer)
    eye = scanner
    if eye is None:
        sparse = spacing * float(np.sqrt(len(fewer) / len(asked)))
        eye = find_eye(fewer[asked], raw.normals[asked], density(points, count, kept[asked]), sparse)
    normals, certain = facing(fewer, raw, eye, None if file_normals is None else file_normals[kept])
    near = raw.index[:, :12]
    reach = raw.distance[:, : near.shape[1]].mean(axis=1)
    border = np.linalg.norm(fewer[near].mean(axis=1) - fewer, axis=1) > _ONE_SIDED * reach
    beside = np.abs(np.einsum("nij,nj->ni", normals[near[:, :8]], normals)).min(axis=1)
    border |= beside < _CRISP
    seen = None if eye is None else sight(fewer, eye, spacing, 1)
    coarse = _coarse(fewer, normals, LEAF * size)
    inner = asked[~border[asked]]
    tree = cKDTree(fewer)
    return ViewSamples(name, fewer, normals, border, inner, coarse, spacing, raw.noise, certain, seen, tree)


def one_a_cell(points: FloatArray, cell: float) -> IndexArray:
    """Numbers, ascending, of the first point in each cubic cell of edge ``cell``; all where it is 0."""
    if cell <= 0.0:
        return np.arange(len(points))
    place = np.floor((points - points.min(axis=0)) / cell).astype(np.int64)
    key = (place[:, 0] * (place[:, 1].max() + 1) + place[:, 1]) * (place[:, 2].max() + 1) + place[:, 2]
    _, first = np.unique(key, return_index=True)
    return np.sort(first).astype(np.int64)


def _cell_for(points: FloatArray, most: int) -> float:
    """Edge of cells that leave about ``most`` of the points, 0 where there are no more."""
    if len(points) <= most:
        return 0.0
    cell = principal_size(points) / 300.0
    for _ in range(6):
        left = len(one_a_cell(points, cell))
        if 0.7 * most <= left <= most:
            break
        cell *= float(np.clip(np.sqrt(left / (0.85 * most)), 0.3, 3.0))
    return cell


def _coarse(points: FloatArray, normals: FloatArray, cell: float) -> FloatArray:
    """Means of the samples of each cell that face the same way, so that the sheets of a thin wall stay apart."""
    place = np.floor((points - points.min(axis=0)) / cell).astype(np.int64)
    axis = np.abs(normals).argmax(axis=1)
    way = 2 * axis + (np.take_along_axis(normals, axis[:, None], axis=1)[:, 0] > 0)
    rows, which, count = np.unique(np.column_stack([place, way]), axis=0, return_inverse=True, return_counts=True)
    which = which.reshape(-1)
    sums = np.zeros((len(rows), 6))
    np.add.at(sums, which, np.concatenate([points, normals], axis=1))
    solid = count >= max(3, 0.1 * float(np.median(count)))
    mean, turned = sums[solid, :3] / count[solid, None], sums[solid, 3:]
    length = np.linalg.norm(turned, axis=1, keepdims=True)
    return np.concatenate([mean, turned / np.where(length > 0, length, 1.0)], axis=1)


def recut(points: FloatArray, eye: FloatArray, spacing: float) -> Sight:
    """What an ``eye`` (3,) looked through that saw these points (n, 3)."""
    return sight(points, eye, spacing, 1)
