"""Points gathered into cubic cells, view by view, in one pass and bounded memory."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from numba import njit

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

# Columns of a cell's sums: mean x y z, six sums of squares about the mean (xx yy zz xy yz zx), normal, colour.
_MEAN, _SQUARES, _NORMAL, _COLOUR, _WIDTH = 0, 3, 9, 12, 15
_REACH = 2**30


@njit(cache=True)
def _slot(keys, slots, i, j, k, view):  # type: ignore[no-untyped-def]
    """The place in ``slots`` where the cell is, or where it may be put (linear probing)."""
    mask = len(slots) - 1
    mixed = np.uint64(i) * np.uint64(0x9E3779B97F4A7C15)
    mixed = (mixed ^ (mixed >> np.uint64(29))) + np.uint64(j)
    mixed = mixed * np.uint64(0xBF58476D1CE4E5B9)
    mixed = (mixed ^ (mixed >> np.uint64(32))) + np.uint64(k)
    mixed = mixed * np.uint64(0x94D049BB133111EB)
    mixed = (mixed ^ (mixed >> np.uint64(31))) + np.uint64(view)
    mixed = mixed * np.uint64(0x9E3779B97F4A7C15)
    at = np.int64((mixed ^ (mixed >> np.uint64(32))) & np.uint64(mask))
    while True:
        cell = slots[at]
        if cell < 0:
            return at
        if keys[cell, 0] == i and keys[cell, 1] == j and keys[cell, 2] == k and keys[cell, 3] == view:
            return at
        at = (at + 1) & mask


@njit(cache=True)
def _merge(count, sums, edge, into, other):  # type: ignore[no-untyped-def]
    """Cell ``other`` poured into ``into``: means and squares about the mean (Chan, Golub & LeVeque 1983)."""
    a, b = float(count[into]), float(count[other])
    total = a + b
    x = sums[other, 0] - sums[into, 0]
    y = sums[other, 1] - sums[into, 1]
    z = sums[other, 2] - sums[into, 2]
    w = a * b / total
    sums[into, 0] += x * b / total
    sums[into, 1] += y * b / total
    sums[into, 2] += z * b / total
    sums[into, 3] += sums[other, 3] + w * x * x
    sums[into, 4] += sums[other, 4] + w * y * y
    sums[into, 5] += sums[other, 5] + w * z * z
    sums[into, 6] += sums[other, 6] + w * x * y
    sums[into, 7] += sums[other, 7] + w * y * z
    sums[into, 8] += sums[other, 8] + w * z * x
    for column in range(9, 15):
        sums[into, column] += sums[other, column]
    count[into] += count[other]
    edge[into] += edge[other]


@njit(cache=True)
def _double(keys, count, sums, edge, slots, used):  # type: ignore[no-untyped-def]
    """Cells of twice the size: eight neighbours become one, exactly. Gives the number of cells left."""
    slots[:] = -1
    left = 0
    for cell in range(used):
        i, j, k, view = keys[cell, 0] >> 1, keys[cell, 1] >> 1, keys[cell, 2] >> 1, keys[cell, 3]
        at = _slot(keys, slots, i, j, k, view)
        if slots[at] >= 0:
            _merge(count, sums, edge, slots[at], cell)
            continue
        # Cells only move down, so what is written here has been read already.
        keys[left, 0], keys[left, 1], keys[left, 2], keys[left, 3] = i, j, k, view
        count[left] = count[cell]
        edge[left] = edge[cell]
        sums[left] = sums[cell]
        slots[at] = left
        left += 1
    return left


@njit(cache=True)
def _gather(points, extras, marked, view, origin, size, limit, keys, count, sums, edge, slots, used):  # type: ignore[no-untyped-def]
    for p in range(points.shape[0]):
        x = points[p, 0] - origin[0]
        y = points[p, 1] - origin[1]
        z = points[p, 2] - origin[2]
        far = max(abs(x), abs(y), abs(z))
        while far >= _REACH * size:
            used = _double(keys, count, sums, edge, slots, used)
            size *= 2.0
        i, j, k = int(np.floor(x / size)), int(np.floor(y / size)), int(np.floor(z / size))
        at = _slot(keys, slots, i, j, k, view)
        while slots[at] < 0 and used >= limit:
            used = _double(keys, count, sums, edge, slots, used)
            size *= 2.0
            i, j, k = int(np.floor(x / size)), int(np.floor(y / size)), int(np.floor(z / size))
            at = _slot(keys, slots, i, j, k, view)
        cell = slots[at]
        if cell < 0:
            cell = used
            used += 1
            slots[at] = cell
            keys[cell, 0], keys[cell, 1], keys[cell, 2], keys[cell, 3] = i, j, k, view
            count[cell] = 0
            edge[cell] = 0
            sums[cell, :] = 0.0
        count[cell] += 1
        n = count[cell]
        dx, dy, dz = x - sums[cell, 0], y - sums[cell, 1], z - sums[cell, 2]
        sums[cell, 0] += dx / n
        sums[cell, 1] += dy / n
        sums[cell, 2] += dz / n
        ex, ey, ez = x - sums[cell, 0], y - sums[cell, 1], z - sums[cell, 2]
        sums[cell, 3] += dx * ex
        sums[cell, 4] += dy * ey
        sums[cell, 5] += dz * ez
        sums[cell, 6] += dx * ey
        sums[cell, 7] += dy * ez
        sums[cell, 8] += dz * ex
        for column in range(extras.shape[1]):
            sums[cell, 9 + column] += extras[p, column]
        if marked.shape[0] > 0 and marked[p]:
            edge[cell] += 1
    return used, size


@dataclass(frozen=True)
class Gathered:
    """Cells in the order their first points came: ``mean`` (n, 3), ``view``, ``count`` (n,), covariance (n, 6).

    The covariance is that of the cell's points, xx yy zz xy yz zx, NaN for a single point. ``normal``, ``colour``
    (n, 3) are means; ``marked`` (n,) counts marked points; ``cell`` is the edge of the cells.
    """

    mean: FloatArray
    view: npt.NDArray[np.int32]
    count: npt.NDArray[np.int32]
    covariance: FloatArray
    normal: FloatArray
    colour: FloatArray
    marked: npt.NDArray[np.int32]
    cell: float


class Cells:
    """A table of at most ``limit`` cells; when one more is needed, cells of twice the size take their place.

    Memory: 0.3 kB a cell, whatever the number of points. What comes out depends on the points and their order,
    not on how they were cut into calls of :meth:`add`.

    >>> cells = Cells(np.zeros(3), 1.0, limit=10)
    >>> cells.add(np.array([[0.25, 0.5, 0.5], [0.75, 0.5, 0.5], [7.5, 0.5, 0.5]]), view=0)
    >>> gathered = cells.gathered()
    >>> gathered.mean.tolist(), gathered.count.tolist()
    ([[0.5, 0.5, 0.5], [7.5, 0.5, 0.5]], [2, 1])
    """

    def __init__(self, origin: FloatArray, size: float, limit: int) -> None:
        self._origin = np.asarray(origin, np.float64)
        self._size = float(size)
        self._limit = limit
        self._used = 0
        self._keys = np.zeros((limit, 4), np.int64)
        self._count = np.zeros(limit, np.int32)
        self._edge = np.zeros(limit, np.int32)
        self._sums = np.zeros((limit, _WIDTH))
        self._slots = np.full(1 << int(np.ceil(np.log2(2 * limit + 2))), -1, np.int64)

    def add(
        self,
        points: FloatArray,
        view: int,
        extras: FloatArray | None = None,
        marked: npt.NDArray[np.bool_] | None = None,
    ) -> None:
        """Points (n, 3) of one view; ``extras`` (n, 6) their normals and colours; ``marked`` (n,) is counted."""
        self._used, self._size = _gather(
            np.ascontiguousarray(points, np.float64),
            np.empty((0, 0)) if extras is None else np.ascontiguousarray(extras, np.float64),
            np.empty(0, np.bool_) if marked is None else marked,
            view,
            self._origin,
            self._size,
            self._limit,
            self._keys,
            self._count,
            self._sums,
            self._edge,
            self._slots,
            self._used,
        )

    def gathered(self) -> Gathered:
        """What the cells hold now, in the points' own frame."""
        n = self._used
        sums, count = self._sums[:n], self._count[:n].copy()
        number = count[:, None].astype(np.float64)
        squares = sums[:, _SQUARES:_NORMAL]
        covariance = np.where(number > 1, squares / np.maximum(number - 1, 1), np.nan)
        return Gathered(
            sums[:, _MEAN:_SQUARES] + self._origin,
            self._keys[:n, 3].astype(np.int32),
            count,
            covariance,
            sums[:, _NORMAL:_COLOUR] / number,
            sums[:, _COLOUR:] / number,
            self._edge[:n].copy(),
            self._size,
        )
