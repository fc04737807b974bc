"""Closed triangle meshes whose volume, centroid and inertia are known exactly."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.geometry.edges import count_edges
from scanmass.geometry.polyhedron import polyhedron_moments

FloatArray = npt.NDArray[np.float64]
FaceArray = npt.NDArray[np.int64]


@dataclass(frozen=True)
class Body:
    """A closed mesh in metres: ``vertices`` (n, 3), ``faces`` (m, 3) counter-clockwise seen from outside.

    Raises
    ------
    ValueError
        If the mesh is open, or its faces disagree.
    """

    name: str
    vertices: FloatArray
    faces: FaceArray

    def __post_init__(self) -> None:
        edges = count_edges(self.faces)
        if not edges.closed:
            raise ValueError(f"{self.name} is not a closed mesh: {edges}")

    def moments(self) -> FloatArray:
        """The ten volume moments about the origin, exact but for rounding."""
        return polyhedron_moments(self.vertices, self.faces)

    def moved(self, rotation: FloatArray, shift: Sequence[float]) -> Body:
        """The body turned by ``rotation`` (3, 3), then moved by ``shift`` (3,)."""
        return replace(self, vertices=self.vertices @ rotation.T + np.asarray(shift))

    def rounded(self, metres_per_unit: float) -> Body:
        """The body with coordinates that a single-precision file in that unit keeps as they are."""
        kept = (self.vertices / metres_per_unit).astype(np.float32).astype(np.float64)
        return replace(self, vertices=kept * metres_per_unit)


def box(name: str, sides: Sequence[float], centre: Sequence[float] = (0.0, 0.0, 0.0)) -> Body:
    """A box with ``sides`` (3,) along the axes.

    >>> float(box("crate", (1.0, 2.0, 3.0)).moments()[0].round(12))
    6.0
    """
    corners = np.array([[x, y, z] for x in (-0.5, 0.5) for y in (-0.5, 0.5) for z in (-0.5, 0.5)])
    quads = np.array([[0, 1, 3, 2], [4, 6, 7, 5], [0, 4, 5, 1], [2, 3, 7, 6], [0, 2, 6, 4], [1, 5, 7, 3]])
    faces = np.concatenate([quads[:, [0, 1, 2]], quads[:, [0, 2, 3]]]).astype(np.int64)
    return Body(name, corners * np.asarray(sides) + np.asarray(centre), faces)


def from_rings(name: str, rings: FloatArray, bottom: Sequence[float], top: Sequence[float]) -> Body:
    """The body inside a stack of closed rings (k, n, 3), each run counter-clockwise seen from the top, and two poles.

    >>> turns = 2 * np.pi * np.arange(4) / 4
    >>> ring = np.stack([np.cos(turns), np.sin(turns), 0 * turns], axis=1)
    >>> octahedron = from_rings("octahedron", ring[None], (0.0, 0.0, -1.0), (0.0, 0.0, 1.0))
    >>> float(octahedron.moments()[0].round(12))
    1.333333333333
    """
    k, n, _ = rings.shape
    here = np.arange(n)
    beside = (here + 1) % n
    faces = [np.stack([np.full(n, k * n), beside, here], axis=1)]
    for level in range(k - 1):
        low, high = level * n, (level + 1) * n
        faces.append(np.stack([low + here, low + beside, high + beside], axis=1))
        faces.append(np.stack([low + here, high + beside, high + here], axis=1))
    last = (k - 1) * n
    faces.append(np.stack([last + here, last + beside, np.full(n, k * n + 1)], axis=1))
    vertices = np.concatenate([rings.reshape(-1, 3), [bottom, top]])
    return Body(name, vertices, np.concatenate(faces).astype(np.int64))


def with_cavity(outer: Body, cavity: Body) -> Body:
    """``outer`` less a ``cavity`` that lies wholly inside it: its faces point into the hollow."""
    vertices = np.concatenate([outer.vertices, cavity.vertices])
    faces = np.concatenate([outer.faces, cavity.faces[:, ::-1] + len(outer.vertices)])
    return Body(outer.name, vertices, faces)


def solid_modeller() -> Any:
    """The library that joins and cuts solids, imported where it is first needed."""
    import manifold3d

    return manifold3d


def from_solid(name: str, solid: Any) -> Body:
    """The mesh of a solid of :func:`solid_modeller`, its double-precision coordinates as they are."""
    mesh = solid.to_mesh64()
    vertices = np.ascontiguousarray(np.asarray(mesh.vert_properties, np.float64)[:, :3])
    faces = np.asarray(mesh.tri_verts).astype(np.int64)
    # Coordinates split by a seam between source solids are named again as one.
    named = np.arange(len(vertices))
    named[np.asarray(mesh.merge_from_vert, np.int64)] = np.asarray(mesh.merge_to_vert, np.int64)
    used, compact = np.unique(named[faces], return_inverse=True)
    return Body(name, vertices[used], compact.reshape(-1, 3).astype(np.int64))


def turned(degrees: Sequence[float]) -> FloatArray:
    """The rotation (3, 3) by angles about x, then y, then z of the frame that stays.

    >>> (turned((0.0, 0.0, 90.0)) @ [1.0, 0.0, 0.0]).round(12).tolist()
    [0.0, 1.0, 0.0]
    """
    result = np.eye(3)
    for axis, angle in enumerate(np.radians(degrees)):
        i, j = (axis + 1) % 3, (axis + 2) % 3
        step = np.eye(3)
        step[i, i] = step[j, j] = np.cos(angle)
        step[j, i], step[i, j] = np.sin(angle), -np.sin(angle)
        result = step @ result
    return result
