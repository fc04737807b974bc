"""Closed forms: the ten moments of handbook solids, at unit density.

Axes are upright along z and the base stands at z = 0 unless a function says otherwise. Each function gives the
ten volume moments about the origin in the order of :mod:`.moments`. The formulas are the handbook ones for
volume, centroid and second moments; every one is checked in the tests against a triangulation.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from scanmass.geometry.moments import translated

FloatArray = npt.NDArray[np.float64]


def _upright(volume: float, z: float, xx: float, yy: float, zz_central: float) -> FloatArray:
    """Moments of a solid whose centroid is (0, 0, z), from its central second moments."""
    central = np.array([volume, 0, 0, 0, xx, yy, zz_central, 0, 0, 0], dtype=np.float64)
    return translated(central, np.array([0.0, 0.0, z]))


def box(a: float, b: float, c: float) -> FloatArray:
    """Box of sides a, b, c along x, y, z, its centre on the z axis.

    >>> box(1, 1, 1)[[0, 3]].tolist()
    [1.0, 0.5]
    """
    v = a * b * c
    return _upright(v, c / 2, v * a * a / 12, v * b * b / 12, v * c * c / 12)


def ellipsoid(a: float, b: float, c: float) -> FloatArray:
    """Ellipsoid of half axes a, b, c about the origin."""
    v = 4 / 3 * np.pi * a * b * c
    return _upright(v, 0.0, v * a * a / 5, v * b * b / 5, v * c * c / 5)


def frustum(base: float, top: float, height: float) -> FloatArray:
    """Cone frustum from radius ``base`` at z = 0 to ``top`` at ``height``: ``top`` 0 is a cone."""
    a, b, h = base, top, height
    n = a * a + a * b + b * b
    v = np.pi * h * n / 3
    quartic = a**4 + a**3 * b + a * a * b * b + a * b**3 + b**4
    xx = np.pi * h * quartic / 20
    z = h * (a * a + 2 * a * b + 3 * b * b) / (4 * n)
    zz = np.pi * h**3 * (a * a + 3 * a * b + 6 * b * b) / 30
    return _upright(v, z, xx, xx, zz - v * z * z)


def tube(outer: float, inner: float, height: float) -> FloatArray:
    """Hollow cylinder."""
    return frustum(outer, outer, height) - frustum(inner, inner, height)


def spherical_cap(radius: float, height: float) -> FloatArray:
    """Cap of a sphere about the origin, cut ``height`` below its top; at ``height`` = ``radius`` a hemisphere."""
    r, h = radius, height
    v = np.pi * h * h * (3 * r - h) / 3
    z = 3 * (2 * r - h) ** 2 / (4 * (3 * r - h))
    about_axis = np.pi * h**3 * (20 * r * r - 15 * r * h + 3 * h * h) / 30
    low = r - h
    zz = np.pi * (r * r * (r**3 - low**3) / 3 - (r**5 - low**5) / 5)
    return _upright(v, z, about_axis / 2, about_axis / 2, zz - v * z * z)


def paraboloid(radius: float, height: float) -> FloatArray:
    """Circular paraboloid with its vertex at the origin, opening upward to ``radius`` at z = ``height``."""
    v = np.pi * radius**2 * height / 2
    z = 2 * height / 3
    xx = v * radius**2 / 6
    return _upright(v, z, xx, xx, v * height**2 / 18)


def torus(centre_radius: float, tube_radius: float) -> FloatArray:
    """Torus about the z axis: its tube of radius ``tube_radius`` runs along a circle of ``centre_radius`` at z = 0."""
    c, a = centre_radius, tube_radius
    v = 2 * np.pi**2 * c * a * a
    about_axis = v * (c * c + 0.75 * a * a)
    across = v * (4 * c * c + 5 * a * a) / 8
    return _upright(v, 0.0, about_axis / 2, about_axis / 2, across - about_axis / 2)


def square_pyramid(side: float, height: float) -> FloatArray:
    """Pyramid on a square base."""
    v = side * side * height / 3
    return _upright(v, height / 4, v * side**2 / 20, v * side**2 / 20, v * height**2 * 3 / 80)


def tetrahedron(corners: FloatArray) -> FloatArray:
    """Tetrahedron with corners (4, 3), volume positive whatever their order.

    Second moments about the centroid are V/20 times the sum of (v - c)(v - c)^T.
    """
    centre = corners.mean(axis=0)
    arms = corners - centre
    v = abs(np.linalg.det(corners[1:] - corners[0])) / 6
    second = v / 20 * arms.T @ arms
    row, column = [0, 1, 2, 0, 1, 2], [0, 1, 2, 1, 2, 0]
    central = np.concatenate([[v], np.zeros(3), second[row, column]])
    return translated(central, centre)
