"""Rotations as files write them."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt


def rotation_from_quaternion(w: float, x: float, y: float, z: float) -> npt.NDArray[np.float64]:
    """The matrix (3, 3) of the unit quaternion w + x i + y j + z k: new points are ``matrix @ old``.

    >>> rotation_from_quaternion(0.5, 0.5, 0.5, 0.5) @ [1.0, 2.0, 3.0]
    array([3., 1., 2.])
    """
    return np.array(
        [
            [1 - 2 * (y * y + z * z), 2 * (x * y - z * w), 2 * (x * z + y * w)],
            [2 * (x * y + z * w), 1 - 2 * (x * x + z * z), 2 * (y * z - x * w)],
            [2 * (x * z - y * w), 2 * (y * z + x * w), 1 - 2 * (x * x + y * y)],
        ]
    )
