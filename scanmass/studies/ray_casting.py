"""First hits of rays on closed meshes, in double precision."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass import libraries
from scanmass.studies.bodies import Body

FloatArray = npt.NDArray[np.float64]
_SHARPEST_GRAZE = 1e-3
"""|cos| of incidence below which the double-precision hit is not trusted over the tree's own."""


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

    def __init__(self, bodies: Sequence[Body]) -> None:
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
