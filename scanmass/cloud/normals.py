"""Normals from the neighbours of every sample, without a side yet."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from numba import njit

from scanmass.geometry.neighbours import nearest
from scanmass.geometry.planes import _least_axis, local_planes

FloatArray = npt.NDArray[np.float64]
IndexArray = npt.NDArray[np.int64]

FEWEST, MOST = 10, 60
"""Neighbours a normal is taken from."""
KEPT = 12
"""Neighbours kept at least, for the stages after."""
TARGET = 0.07
"""Error of a normal about each axis that the number of neighbours aims at, in radians."""


@dataclass(frozen=True)
class RawNormals:
    """``normals`` (n, 3) unit, either sign; ``index``, ``distance`` (n, k) of the neighbours, nearest first.

    ``noise``: median deviation, in metres, of samples off the plane of their neighbours; ``used``: neighbours
    behind each normal.
    """

    normals: FloatArray
    index: IndexArray
    distance: FloatArray
    noise: float
    used: int


def raw_normals(points: FloatArray) -> RawNormals:
    """Normals of samples (n, 3), each from as many neighbours as the noise asks for.

    The error of a plane's normal is about 2 sigma / (r sqrt(k)) for k samples within r, noise sigma. k is chosen
    so that this is 0.07 rad (4 degrees) about each axis, between 10 and 60 neighbours: few, because samples of the
    opposite face of a thin wall come in with many. A second fit leaves out neighbours off the first plane.

    >>> grid = np.stack(np.meshgrid(np.arange(9.0), np.arange(9.0), [0.0]), axis=-1).reshape(-1, 3)
    >>> bool(np.allclose(np.abs(raw_normals(grid).normals), [0, 0, 1]))
    True
    """
    noise, k = _noise_and_count(points)
    distance, index = nearest(points, max(k, KEPT))
    k = min(k, index.shape[1])
    near = np.ascontiguousarray(index[:, :k])
    normals, _ = local_planes(points, near)
    better = np.empty_like(normals)
    _second_fit(np.ascontiguousarray(points), near, normals, noise, better)
    return RawNormals(better, index, distance, noise, k)


def _noise_and_count(points: FloatArray) -> tuple[float, int]:
    """Noise, and neighbours to take, from some thousand samples."""
    asked = np.arange(0, len(points), -(-len(points) // 5_000))
    distance, index = nearest(points, MOST + 1, points[asked])
    distance, index = distance[:, 1:], index[:, 1:]
    reach = float(np.median(distance[:, min(8, distance.shape[1]) - 1]))
    noise, k = 0.0, 8
    for _ in range(3):
        _, deviation = local_planes(points, index[:, :k], asked)
        # A deviation that leaps with k is the surface's bend, or a second sheet, not noise.
        if k > 8 and np.median(deviation) > 1.6 * noise:
            break
        noise = float(np.median(deviation))
        wanted = 0 if reach == 0 else round(2.0 * np.sqrt(8.0) * noise / (TARGET * reach))
        k = int(np.clip(wanted, FEWEST, MOST))
    return noise, k


@njit(cache=True)
def _second_fit(points, index, normals, noise, out):  # type: ignore[no-untyped-def]
    k = index.shape[1]
    for i in range(points.shape[0]):
        n = 1.0
        sx = sy = sz = sxx = syy = szz = sxy = syz = szx = 0.0
        for j in range(k):
            m = index[i, j]
            x = points[m, 0] - points[i, 0]
            y = points[m, 1] - points[i, 1]
            z = points[m, 2] - points[i, 2]
            height = abs(x * normals[i, 0] + y * normals[i, 1] + z * normals[i, 2])
            turn = abs(normals[m, 0] * normals[i, 0] + normals[m, 1] * normals[i, 1] + normals[m, 2] * normals[i, 2])
            if height > 3.0 * noise and (turn < 0.7 or height > 0.5 * np.sqrt(x * x + y * y + z * z)):
                continue
            n += 1.0
            sx += x
            sy += y
            sz += z
            sxx += x * x
            syy += y * y
            szz += z * z
            sxy += x * y
            syz += y * z
            szx += z * x
        if n < 6.0:
            out[i] = normals[i]
            continue
        _least_axis(
            sxx / n - sx * sx / n / n,
            syy / n - sy * sy / n / n,
            szz / n - sz * sz / n / n,
            sxy / n - sx * sy / n / n,
            syz / n - sy * sz / n / n,
            szx / n - sz * sx / n / n,
            out[i],
        )
