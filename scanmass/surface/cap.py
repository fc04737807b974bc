"""Triangles that fill the rims of an open mesh."""

from __future__ import annotations

import numpy as np

from scanmass.geometry.harmonic import harmonic
from scanmass.surface.mesh import FaceArray, FloatArray, Mesh
from scanmass.surface.span import Mask

MOST_RINGS = 12


def capped(mesh: Mesh, loops: list[FaceArray]) -> tuple[Mesh, list[Mask]]:
    """The mesh with each rim filled, and for each rim the mask (m,) of its faces.

    A cap is rings of the rim's vertices, shrinking to one in the middle, on a membrane over the rim.
    """
    vertices, faces = [mesh.vertices], [mesh.faces]
    n = len(mesh.vertices)
    for loop in loops:
        inner, cap = _cap(mesh.vertices, loop, n)
        vertices.append(inner)
        faces.append(cap)
        n += len(inner)
    whole = Mesh(np.concatenate(vertices), np.concatenate(faces), mesh.resolution, mesh.notes)
    owner = np.repeat(np.arange(-1, len(loops)), [len(f) for f in faces])
    return whole, [owner == k for k in range(len(loops))]


def _cap(vertices: FloatArray, loop: FaceArray, n: int) -> tuple[FloatArray, FaceArray]:
    size = len(loop)
    rings = int(np.clip(size // 6, 1, MOST_RINGS))
    # The rim runs along the seen faces, so the cap's faces run it the other way.
    rim = loop[::-1]
    faces = _disc(size, rings)
    start = vertices[rim]
    local = np.concatenate([start, np.tile(start.mean(axis=0), ((rings - 1) * size + 1, 1))])
    fixed = np.arange(len(local)) < size
    local = harmonic(faces, local, fixed)
    numbers = np.concatenate([rim, n + np.arange(len(local) - size)])
    return local[size:], numbers[faces]


def _disc(size: int, rings: int) -> FaceArray:
    """Triangles of ``rings`` - 1 belts and a fan; ring k is vertices k size ... (k + 1) size - 1, the middle last."""
    here = np.arange(size)
    there = np.roll(here, -1)
    faces = []
    for k in range(rings - 1):
        a, b, c, d = k * size + here, k * size + there, (k + 1) * size + here, (k + 1) * size + there
        faces += [np.stack([a, b, d], axis=1), np.stack([a, d, c], axis=1)]
    last = (rings - 1) * size
    faces.append(np.stack([last + here, last + there, np.full(size, rings * size)], axis=1))
    return np.concatenate(faces).astype(np.int64)
