"""Columns between two positions of a patch of surface, and what they hold."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.geometry.moments import monomials
from scanmass.surface.mesh import FaceArray, FloatArray

LAYERS = 8
"""Each column can be filled to any eighth of its depth, from the body's side on."""


@dataclass(frozen=True)
class Columns:
    """Ten moments (c, LAYERS + 1, 10) of c columns when filled to 0, 1/8, ... 1 of their depth."""

    filled: FloatArray

    @classmethod
    def between(cls, faces: FaceArray, near: FloatArray, far: FloatArray) -> Columns:
        """Columns over ``faces`` (c, 3) from vertices ``near`` (n, 3) to ``far`` (n, 3); positive along the normals."""
        parts = [np.zeros((len(faces), 10))]
        for k in range(LAYERS):
            lower = near + (far - near) * (k / LAYERS)
            upper = near + (far - near) * ((k + 1) / LAYERS)
            parts.append(prism_moments(faces, lower, upper))
        return cls(np.cumsum(np.stack(parts, axis=1), axis=1))

    @classmethod
    def joined(cls, parts: list[Columns]) -> Columns:
        """All the columns of ``parts``."""
        return cls(np.concatenate([p.filled for p in parts] or [np.zeros((0, LAYERS + 1, 10))]))

    def best(self, weights: FloatArray) -> FloatArray:
        """Sum of moments (10,) with each column filled so that ``weights`` (10,) . moments is greatest."""
        score = self.filled @ weights
        chosen = np.argmax(score, axis=1)
        total: FloatArray = self.filled[np.arange(len(chosen)), chosen].sum(axis=0)
        return total

    def extreme_centroid(self, base: FloatArray, direction: FloatArray, rounds: int = 50) -> FloatArray:
        """Moments (10,) of ``base`` (10,) with the columns filled so that the centroid is farthest along ``direction``.

        A ratio of sums is greatest where each part is chosen against the ratio itself (Dinkelbach 1967).
        """
        total = base
        for _ in range(rounds):
            reached = float(direction @ total[1:4] / total[0])
            weights = np.concatenate([[-reached], direction, np.zeros(6)])
            following = base + self.best(weights)
            if float(weights @ following) <= 1e-12 * abs(following[0]):
                break
            total = following
        return total


def swept_volume(faces: FaceArray, near: FloatArray, far: FloatArray) -> float:
    """Volume between ``faces`` (c, 3) on vertices ``near`` (n, 3) and on ``far`` (n, 3), positive along the normals."""
    return float(prism_moments(faces, near, far)[:, 0].sum())


def prism_moments(faces: FaceArray, lower: FloatArray, upper: FloatArray) -> FloatArray:
    """Ten moments (m, 10), about the origin, of the solids between each face on ``lower`` and on ``upper`` (n, 3).

    Three tetrahedra each, cut by vertex number so that neighbours fit: a sloping side's diagonal runs from the
    lower vertex of the smaller number to the upper one of the larger. Positive where upper lies along the normal.

    >>> corner = np.array([[0.0, 0, 0], [1, 0, 0], [0, 1, 0]])
    >>> prism_moments(np.array([[0, 1, 2]]), corner, corner + [0, 0, 2])[0, [0, 3]].round(12).tolist()
    [1.0, 1.0]
    """
    order = np.argsort(faces, axis=1)
    v = np.take_along_axis(faces, order, axis=1)
    even: npt.NDArray[np.bool_] = np.isin(order @ np.array([9, 3, 1]), [0 * 9 + 3 + 2, 9 + 2 * 3 + 0, 2 * 9 + 0 + 1])
    a, b, c = (lower[v[:, k]] for k in range(3))
    p, q, r = (upper[v[:, k]] for k in range(3))
    total = _tetrahedra(a, b, c, r) + _tetrahedra(a, b, r, q) + _tetrahedra(a, q, r, p)
    result: FloatArray = np.where(even, 1.0, -1.0)[:, None] * total
    return result


def _tetrahedra(a: FloatArray, b: FloatArray, c: FloatArray, d: FloatArray) -> FloatArray:
    """Signed moments: the mean of a quadratic over a tetrahedron is (sum at corners + 16 at the middle)/20."""
    volume = np.einsum("ij,ij->i", np.cross(b - a, c - a), d - a) / 6.0
    middle = 0.25 * (a + b + c + d)
    mean = (monomials(a) + monomials(b) + monomials(c) + monomials(d) + 16.0 * monomials(middle)) / 20.0
    moments: FloatArray = volume[:, None] * mean
    return moments
