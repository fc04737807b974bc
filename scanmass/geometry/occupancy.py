"""A coarse grid of the cells a surface passes through, and rays cast through it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from numba import njit

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Occupancy:
    """``full`` (nx, ny, nz) bool; cell (i, j, k) spans ``origin + cell * (i, j, k)`` to one cell further.

    Two layers of cells all round are empty.
    """

    origin: FloatArray
    cell: float
    full: npt.NDArray[np.bool_]


def occupancy(points: FloatArray, cell: float) -> Occupancy:
    """The cells of edge ``cell`` that hold a point.

    >>> grid = occupancy(np.array([[0.0, 0, 0], [2.5, 0, 0]]), 1.0)
    >>> grid.full.shape, int(grid.full.sum())
    ((7, 5, 5), 2)
    """
    origin = points.min(axis=0) - 2.0 * cell
    place = np.floor((points - origin) / cell).astype(np.int64)
    full = np.zeros(place.max(axis=0) + 3, np.bool_)
    full[place[:, 0], place[:, 1], place[:, 2]] = True
    return Occupancy(origin, cell, full)


def directions(n: int) -> FloatArray:
    """``n`` unit vectors (n, 3) spread evenly over the sphere (golden-angle spiral).

    >>> bool(np.abs(directions(48).mean(axis=0)).max() < 0.01)
    True
    """
    turn = np.pi * (3.0 - np.sqrt(5.0)) * np.arange(n)
    z = 1.0 - (2.0 * np.arange(n) + 1.0) / n
    r = np.sqrt(1.0 - z * z)
    return np.stack([r * np.cos(turn), r * np.sin(turn), z], axis=1)


@njit(cache=True)
def _walls(full, x, y, z, dx, dy, dz):  # type: ignore[no-untyped-def]
    """Runs of full cells that a ray from (x, y, z), in cells, passes through until it leaves the grid."""
    nx, ny, nz = full.shape
    i, j, k = int(np.floor(x)), int(np.floor(y)), int(np.floor(z))
    si = 1 if dx > 0 else -1
    sj = 1 if dy > 0 else -1
    sk = 1 if dz > 0 else -1
    gx = 1.0 / max(abs(dx), 1e-12)
    gy = 1.0 / max(abs(dy), 1e-12)
    gz = 1.0 / max(abs(dz), 1e-12)
    tx = ((i + 1 - x) if dx > 0 else (x - i)) * gx
    ty = ((j + 1 - y) if dy > 0 else (y - j)) * gy
    tz = ((k + 1 - z) if dz > 0 else (z - k)) * gz
    runs, inside = 0, False
    while 0 <= i < nx and 0 <= j < ny and 0 <= k < nz:
        if full[i, j, k]:
            if not inside:
                runs += 1
            inside = True
        else:
            inside = False
        if tx <= ty and tx <= tz:
            i += si
            tx += gx
        elif ty <= tz:
            j += sj
            ty += gy
        else:
            k += sk
            tz += gz
    return runs


@njit(cache=True)
def _escapes(full, starts, normals, offset, rays, free, odd):  # type: ignore[no-untyped-def]
    for i in range(starts.shape[0]):
        for side in range(2):
            sign = 1.0 if side == 0 else -1.0
            x = starts[i, 0] + sign * offset * normals[i, 0]
            y = starts[i, 1] + sign * offset * normals[i, 1]
            z = starts[i, 2] + sign * offset * normals[i, 2]
            escaped, odds, cast = 0, 0, 0
            for r in range(rays.shape[0]):
                lean = sign * (rays[r, 0] * normals[i, 0] + rays[r, 1] * normals[i, 1] + rays[r, 2] * normals[i, 2])
                # A ray back through the point's own sheet tells nothing that the other side does not tell.
                if lean < 0.1:
                    continue
                cast += 1
                runs = _walls(full, x, y, z, rays[r, 0], rays[r, 1], rays[r, 2])
                escaped += 1 if runs == 0 else 0
                odds += runs % 2
            free[i, side] = escaped / max(cast, 1)
            odd[i, side] = odds / max(cast, 1)


def escape_shares(
    grid: Occupancy, points: FloatArray, normals: FloatArray, rays: FloatArray, offset: float = 2.5
) -> tuple[FloatArray, FloatArray]:
    """How rays leave each point on the side of its normal and on the other.

    Rays start ``offset`` cells off points (n, 3), along plus and minus their unit normals (n, 3), and go in those
    of the directions ``rays`` (r, 3) that lead away from the point. Gives two arrays (n, 2), columns plus and
    minus: the share of rays that meet no full cell, and the share that pass an odd number of walls (runs of
    full cells) before they leave the grid: inside a closed body that share is high on the material's side.
    """
    free = np.empty((len(points), 2))
    odd = np.empty((len(points), 2))
    starts = np.ascontiguousarray((points - grid.origin) / grid.cell)
    _escapes(grid.full, starts, np.ascontiguousarray(normals), offset, rays, free, odd)
    return free, odd


@njit(cache=True)
def _facing(points, normals, order, first, place, asked, cell, own, reach, gaps):  # type: ignore[no-untyped-def]
    ny, nz = first.shape[1], first.shape[2] - 1
    span = int(np.ceil(reach / cell))
    seen = np.zeros(2, np.int64)
    for a in range(asked.shape[0]):
        i = asked[a]
        gaps[a, 0] = np.inf
        gaps[a, 1] = np.inf
        seen[0] = 0
        seen[1] = 0
        for cx in range(max(place[i, 0] - span, 0), min(place[i, 0] + span + 1, first.shape[0])):
            for cy in range(max(place[i, 1] - span, 0), min(place[i, 1] + span + 1, ny)):
                for cz in range(max(place[i, 2] - span, 0), min(place[i, 2] + span + 1, nz)):
                    for at in range(first[cx, cy, cz], first[cx, cy, cz + 1]):
                        q = order[at]
                        x = points[q, 0] - points[i, 0]
                        y = points[q, 1] - points[i, 1]
                        z = points[q, 2] - points[i, 2]
                        h = x * normals[i, 0] + y * normals[i, 1] + z * normals[i, 2]
                        if abs(h) < own or abs(h) > reach or x * x + y * y + z * z - h * h > cell * cell:
                            continue
                        turn = (
                            normals[q, 0] * normals[i, 0]
                            + normals[q, 1] * normals[i, 1]
                            + normals[q, 2] * normals[i, 2]
                        )
                        if abs(turn) < 0.8:
                            continue
                        side = 0 if h > 0 else 1
                        seen[side] += 1
                        gaps[a, side] = min(gaps[a, side], abs(h))
        for side in range(2):
            if seen[side] < 3:
                gaps[a, side] = np.inf


def facing_sheets(
    grid: Occupancy, points: FloatArray, normals: FloatArray, asked: npt.NDArray[np.int64], own: float, reach: float
) -> FloatArray:
    """Distance (m, 2) to the next sheet of points across plus and minus the normal of each point ``asked`` (m,).

    A sheet is three points or more with nearly the same or the opposite normal, within one cell of the normal's
    line, farther than ``own`` (the thickness of the point's own sheet) and nearer than ``reach``; infinite where
    there is none.
    """
    place = np.floor((points - grid.origin) / grid.cell).astype(np.int64)
    shape = grid.full.shape
    flat = (place[:, 0] * shape[1] + place[:, 1]) * (shape[2] + 1) + place[:, 2]
    order = np.argsort(flat, kind="stable")
    filled = np.bincount(flat, minlength=shape[0] * shape[1] * (shape[2] + 1))
    first = (np.cumsum(filled) - filled).astype(np.int32).reshape(shape[0], shape[1], shape[2] + 1)
    gaps = np.empty((len(asked), 2))
    _facing(points, normals, order, first, place, asked, grid.cell, own, reach, gaps)
    return gaps
