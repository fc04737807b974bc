"""Inertia tensors and principal axes from second moments."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from scanmass.geometry.moments import central_second

FloatArray = npt.NDArray[np.float64]


def inertia_from_second(second: FloatArray) -> FloatArray:
    """Inertia tensors I = integral of (r.r E - r r^T), from matrices of r r^T: (..., 3, 3) to (..., 3, 3)."""
    trace = np.trace(second, axis1=-2, axis2=-1)
    tensor: FloatArray = trace[..., None, None] * np.eye(3) - second
    return tensor


def central_inertia(moments: FloatArray) -> FloatArray:
    """Inertia tensors (..., 3, 3) about each body's centroid, from its ten moments (..., 10)."""
    return inertia_from_second(central_second(moments))


def principal(inertia: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Principal moments (3,), ascending, and axes (3, 3), one a row, of an inertia tensor (3, 3).

    Signs by rule: the largest component of the first two axes is positive, and the third is first x second.

    >>> moments, axes = principal(np.diag([3.0, 1.0, 2.0]))
    >>> moments.tolist(), axes.tolist()
    ([1.0, 2.0, 3.0], [[0.0, 1.0, 0.0], [0.0, 0.0, 1.0], [1.0, 0.0, 0.0]])
    """
    moments, columns = np.linalg.eigh(0.5 * (inertia + inertia.T))
    axes = columns.T.copy()
    for axis in axes[:2]:
        axis *= _sign(axis)
    axes[2] = np.cross(axes[0], axes[1])
    return moments, axes + 0.0


def _sign(axis: FloatArray) -> float:
    # Ties between components (a body turned by 45 degrees) go to the first within rounding.
    size = np.abs(axis)
    largest = int(np.argmax(size > size.max() * (1 - 1e-9)))
    return -1.0 if axis[largest] < 0 else 1.0
