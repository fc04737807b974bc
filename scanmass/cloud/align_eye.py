"""Where the scanner of a view stood, told from how densely it sampled what it saw."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy.optimize import least_squares
from scipy.spatial import cKDTree

from scanmass.cloud.align_sight import hidden
from scanmass.geometry.occupancy import directions

FloatArray = npt.NDArray[np.float64]

NEIGHBOURS = 16
NEAREST, FARTHEST = 0.7, 30.0
"""Distances of the scanner, in sizes of the view, that are looked at."""
GRAZING = 0.05
"""Cosines of incidence below this are not told apart."""
SCATTER = 0.2
"""Median misfit of the logarithm of the density above which no place explains it."""
CLEARER = 0.65
"""Misfit of a place as a share of that of an even sampling, above which there was no one place."""
HIDDEN = 0.03
"""Share of the samples hidden from a place above which the scanner did not stand there."""


def density(points: FloatArray, count: npt.NDArray[np.int32], asked: npt.NDArray[np.int64]) -> FloatArray:
    """Scan points per square metre of surface (k,) at the samples ``asked`` (k,); each stands for ``count`` points."""
    tree = cKDTree(points)
    distance, index = tree.query(points[asked], k=min(NEIGHBOURS, len(points)))
    # The last neighbour lies on the rim of the disc: half of it counts.
    held = count[index].sum(axis=1) - 0.5 * count[index[:, -1]]
    found: FloatArray = held / (np.pi * np.maximum(distance[:, -1], 1e-12) ** 2)
    return found


def find_eye(points: FloatArray, normals: FloatArray, dense: FloatArray, spacing: float) -> FloatArray | None:
    """Where the one scanner of a view stood (3,), None where no place explains what was sampled.

    A scanner whose rays are evenly spread samples a surface by cosine of incidence over range squared. The place is
    fitted to the densities (k,) at points (k, 3) by robust least squares of their logarithms; normals of either sign.
    """
    middle = points.mean(axis=0)
    size = float(np.linalg.norm(np.ptp(points, axis=0)))
    local, level = (points - middle) / size, np.log(dense) - float(np.median(np.log(dense)))

    def misfit(place: FloatArray) -> FloatArray:
        towards = place[:3] - local
        far = np.linalg.norm(towards, axis=1)
        cosine = np.abs(np.einsum("ij,ij->i", towards, normals)) / far
        missed: FloatArray = np.log(np.maximum(cosine, GRAZING)) - 2.0 * np.log(far) + place[3] - level
        return missed

    starts = []
    for direction in directions(60):
        place = np.append(2.5 * direction, 0.0)
        place[3] = -float(np.median(misfit(place)))
        starts.append((float(np.abs(misfit(place)).sum()), place))
    starts.sort(key=lambda start: start[0])
    best, found = np.inf, None
    # From behind, a cap looks much as from before: both sides are tried.
    chosen = [start for _, start in starts[:3]]
    for start in [*chosen, *(start * [-1.0, -1.0, -1.0, 1.0] for start in chosen)]:
        got = least_squares(misfit, start, loss="soft_l1", f_scale=0.3, max_nfev=40)
        place = got.x[:3]
        distance = float(np.linalg.norm(place))
        if got.cost < best and distance >= NEAREST:
            best, found = float(got.cost), place * min(1.0, FARTHEST / distance)
    if found is None:
        return None
    left = misfit(np.append(found, 0.0))
    scatter, plain = (float(np.median(np.abs(x - np.median(x)))) for x in (left, level))
    if scatter > SCATTER or scatter > CLEARER * plain:
        return None
    eye: FloatArray = middle + size * found
    turned = normals * np.where(np.einsum("ij,ij->i", eye - points, normals) < 0, -1.0, 1.0)[:, None]
    return eye if hidden(points, turned, eye, spacing) <= HIDDEN else None
