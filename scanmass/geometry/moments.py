"""Ten volume moments of a body, and how they change under motion and scale.

Order: ``1, x, y, z, xx, yy, zz, xy, yz, zx``, each integrated over the volume (times density for mass moments).
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

ORDER = ("1", "x", "y", "z", "xx", "yy", "zz", "xy", "yz", "zx")
DEGREE = np.array([0, 1, 1, 1, 2, 2, 2, 2, 2, 2])
"""Powers of length beyond the volume: moments scale with s ** (3 + DEGREE)."""

_ROW = np.array([0, 1, 2, 0, 1, 2])
_COLUMN = np.array([0, 1, 2, 1, 2, 0])


def monomials(points: FloatArray) -> FloatArray:
    """The ten monomials at points (..., 3): shape (..., 10), in ORDER."""
    x, y, z = points[..., 0], points[..., 1], points[..., 2]
    return np.stack([np.ones_like(x), x, y, z, x * x, y * y, z * z, x * y, y * z, z * x], axis=-1)


def second_matrix(moments: FloatArray) -> FloatArray:
    """Second moments as symmetric matrices: moments (..., 10) to (..., 3, 3), the integral of r r^T."""
    xx, yy, zz, xy, yz, zx = (moments[..., k] for k in range(4, 10))
    flat = np.stack([xx, xy, zx, xy, yy, yz, zx, yz, zz], axis=-1)
    return flat.reshape(*moments.shape[:-1], 3, 3)


def from_matrix(zeroth: FloatArray, first: FloatArray, second: FloatArray) -> FloatArray:
    """Ten moments (..., 10) from volume (...,), first moments (..., 3) and second-moment matrix (..., 3, 3)."""
    return np.concatenate([np.asarray(zeroth)[..., None], first, second[..., _ROW, _COLUMN]], axis=-1)


def translated(moments: FloatArray, shift: FloatArray) -> FloatArray:
    """Moments (..., 10) of the bodies moved by ``shift`` (3,) or (..., 3).

    >>> unit_cube = np.array([1, 0.5, 0.5, 0.5, 1/3, 1/3, 1/3, 0.25, 0.25, 0.25])
    >>> translated(unit_cube, np.array([-0.5, -0.5, -0.5]))[[0, 1, 4]].round(6).tolist()
    [1.0, 0.0, 0.083333]
    """
    volume = moments[..., 0]
    first = moments[..., 1:4]
    cross = first[..., :, None] * shift[..., None, :]
    second = (
        second_matrix(moments)
        + cross
        + np.swapaxes(cross, -1, -2)
        + volume[..., None, None] * (shift[..., :, None] * shift[..., None, :])
    )
    return from_matrix(volume, first + volume[..., None] * shift, second)


def rotated(moments: FloatArray, rotation: FloatArray) -> FloatArray:
    """Moments (..., 10) of the bodies turned by ``rotation`` (3, 3): new points are ``rotation @ old``."""
    second = rotation @ second_matrix(moments) @ rotation.T
    return from_matrix(moments[..., 0], moments[..., 1:4] @ rotation.T, second)


def scaled(moments: FloatArray, factor: float | FloatArray) -> FloatArray:
    """Moments (..., 10) of the bodies grown by ``factor``, a number or (...,), about the origin."""
    result: FloatArray = moments * np.asarray(factor)[..., None] ** (3 + DEGREE)
    return result


def centroid(moments: FloatArray) -> FloatArray:
    """Centroids (..., 3) of bodies with moments (..., 10)."""
    return moments[..., 1:4] / moments[..., :1]


def central_second(moments: FloatArray) -> FloatArray:
    """Second-moment matrices (..., 3, 3) about each body's own centroid."""
    centre = centroid(moments)
    outer = centre[..., :, None] * centre[..., None, :]
    return second_matrix(moments) - moments[..., 0, None, None] * outer
