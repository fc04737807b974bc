"""Is a plane in the cloud what the object stands on, or a face of the object's own?"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt
from scipy import ndimage
from scipy.spatial import ConvexHull, QhullError

from scanmass.cloud.pieces import largest_piece
from scanmass.geometry.planes import plane_axes

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]
Kind = Literal["own face", "support plane", "turntable", "slab"]

MARGIN = 1.5
"""Tolerances off the plane from which a sample is above or below it."""
OTHER_SIDE = 0.25
"""Share of the plane's cells with something behind them at which it is the face of a slab seen from behind too."""
BEYOND = 0.04
"""Area of the plane beyond the object's outline, as a share of the outline, that makes it go on beyond it."""
SECTORS = 24
ROUND_SCATTER = 0.02
"""Scatter of a disc's rim about a circle, as a share of its radius."""
LEAST_CELLS = 40
"""Inner cells of the plane below which nothing is removed."""
LEAST_RESOLVED = 0.02
"""Tolerance as a share of the object's width above which nothing is removed."""
RIM = 0.02
"""Samples below the plane along its border, as a share of those on it, that make a visible rim."""
ALL_ROUND = 0.85
"""Share of directions in which a slab must reach beyond the object."""
LARGE = 3.0
"""How many times wider than the object both ways a slab with a visible rim must be to be taken for a table."""


@dataclass(frozen=True)
class Judged:
    """``kind`` of a plane; ``up`` (3,) its normal towards the object; ``offset``: the plane is {x: x.up = offset}.

    ``remove`` (n,) bool: the samples that go with it: on it, and what lies under it.
    """

    kind: Kind
    up: FloatArray
    offset: float
    remove: BoolArray


def judge_plane(
    points: FloatArray,
    normals: FloatArray,
    areas: FloatArray,
    normal: FloatArray,
    offset: float,
    tolerance: float,
    cell: float,
) -> Judged:
    """Judge the plane {x: x.normal = offset} in a cloud.

    It is a support when, seen along its normal, its samples go on beyond the convex outline of the largest piece that
    stands on one side of it, and nothing covers its other side. So the flat face of a box, a plate or a bracket is
    its own: the face ends where the body ends, or the body's far side lies behind it. A rim below the plane is a
    body's: it is a turntable if the plane is round, a table if it is much wider than the object on all sides, else a
    slab, which may be either.

    Parameters
    ----------
    points, normals : (n, 3); areas : (n,) the surface each sample stands for
    tolerance : metres within which a sample is on the plane
    cell : metres, a few sample spacings: gaps up to this do not part the object or the plane
    """
    height = points @ normal - offset
    steep = np.abs(normals @ normal) < 0.9
    on = (np.abs(height) <= tolerance) & ~(steep & (np.abs(height) > 0.5 * tolerance))
    if (areas * (height > MARGIN * tolerance)).sum() < (areas * (height < -MARGIN * tolerance)).sum():
        # The object is the greater part. A table's legs or a disc's side are the lesser.
        normal, offset, height = -normal, -offset, -height
    for up, level, rise in ((normal, offset, height), (-normal, -offset, -height)):
        judged = _judge_side(points, on, up, level, rise, tolerance, cell)
        if judged.kind != "own face":
            return judged
    return Judged("own face", normal, offset, np.zeros(len(points), np.bool_))


def _judge_side(
    points: FloatArray, on: BoolArray, up: FloatArray, offset: float, height: FloatArray, tolerance: float, cell: float
) -> Judged:
    nothing = Judged("own face", up, offset, np.zeros(len(points), np.bool_))
    above, below = height > MARGIN * tolerance, height < -MARGIN * tolerance
    if on.sum() < 30 or above.sum() < 30:
        return nothing
    flat = points @ plane_axes(up).T
    standing = np.flatnonzero(above)[largest_piece(points[above], cell)]
    if len(standing) < 30:
        return nothing
    outline = _outline(flat[standing])
    if outline is None:
        return nothing
    sheet = _Sheet(flat[on], 0.5 * cell)
    # Too few samples, or too noisy, to tell a plane from a thin slab; or what stands is only the plane's own rim.
    if sheet.interior.sum() < LEAST_CELLS or tolerance > LEAST_RESOLVED * outline.width:
        return nothing
    if sheet.covers(flat[standing]).mean() < 0.2:
        return nothing
    if sheet.share_met(flat[below & sheet.covers(flat)]) > OTHER_SIDE:
        return nothing
    rim = below & sheet.near_border(flat)
    has_rim = bool(rim.sum() > RIM * on.sum())
    centres = sheet.centres()
    slack = min(max(cell, 6.0 * tolerance), 0.04 * outline.width + 0.5 * cell)
    beyond = ~outline.holds(centres, slack)
    goes_on = sheet.area(beyond) > BEYOND * outline.area and beyond.sum() >= 12
    remove = on | ((height < 0) & (sheet.covers(flat) | sheet.near_border(flat)))
    if _is_round(centres, sheet.cell):
        # A disc hardly wider than the object shows as a ring round it: nothing of it is seen within the outline.
        within = sheet.area(outline.holds(centres, -2.0 * sheet.cell)) / outline.area
        outside = sheet.area(~outline.holds(centres, 0.5 * sheet.cell)) / outline.area
        ring = has_rim and within < 0.1 and outside > 0.5 * BEYOND
        return Judged("turntable", up, offset, remove) if goes_on or ring else nothing
    if not goes_on:
        return nothing
    if not has_rim:
        return Judged("support plane", up, offset, remove)
    if _sectors_reached(centres[beyond], outline.centre) < ALL_ROUND:
        return nothing
    wider = float((np.ptp(centres @ outline.axes.T, axis=0) / outline.extents).min())
    if wider >= LARGE:
        return Judged("support plane", up, offset, remove)
    return Judged("slab", up, offset, np.zeros(len(points), np.bool_)) if wider > 1.0 else nothing


