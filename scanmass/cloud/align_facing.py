"""The side of a view's normals: towards what saw it."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from scanmass.cloud.normals import RawNormals
from scanmass.cloud.sides import ray_evidence, scanner_evidence, vote
from scanmass.geometry.occupancy import directions

FloatArray = npt.NDArray[np.float64]

VOTERS = 12
_LOOKED_AT = 4_000
_LAYERED = 0.03
"""Share of samples hidden behind others above which a view was not seen from one side."""
_TELLING = 0.35
"""Mean evidence of escape rays below which a view's side is left open."""
_FILE_AGREES = 0.9
"""Share of neighbours that the file's normals must agree with."""


def facing(
    points: FloatArray, raw: RawNormals, scanner: FloatArray | None, given: FloatArray | None
) -> tuple[FloatArray, bool]:
    """Normals (n, 3) all on one side of the view's surface, and whether it is known to be the outer one.

    By the scanner's place; else the file's normals where neighbours agree; else, for a view that is a single sheet
    from some direction, towards that direction, its sign by escape rays; else by escape rays and votes alone.
    """
    if scanner is not None:
        seen = scanner_evidence(points, raw.normals, np.broadcast_to(scanner, points.shape))
        belief = vote(points, raw.normals, raw.index[:, :VOTERS], seen)
        return raw.normals * np.where(belief < 0, -1.0, 1.0)[:, None], True
    if given is not None and (turned := _by_file(raw, given)) is not None:
        return turned, True
    asked = np.arange(0, len(points), -(-len(points) // _LOOKED_AT))
    rays = np.zeros(len(points))
    rays[asked] = ray_evidence(points, raw, asked)
    towards = one_side(points[asked], float(np.median(raw.distance[:, 0])) * np.sqrt(len(points) / len(asked)))
    if towards is None:
        belief = vote(points, raw.normals, raw.index[:, :VOTERS], rays)
        return raw.normals * np.where(belief < 0, -1.0, 1.0)[:, None], True
    belief = vote(points, raw.normals, raw.index[:, :VOTERS], np.clip(raw.normals @ towards / 0.3, -1.0, 1.0))
    turned = raw.normals * np.where(belief < 0, -1.0, 1.0)[:, None]
    outward = rays[asked] * np.where(belief[asked] < 0, -1.0, 1.0)
    lean = float(outward.mean())
    return (turned if lean >= 0 else -turned), abs(lean) > _TELLING * float(np.abs(outward).mean() or 1.0)


def _by_file(raw: RawNormals, given: FloatArray) -> FloatArray | None:
    """Normals on the file's side, None where its own neighbours contradict each other."""
    agree = np.einsum("ij,ij->i", raw.normals, given)
    turned: FloatArray = raw.normals * np.where(agree < 0, -1.0, 1.0)[:, None]
    beside = np.einsum("ij,ij->i", turned, turned[raw.index[:, 0]])
    clear = np.abs(beside) > 0.7
    told = float(np.mean(np.abs(agree) > 0.5))
    return turned if told > 0.8 and clear.any() and float(np.mean(beside[clear] > 0)) > _FILE_AGREES else None


def one_side(points: FloatArray, spacing: float) -> FloatArray | None:
    """A direction (3,) from which the points (n, 3) are one sheet, nothing behind anything else; None without one.

    The opposite direction would do as well.
    """
    cell = 2.5 * spacing
    best, found = _LAYERED, None
    for direction in directions(400):
        if direction[2] < 0:
            continue
        share = _hidden(points, direction, cell)
        if share < best:
            best, found = share, direction
    return found


def _hidden(points: FloatArray, direction: FloatArray, cell: float) -> float:
    """Share of the points in cells, seen along ``direction``, whose depths leave a gap: two sheets or more."""
    start = np.eye(3)[np.argmin(np.abs(direction))]
    first = np.cross(direction, start)
    first /= np.linalg.norm(first)
    flat = np.stack([points @ first, points @ np.cross(direction, first)], axis=1)
    place = np.floor((flat - flat.min(axis=0)) / cell).astype(np.int64)
    key = place[:, 0] * (place[:, 1].max() + 1) + place[:, 1]
    depth = points @ direction
    order = np.lexsort((depth, key))
    same = key[order][1:] == key[order][:-1]
    # Six cells of depth within one cell is a slope of 80 degrees; more is another sheet.
    leap = same & (np.diff(depth[order]) > 6.0 * cell)
    return float(leap.sum()) / len(points)
