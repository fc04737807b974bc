"""Shells of a closed mesh: which is solid, which a cavity, which is there twice."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from scanmass.errors import Declined, Note
from scanmass.geometry.edges import shell_labels
from scanmass.geometry.polyhedron import polyhedron_moments
from scanmass.surface.mesh import FaceArray, FloatArray
from scanmass.surface.winding import winding_numbers

PROBES = 24
INSIDE, OUTSIDE = 0.75, 0.25
MOST_SHELLS = 200
SIMILAR = 0.5
"""Share of the largest shell's size from which another that lies apart is an object of its own."""


@dataclass(frozen=True)
class Shells:
    """Faces (m, 3) with every shell the right way out; ``count`` shells, ``cavities`` of them inside another."""

    faces: FaceArray
    count: int
    cavities: int
    assumptions: tuple[Note, ...]
    warnings: tuple[Note, ...]


def settled(vertices: FloatArray, faces: FaceArray, *, known: bool = True) -> Shells:
    """The shells of a closed mesh with their signs settled by what lies inside what.

    Solid shells count plus, cavities (inside an odd number of others) minus. A mesh that is inside out as a whole, or
    a shell that is so by itself, is reversed and noted. With ``known`` false (windings were repaired) signs follow the
    nesting alone.

    Raises
    ------
    Declined
        If a solid shell lies wholly inside another solid one: it would count twice.
    """
    count, labels = shell_labels(faces)
    if count > MOST_SHELLS:
        raise Declined(f"the mesh falls into {count} separate shells", allowed="join them, or give the scan as points")
    parts = [faces[labels == k] for k in range(count)]
    volumes = np.array([polyhedron_moments(vertices, part)[0] for part in parts])
    inside, overlaps = _nesting(vertices, parts)
    depth = inside.sum(axis=1)
    expected = np.where(depth % 2 == 0, 1.0, -1.0)
    assumptions: list[Note] = []
    flip = np.zeros(count, bool)
    whole_reversed = bool(known and volumes.sum() < 0)
    sign = np.where(volumes < 0, -1.0, 1.0) * (-1.0 if whole_reversed else 1.0)
    if known:
        flip[:] = whole_reversed
        lone = (depth == 0) & (sign < 0)
        flip ^= lone
        if whole_reversed or lone.any():
            text = "faces point inward (the volume is negative): the mesh is inside out, and was turned"
            assumptions.append(Note("inside-out", text))
        twice = int(((depth > 0) & (sign > 0) & (expected < 0)).sum())
        if twice:
            raise Declined(
                f"{twice} shell(s) of the mesh lie inside another and both count as solid: the inner part counts twice",
                allowed="turn the faces of the inner shell if it is a cavity, or remove it",
            )
    else:
        flip = np.sign(volumes) != expected
    turned = np.where(flip[labels][:, None], faces[:, ::-1], faces)
    warnings = []
    if overlaps:
        text = f"{overlaps} pair(s) of shells overlap: what they share counts twice"
        warnings.append(Note("shells-overlap", text))
    return Shells(turned, count, int((depth % 2 == 1).sum()), tuple(assumptions), tuple(warnings))


def require_one_object(vertices: FloatArray, faces: FaceArray) -> None:
    """Raise Declined where two solid shells of similar size lie apart: which of them is the object?

    Cavities, small loose pieces, and shells whose boxes meet (parts of an assembly) pass.
    """
    count, labels = shell_labels(faces)
    if count == 1:
        return
    parts = [faces[labels == k] for k in range(count)]
    solid = [part for part in parts if polyhedron_moments(vertices, part)[0] > 0]
    boxes = [(vertices[part].min(axis=(0, 1)), vertices[part].max(axis=(0, 1))) for part in solid]
    sizes = np.array([float((high - low).max()) for low, high in boxes])
    order = np.argsort(-sizes)
    first = boxes[order[0]]
    for k in order[1:]:
        low, high = boxes[k]
        apart = bool(np.any(low > first[1]) or np.any(high < first[0]))
        if apart and sizes[k] > SIMILAR * sizes[order[0]]:
            raise Declined(
                f"the scan holds several separate objects of similar size ({1000 * sizes[order[0]]:.4g} mm and "
                f"{1000 * sizes[k]:.4g} mm)",
                allowed="crop the scan to one object, or give one file an object",
            )


def _nesting(vertices: FloatArray, parts: list[FaceArray]) -> tuple[np.ndarray, int]:
    """Whether shell i lies inside shell j (s, s), and how many pairs have parts both in and out."""
    count = len(parts)
    inside = np.zeros((count, count), bool)
    overlaps = set()
    boxes = [(vertices[p].min(axis=(0, 1)), vertices[p].max(axis=(0, 1))) for p in parts]
    for i, part in enumerate(parts):
        used = np.unique(part)
        probes = vertices[used[np.linspace(0, len(used) - 1, min(PROBES, len(used))).astype(int)]]
        for j, other in enumerate(parts):
            apart = (boxes[i][0] > boxes[j][1]).any() or (boxes[j][0] > boxes[i][1]).any()
            if i == j or apart:
                continue
            winding = np.abs(winding_numbers(probes, vertices, other))
            within, without = winding > INSIDE, winding < OUTSIDE
            inside[i, j] = bool(within.any() and not without.any())
            if within.any() and without.any():
                overlaps.add((min(i, j), max(i, j)))
    return inside, len(overlaps)
