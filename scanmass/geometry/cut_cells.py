"""A closed mesh cut exactly against a grid of cubic cells: ten moments of every piece.

Under every face stands a prism that reaches down to the floor of the grid; up-facing faces count plus and
down-facing ones minus, so the prisms of a closed mesh add up to the solid. Each face is clipped to the columns it
crosses, then to the slabs. In its own cell the prism under a clipped piece is integrated exactly (products of
linear functions over a triangle); every cell further down the column receives a full-height prism, which needs
only six area moments, gathered in one sum down the column. Columns are independent, so the answer does not depend
on the number of threads.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from numba import njit, prange

FloatArray = npt.NDArray[np.float64]

# A triangle cut by four column planes and two slab planes has at most nine corners.
_CORNERS = 12


@njit(cache=True)
def _bin_by_column(corners, cell, nx, ny):  # type: ignore[no-untyped-def]
    """First entry (nx ny + 1,) of each column in the list of the faces whose box touches it, and that list."""
    m = corners.shape[0]
    span = np.empty((m, 4), np.int32)
    first = np.zeros(nx * ny + 1, np.int64)
    for f in range(m):
        for axis in range(2):
            n = nx if axis == 0 else ny
            low = min(corners[f, 0, axis], corners[f, 1, axis], corners[f, 2, axis])
            high = max(corners[f, 0, axis], corners[f, 1, axis], corners[f, 2, axis])
            span[f, 2 * axis] = min(max(int(np.floor(low / cell)), 0), n - 1)
            span[f, 2 * axis + 1] = min(max(int(np.floor(high / cell)), 0), n - 1)
        for i in range(span[f, 0], span[f, 1] + 1):
            for j in range(span[f, 2], span[f, 3] + 1):
                first[i * ny + j + 1] += 1
    for c in range(nx * ny):
        first[c + 1] += first[c]
    at = first[:-1].copy()
    listed = np.empty(first[-1], np.int32)
    for f in range(m):
        for i in range(span[f, 0], span[f, 1] + 1):
            for j in range(span[f, 2], span[f, 3] + 1):
                listed[at[i * ny + j]] = f
                at[i * ny + j] += 1
    return first, listed


@njit(cache=True)
def _clip(polygon, n, axis, level, keep_below, out):  # type: ignore[no-untyped-def]
    """Clip a polygon (n corners) by the plane ``axis = level``; returns the number of corners put in ``out``."""
    count = 0
    for a in range(n):
        b = a + 1 if a + 1 < n else 0
        da = polygon[a, axis] - level
        db = polygon[b, axis] - level
        if keep_below:
            da, db = -da, -db
        if da >= 0.0:
            out[count] = polygon[a]
            count += 1
        if (da > 0.0 and db < 0.0) or (da < 0.0 and db > 0.0):
            t = da / (da - db)
            for k in range(3):
                out[count, k] = polygon[a, k] + t * (polygon[b, k] - polygon[a, k])
            out[count, axis] = level
            count += 1
    return count


@njit(cache=True)
def _clip_to_column(triangle, x0, x1, y0, y1, one, two):  # type: ignore[no-untyped-def]
    """The part of a triangle inside a column, in ``one``; returns its number of corners."""
    inside = True
    for k in range(3):
        one[k] = triangle[k]
        inside = inside and x0 <= one[k, 0] <= x1 and y0 <= one[k, 1] <= y1
    if inside:
        return 3
    n = _clip(one, 3, 0, x0, False, two)
    n = _clip(two, n, 0, x1, True, one)
    n = _clip(one, n, 1, y0, False, two)
    return _clip(two, n, 1, y1, True, one)


@njit(cache=True)
def _slab_range(polygon, n, cell, nz):  # type: ignore[no-untyped-def]
    low = polygon[0, 2]
    high = polygon[0, 2]
    for k in range(1, n):
        low = min(low, polygon[k, 2])
        high = max(high, polygon[k, 2])
    bottom = min(max(int(np.floor(low / cell)), 0), nz - 1)
    top = min(max(int(np.floor(high / cell)), 0), nz - 1)
    return bottom, top


@njit(cache=True)
def _add_prism(polygon, n, x, y, floor, sums, area):  # type: ignore[no-untyped-def]
    """Add the prism between a polygon and ``floor`` to ``sums`` (10,), and its six area moments to ``area`` (6,).

    Horizontal coordinates are taken from (x, y), heights w from the floor. With u, v, w linear on a triangle of
    signed area A and S the sum over corners: int uv = A/12 (Su Sv + Suv),
    int uvw = A/60 (Su Sv Sw + Suv Sw + Suw Sv + Svw Su + 2 Suvw).
    """
    u0 = polygon[0, 0] - x
    v0 = polygon[0, 1] - y
    w0 = polygon[0, 2] - floor
    for k in range(1, n - 1):
        u1 = polygon[k, 0] - x
        v1 = polygon[k, 1] - y
        w1 = polygon[k, 2] - floor
        u2 = polygon[k + 1, 0] - x
        v2 = polygon[k + 1, 1] - y
        w2 = polygon[k + 1, 2] - floor
        a = 0.5 * ((u1 - u0) * (v2 - v0) - (u2 - u0) * (v1 - v0))
        if a == 0.0:
            continue
        su, sv, sw = u0 + u1 + u2, v0 + v1 + v2, w0 + w1 + w2
        suu = u0 * u0 + u1 * u1 + u2 * u2
        svv = v0 * v0 + v1 * v1 + v2 * v2
        sww = w0 * w0 + w1 * w1 + w2 * w2
        suv = u0 * v0 + u1 * v1 + u2 * v2
        svw = v0 * w0 + v1 * w1 + v2 * w2
        swu = w0 * u0 + w1 * u1 + w2 * u2
        third, twelfth, sixtieth = a / 3.0, a / 12.0, a / 60.0
        area[0] += a
        area[1] += third * su
        area[2] += third * sv
        area[3] += twelfth * (su * su + suu)
        area[4] += twelfth * (sv * sv + svv)
        area[5] += twelfth * (su * sv + suv)
        suuw = u0 * u0 * w0 + u1 * u1 * w1 + u2 * u2 * w2
        svvw = v0 * v0 * w0 + v1 * v1 * w1 + v2 * v2 * w2
        suvw = u0 * v0 * w0 + u1 * v1 * w1 + u2 * v2 * w2
        suww = u0 * w0 * w0 + u1 * w1 * w1 + u2 * w2 * w2
        svww = v0 * w0 * w0 + v1 * w1 * w1 + v2 * w2 * w2
        swww = w0 * w0 * w0 + w1 * w1 * w1 + w2 * w2 * w2
        sums[0] += third * sw
        sums[1] += twelfth * (su * sw + swu)
        sums[2] += twelfth * (sv * sw + svw)
        sums[3] += 0.5 * twelfth * (sw * sw + sww)
        sums[4] += sixtieth * (su * su * sw + suu * sw + 2.0 * swu * su + 2.0 * suuw)
        sums[5] += sixtieth * (sv * sv * sw + svv * sw + 2.0 * svw * sv + 2.0 * svvw)
        sums[6] += sixtieth / 3.0 * (sw * sw * sw + 3.0 * sww * sw + 2.0 * swww)
        sums[7] += sixtieth * (su * sv * sw + suv * sw + swu * sv + svw * su + 2.0 * suvw)
        sums[8] += 0.5 * sixtieth * (sv * sw * sw + sww * sv + 2.0 * svw * sw + 2.0 * svww)
        sums[9] += 0.5 * sixtieth * (su * sw * sw + sww * su + 2.0 * swu * sw + 2.0 * suww)


@njit(cache=True, parallel=True)
def _mark_touched(corners, first, listed, cell, nx, ny, nz):  # type: ignore[no-untyped-def]
    """Which cells (nx ny, nz) a face passes through."""
    touched = np.zeros((nx * ny, nz), np.uint8)
    for c in prange(nx * ny):
        one = np.empty((_CORNERS, 3))
        two = np.empty((_CORNERS, 3))
        i, j = c // ny, c % ny
        for e in range(first[c], first[c + 1]):
            n = _clip_to_column(corners[listed[e]], i * cell, (i + 1) * cell, j * cell, (j + 1) * cell, one, two)
            if n > 0:
                bottom, top = _slab_range(one, n, cell, nz)
                touched[c, bottom : top + 1] = 1
    return touched


@njit(cache=True, parallel=True)
def _fill(corners, first, listed, cell, nx, ny, nz, touched, row):  # type: ignore[no-untyped-def]
    """Fractions (nx ny, nz) of all cells and moments (k, 10) of the touched ones about their centres.

    ``row`` (nx ny,) is the first row of each column in the moments.
    """
    fraction = np.zeros((nx * ny, nz), np.float32)
    moments = np.zeros((int(touched.sum()), 10))
    half = 0.5 * cell
    for c in prange(nx * ny):
        if first[c + 1] == first[c]:
            continue
        one = np.empty((_CORNERS, 3))
        two = np.empty((_CORNERS, 3))
        three = np.empty((_CORNERS, 3))
        sums = np.zeros((nz, 10))
        area = np.zeros((nz, 6))
        i, j = c // ny, c % ny
        x, y = (i + 0.5) * cell, (j + 0.5) * cell
        for e in range(first[c], first[c + 1]):
            n = _clip_to_column(corners[listed[e]], i * cell, (i + 1) * cell, j * cell, (j + 1) * cell, one, two)
            if n < 3:
                continue
            bottom, top = _slab_range(one, n, cell, nz)
            for k in range(bottom, top + 1):
                if k == top:
                    _add_prism(one, n, x, y, k * cell, sums[k], area[k])
                    break
                below = _clip(one, n, 2, (k + 1) * cell, True, two)
                if below >= 3:
                    _add_prism(two, below, x, y, k * cell, sums[k], area[k])
                n = _clip(one, n, 2, (k + 1) * cell, False, three)
                if n < 3:
                    break
                for p in range(n):
                    one[p] = three[p]
        above = np.zeros(6)
        at = row[c] + int(touched[c].sum()) - 1
        for k in range(nz - 1, -1, -1):
            if touched[c, k]:
                # Heights move from the slab's floor to the cell's centre; prisms from above fill the whole height.
                s = sums[k]
                m = moments[at]
                m[0] = s[0] + above[0] * cell
                m[1] = s[1] + above[1] * cell
                m[2] = s[2] + above[2] * cell
                m[3] = s[3] - half * s[0]
                m[4] = s[4] + above[3] * cell
                m[5] = s[5] + above[4] * cell
                m[6] = s[6] - 2.0 * half * s[3] + half * half * s[0] + above[0] * cell**3 / 12.0
                m[7] = s[7] + above[5] * cell
                m[8] = s[8] - half * s[2]
                m[9] = s[9] - half * s[1]
                fraction[c, k] = m[0] / cell**3
                at -= 1
            else:
                fraction[c, k] = np.round(above[0] / cell**2)
            above += area[k]
    return fraction, moments


def cut_cells(
    vertices: FloatArray, faces: npt.NDArray[np.int64], cell: float, shape: tuple[int, int, int]
) -> tuple[npt.NDArray[np.float32], npt.NDArray[np.int64], FloatArray]:
    """Fill of every cell, and the exact moments of the cells a closed mesh passes through.

    Parameters
    ----------
    vertices : (n, 3), metres, from the grid's lower corner: all within [0, shape * cell]
    faces : (m, 3), closed, counter-clockwise seen from outside
    cell : edge length of a cell, metres
    shape : cells along x, y, z

    Returns
    -------
    fraction : (nx, ny, nz) float32; a cell no face touches holds a whole number: 0, 1, or the shells it lies in
    cut : (k,) flat C-order numbers of the touched cells, ascending
    moments : (k, 10) about the centre of each touched cell, in the order of :mod:`.moments`

    Raises
    ------
    ValueError
        If a vertex lies outside the grid.
    """
    nx, ny, nz = shape
    top = cell * np.array(shape)
    if len(vertices) and (vertices.min() < 0 or (vertices > top).any()):
        raise ValueError(f"vertices must lie within [0, {top.tolist()}], got {vertices.min(0)} to {vertices.max(0)}")
    corners = np.ascontiguousarray(vertices[faces], dtype=np.float64)
    first, listed = _bin_by_column(corners, cell, nx, ny)
    touched = _mark_touched(corners, first, listed, cell, nx, ny, nz)
    per_column = touched.sum(axis=1, dtype=np.int64)
    row = np.cumsum(per_column) - per_column
    fraction, moments = _fill(corners, first, listed, cell, nx, ny, nz, touched, row)
    return fraction.reshape(shape), np.flatnonzero(touched), moments