class _Outline:
    """The convex outline of samples in a plane."""

    def __init__(self, flat: FloatArray, hull: ConvexHull) -> None:
        self.equations = hull.equations
        self.area = float(hull.volume)
        corners = flat[hull.vertices]
        self.centre = corners.mean(axis=0)
        _, _, self.axes = np.linalg.svd(corners - self.centre)
        self.extents = np.ptp(corners @ self.axes.T, axis=0)
        self.width = float(self.extents.max())

    def holds(self, places: FloatArray, slack: float) -> BoolArray:
        """Which places (n, 2) lie inside, or outside by no more than ``slack``."""
        inside: BoolArray = (places @ self.equations[:, :2].T + self.equations[:, 2]).max(axis=1) <= slack
        return inside


def _outline(flat: FloatArray) -> _Outline | None:
    try:
        return _Outline(flat, ConvexHull(flat))
    except QhullError:
        return None


class _Sheet:
    """Cells of a plane that hold samples on it, gaps of one cell closed."""

    def __init__(self, flat: FloatArray, cell: float) -> None:
        self.cell = cell
        self.low = flat.min(axis=0) - 2.0 * cell
        place = np.floor((flat - self.low) / cell).astype(np.int64)
        full = np.zeros(place.max(axis=0) + 3, np.bool_)
        full[place[:, 0], place[:, 1]] = True
        self.full = ndimage.binary_closing(full, np.ones((3, 3)))
        self.filled = ndimage.binary_fill_holes(self.full)
        self.interior = ndimage.binary_erosion(self.filled, np.ones((3, 3)), iterations=2)

    def _met(self, mask: BoolArray, flat: FloatArray) -> BoolArray:
        place = np.floor((flat - self.low) / self.cell).astype(np.int64)
        inside = ((place >= 0) & (place < mask.shape)).all(axis=1)
        met = np.zeros(len(flat), np.bool_)
        met[inside] = mask[place[inside, 0], place[inside, 1]]
        return met

    def covers(self, flat: FloatArray) -> BoolArray:
        """Which places lie within the sheet, two cells or more from its border."""
        return self._met(self.interior, flat)

    def near_border(self, flat: FloatArray) -> BoolArray:
        """Which places lie within two cells of the sheet's border."""
        ring = ndimage.binary_dilation(self.filled, np.ones((3, 3)), iterations=2) & ~self.interior
        return self._met(ring, flat)

    def share_met(self, flat: FloatArray) -> float:
        """Share of the sheet's inner cells that one of the places falls in."""
        if len(flat) == 0 or not self.interior.any():
            return 0.0
        place = np.floor((flat - self.low) / self.cell).astype(np.int64)
        return len(np.unique(place[:, 0] * self.full.shape[1] + place[:, 1])) / int(self.interior.sum())

    def area(self, cells: BoolArray) -> float:
        """Area of some of the cells that hold samples, given in the order of :meth:`centres`."""
        return float(cells.sum()) * self.cell**2

    def centres(self) -> FloatArray:
        """Middles (m, 2) of the cells that hold samples."""
        middles: FloatArray = (np.argwhere(self.full) + 0.5) * self.cell + self.low
        return middles


def _sectors_reached(places: FloatArray, centre: FloatArray) -> float:
    away = places - centre
    sector = np.floor((np.arctan2(away[:, 1], away[:, 0]) / (2 * np.pi) + 0.5) * SECTORS).astype(int) % SECTORS
    return len(np.unique(sector)) / SECTORS


def _is_round(centres: FloatArray, cell: float) -> bool:
    """Whether cells reach to a circle all round: least squares through the farthest cell of each direction."""
    try:
        corners = centres[ConvexHull(centres).vertices]
    except QhullError:
        return False
    middle = 0.5 * (corners.min(axis=0) + corners.max(axis=0))
    rim = corners
    for _ in range(2):
        away = centres - middle
        sector = np.floor((np.arctan2(away[:, 1], away[:, 0]) / (2 * np.pi) + 0.5) * 72).astype(int) % 72
        reach = np.hypot(*away.T)
        order = np.lexsort((reach, sector))
        last = np.append(np.flatnonzero(np.diff(sector[order])), len(order) - 1)
        rim = centres[order[last]]
        if len(rim) < 60:
            return False
        system = np.column_stack([2 * rim, np.ones(len(rim))])
        answer, *_ = np.linalg.lstsq(system, (rim**2).sum(axis=1), rcond=None)
        middle = answer[:2]
    radius = np.hypot(*(rim - middle).T)
    scatter = 1.4826 * float(np.median(np.abs(radius - np.median(radius))))
    return scatter < ROUND_SCATTER * float(np.median(radius)) + 0.3 * cell
