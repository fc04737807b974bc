"""From how many directions the object was seen."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from scanmass.errors import Declined
from scanmass.geometry.polyhedron import face_areas
from scanmass.surface.mesh import FloatArray, Mesh

DIRECTIONS = 500
HALF = 0.5
"""A direction counts as seen when at least this share of the surface that faces it was seen."""
LEAST_UNSEEN = 0.3
"""Share of directions from which a closed mass is declined. One view of a sphere, and a hemisphere standing on its
base, miss 0.33 (without up no scan can tell them apart); a cube without its base 0.13."""
DOWNWARD = -0.3
"""With a known up, directions that look up from below this (sine) are the underside's, and left to its closure."""
LEAST_UNSEEN_ABOVE = 0.25
LOW = 0.05
"""Share of the height above the floor that still is the underside's."""
MOST_AREA, MOST_AREA_ABOVE = 0.28, 0.15
"""Shares of the closed surface that may be inferred: of all of it without up, and beside and above the underside with
it. One view of half a round body is closed by a lid of a third of its area, and looks complete from most sides."""


def sphere_directions(n: int = DIRECTIONS) -> FloatArray:
    """Unit vectors (n, 3) spread evenly: a spiral of equal areas turning by the golden angle."""
    z = 1.0 - (2.0 * np.arange(n) + 1.0) / n
    turn = np.arange(n) * np.pi * (3.0 - np.sqrt(5.0))
    radius = np.sqrt(1.0 - z * z)
    return np.stack([radius * np.cos(turn), radius * np.sin(turn), z], axis=1)


def unseen_share(mesh: Mesh, inferred: npt.NDArray[np.bool_], up: FloatArray | None) -> float:
    """Share of the directions (above the underside's, with ``up``) that mostly face what was not seen."""
    area, normals = face_areas(mesh.vertices, mesh.faces)
    directions = sphere_directions()
    if up is not None:
        directions = directions[directions @ up > DOWNWARD]
    seen = np.zeros(len(directions))
    total = np.zeros(len(directions))
    for k, direction in enumerate(directions):
        facing = area * np.maximum(normals @ direction, 0.0)
        total[k] = facing.sum()
        seen[k] = facing[~inferred].sum()
    return float(np.mean(seen < HALF * total))


def require_all_round(
    mesh: Mesh, inferred: npt.NDArray[np.bool_], up: FloatArray | None, level: float | None = None
) -> None:
    """Raise Declined where the scan saw the object from too few sides to close it.

    What the reconstruction made below ``up . r = level``, where the object stands, is the underside's.
    """
    share = unseen_share(mesh, inferred, up)
    if up is None and share > LEAST_UNSEEN:
        raise Declined(
            f"the scan is one-sided: {100 * share:.0f} % of all directions look at surface that was not seen",
            allowed="scan the other sides too, or declare scan.up and surface.underside (flat or hollow)",
        )
    if up is not None and share > LEAST_UNSEEN_ABOVE:
        raise Declined(
            f"the scan is one-sided: {100 * share:.0f} % of the directions beside and above the object look at surface "
            "that was not seen",
            allowed="scan the other sides too: a declared underside closes the object from below only",
        )
    area, normals = face_areas(mesh.vertices, mesh.faces)
    beside = np.ones(len(area), np.bool_)
    if up is not None:
        heights = mesh.vertices[mesh.faces].mean(axis=1) @ up
        floor = heights.min() if level is None else level
        beside = (normals @ up > -0.5) & (heights > floor + LOW * (heights.max() - floor))
    guessed = float(area[beside & inferred].sum() / area[beside].sum())
    if guessed > (MOST_AREA if up is None else MOST_AREA_ABOVE):
        raise Declined(
            f"the scan is {'one-sided' if share > 0.1 else 'patchy'}: {100 * guessed:.0f} % of the surface"
            f"{'' if up is None else ' beside and above'} was not seen, "
            f"and {100 * share:.0f} % of all directions look mostly at that",
            allowed="scan the other sides too"
            + (", or declare scan.up and surface.underside (flat or hollow)" if up is None else ""),
        )
