"""The height at which an object stands, from its own points."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from scanmass.surface.mesh import FloatArray

BAND = 10.0
"""Heights are looked at over so many pitches from the lowest sample."""

UNSURE_END = 0.5
"""Where samples end is known to so many pitches."""
ASTRAY = 2
"""So many of the lowest samples at edges of range grids may be astray."""


@dataclass(frozen=True)
class Foot:
    """Heights in metres of the plane an object stands on: the least, the likeliest and the greatest."""

    lowest: float
    level: float
    highest: float


def foot(kept: FloatArray, edges: FloatArray, pitch: float) -> Foot:
    """Where walls end, from heights ``kept`` (n,) and those of samples dropped at edges of range grids, ``edges`` (k,).

    Best is where the step in the density of both puts it; at most half a pitch below the lowest of both; at the highest
    two deviations above the step, or where what was kept ends.
    """
    edges = np.sort(edges)[ASTRAY:]
    every = np.concatenate([kept, edges])
    level = standing_level(every, pitch)
    lowest = min(lowest_level(kept), float(edges.min(initial=np.inf)))
    return Foot(lowest - UNSURE_END * pitch, level, max(level + 2.0 * level_std(every, pitch), lowest_level(kept)))


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


def level_std(heights: FloatArray, pitch: float) -> float:
    """Standard deviation of :func:`standing_level`: of the ratio of two counts of samples that fall where they may."""
    width = BAND * pitch
    near = heights[heights < heights.min() + width]
    upper = int((near >= heights.min() + 0.5 * width).sum())
    if upper == 0:
        return 0.0
    ratio = (len(near) - upper) / upper
    return 0.5 * width * float(np.sqrt((ratio + ratio**2) / upper))
