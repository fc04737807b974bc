"""How densely a surface was sampled, place by place."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from scanmass.geometry.neighbours import nearest

FloatArray = npt.NDArray[np.float64]

NEIGHBOURS = 8
ASKED = 20_000


def local_pitch(points: FloatArray) -> FloatArray:
    """Spacing of a square grid as dense as the samples round each of ``points`` (n, 3): shape (n,), same unit.

    Of an even random sampling with p points per area, the k-th neighbour lies at r with k = p pi r^2 on average,
    and the pitch is p^(-1/2) = r sqrt(pi/k). Where sampling is uneven it follows: 25 times fewer points, 5 times
    the pitch.

    >>> grid = np.stack(np.meshgrid(np.arange(40.0), np.arange(40.0), [0.0]), axis=-1).reshape(-1, 3)
    >>> float(np.median(local_pitch(grid)).round(2))
    0.89
    """
    distance, _ = nearest(points, NEIGHBOURS)
    pitch: FloatArray = distance[:, -1] * np.sqrt(np.pi / distance.shape[1])
    return pitch


def median_pitch(points: FloatArray) -> float:
    """Median of :func:`local_pitch`, from every k-th of many points."""
    asked = points[:: max(1, len(points) // ASKED)]
    distance, _ = nearest(points, NEIGHBOURS + 1, asked)
    return float(np.median(distance[:, -1])) * float(np.sqrt(np.pi / (distance.shape[1] - 1)))
