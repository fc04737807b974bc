"""The height at which an object stands, from its own points."""

from __future__ import annotations

import numpy as np

from scanmass.surface.mesh import FloatArray

BAND = 10.0
"""Heights are looked at over so many pitches from the lowest sample."""


def lowest_level(heights: FloatArray) -> float:
    """The plane below all samples: nothing seen lies under it."""
    return float(heights.min())


def standing_level(heights: FloatArray, pitch: float) -> float:
    """The height where walls end, free of the noise that makes the lowest sample too low.

    A wall sampled evenly has a density of heights that is a step at its foot, blurred evenly by noise: the band's
    count over its density, taken from the band's upper half, puts the step back. Never below the lowest sample, nor
    more than two pitches above it.

    >>> heights = np.linspace(0.0, 1.0, 10001) + np.random.default_rng(0).normal(0.0, 0.002, 10001)
    >>> abs(standing_level(heights, 0.01)) < 1e-3, lowest_level(heights) < -3e-3
    (True, True)
    """
    least = float(heights.min())
    width = BAND * pitch
    near = heights[heights < least + width]
    upper = int((near >= least + 0.5 * width).sum())
    if upper == 0:
        return least
    level = least + width - len(near) * (0.5 * width / upper)
    return float(np.clip(level, least, least + 2.0 * pitch))
