"""First hits of rays on closed meshes, in double precision."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
import numpy.typing as npt

from scanmass import libraries

FloatArray = npt.NDArray[np.float64]
FaceArray = npt.NDArray[np.int64]
_SHARPEST_GRAZE = 1e-3
"""|cos| of incidence below which the double-precision hit is not trusted over the tree's own."""


class Skin(Protocol):
    """What rays can hit: ``vertices`` (n, 3) in metres and ``faces`` (m, 3)."""

    @property
    def vertices(self) -> FloatArray: ...
    @property
    def faces(self) -> FaceArray: ...


@dataclass(frozen=True)
class Hits:
    """First hits of n rays. ``distance`` (n,), inf where nothing was hit; ``part`` (n,) int32 index into the scene's
    bodies, -1 where nothing was hit; ``cosine`` (n,): |cos| of the angle between ray and face normal, 0 for misses.
    """

    distance: FloatArray
    part: npt.NDArray[np.int32]
    cosine: FloatArray

    @property
    def found(self) -> npt.NDArray[np.bool_]:
        """Rays (n,) that hit something."""
        return self.part >= 0


class Scene:
    """Bodies that hide each other.

    >>> from scanmass.studies.bodies import box
    >>> scene = Scene([box("crate", (2.0, 2.0, 2.0))])
    >>> scene.first_hits(np.array([[0.0, 0.0, 5.0]]), np.array([[0.0, 0.0, -1.0]])).distance.round(9).tolist()
    [4.0]
    """

    def __init__(self, bodies: Sequence[Skin]) -> None:
        o3d = libraries.open3d()

        self.bodies = tuple(bodies)
        self._tree = o3d.t.geometry.RaycastingScene()
        self._corners = []
        for body in self.bodies:
            self._tree.add_triangles(
                o3d.core.Tensor(body.vertices.astype(np.float32)), o3d.core.Tensor(body.faces.astype(np.uint32))
            )
            self._corners.append(body.vertices[body.faces])

    def first_hits(self, origins: FloatArray, directions: FloatArray) -> Hits:
        """First hits of rays from ``origins`` (n, 3) along unit ``directions`` (n, 3), in the bodies' frame.

        The tree works in single precision and says which triangle was hit; the distance to that triangle's plane
        is then taken in double precision. One thread, so that the answer never depends on the machine's load.
        """
        o3d = libraries.open3d()

        rays = np.concatenate([origins, directions], axis=1).astype(np.float32)
        answer = self._tree.cast_rays(o3d.core.Tensor(rays), nthreads=1)
        distance = answer["t_hit"].numpy().astype(np.float64)
        which, triangle = answer["geometry_ids"].numpy(), answer["primitive_ids"].numpy()
        found = np.isfinite(distance)
        part = np.where(found, which, 0).astype(np.int32)
        part[~found] = -1
        cosine = np.zeros(len(distance))
        for number, corners in enumerate(self._corners):
            mine = np.flatnonzero(part == number)
            a, b, c = np.swapaxes(corners[triangle[mine]], 0, 1)
            normal = np.cross(b - a, c - a)
            normal /= np.linalg.norm(normal, axis=1, keepdims=True)
            towards = np.einsum("ij,ij->i", normal, directions[mine])
            height = np.einsum("ij,ij->i", normal, a - origins[mine])
            trusted = np.abs(towards) > _SHARPEST_GRAZE
            exact = height / np.where(trusted, towards, 1.0)
            distance[mine] = np.where(trusted, exact, distance[mine])
            cosine[mine] = np.abs(towards)
        return Hits(distance, part, cosine)

    def nearest(self, points: FloatArray) -> tuple[FloatArray, FloatArray]:
        """The nearest place of any body to each of ``points`` (n, 3), and the unit normal there: (n, 3), (n, 3).

        The tree works in single precision and says which triangle is nearest; the place is then moved onto that
        triangle's plane in double precision.

        >>> from scanmass.studies.bodies import box
        >>> scene = Scene([box("crate", (2.0, 2.0, 2.0))])
        >>> [row.round(6).tolist() for row in scene.nearest(np.array([[0.2, 0.1, 5.0]]))]
        [[[0.2, 0.1, 1.0]], [[0.0, 0.0, 1.0]]]
        """
        o3d = libraries.open3d()

        answer = self._tree.compute_closest_points(o3d.core.Tensor(points.astype(np.float32)), nthreads=1)
        places = answer["points"].numpy().astype(np.float64)
        which, triangle = answer["geometry_ids"].numpy(), answer["primitive_ids"].numpy()
        normals = np.zeros_like(places)
        for number, corners in enumerate(self._corners):
            mine = np.flatnonzero(which == number)
            a, b, c = np.swapaxes(corners[triangle[mine]], 0, 1)
            normal = np.cross(b - a, c - a)
            normal /= np.maximum(np.linalg.norm(normal, axis=1, keepdims=True), np.finfo(float).tiny)
            places[mine] += np.einsum("ij,ij->i", a - places[mine], normal)[:, None] * normal
            normals[mine] = normal
        return places, normals
