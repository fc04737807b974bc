"""The reach of figures and axes over every shape that the unseen part could have."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from scanmass.uncertainty.axes import PrincipalAxes
from scanmass.uncertainty.estimate import Estimate, ShapeFigures

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Bound:
    """A figure with all its bounds; arrays of one shape. None where no claim is possible.

    ``std``, ``random_low`` and ``random_high``: random and declared parts. ``bracket_low`` and ``bracket_high``:
    least and greatest value over the shapes the unseen part could have, None where all was seen. ``low``: the least
    over those shapes of each one's own ``random_low``; ``high`` likewise.
    """

    value: FloatArray
    std: FloatArray | None
    low: FloatArray | None
    high: FloatArray | None
    degrees_of_freedom: FloatArray | None
    random_low: FloatArray | None
    random_high: FloatArray | None
    bracket_low: FloatArray | None
    bracket_high: FloatArray | None


def merged(shapes: Sequence[Estimate]) -> Bound:
    """The first shape's figure, with the reach over all of them."""
    first = shapes[0]
    values = np.array([s.value for s in shapes])
    several = len(shapes) > 1
    low = None if first.low is None else np.min([s.low for s in shapes if s.low is not None], axis=0)
    high = None if first.high is None else np.max([s.high for s in shapes if s.high is not None], axis=0)
    return Bound(
        value=first.value,
        std=first.std,
        low=low,
        high=high,
        degrees_of_freedom=first.degrees_of_freedom,
        random_low=first.low,
        random_high=first.high,
        bracket_low=values.min(axis=0) if several else None,
        bracket_high=values.max(axis=0) if several else None,
    )


def at_least_nothing(bound: Bound) -> Bound:
    """The bound of a figure that cannot be negative, its lower ends cut at zero."""

    def cut(end: FloatArray | None) -> FloatArray | None:
        return None if end is None else np.maximum(end, 0.0)

    return replace(bound, low=cut(bound.low), random_low=cut(bound.random_low))


def axes_over(figures: Sequence[ShapeFigures]) -> PrincipalAxes:
    """The first shape's axes, each cone wide enough for the cone of every other shape."""
    first = figures[0].axes
    cones, determined = first.cones.copy(), first.determined.copy()
    groups = first.groups
    for other in figures[1:]:
        turned = np.arccos(np.clip(np.abs(np.sum(first.axes * other.axes.axes, axis=1)), 0.0, 1.0))
        reach = turned + np.where(other.axes.determined, np.nan_to_num(other.axes.cones), np.pi / 2)
        cones = np.where(np.isfinite(cones), np.maximum(cones, reach), np.nan)
        free = {k for k in range(3) if reach[k] >= np.pi / 4} | {k for g in groups for k in g}
        if len(free) == 2:
            groups = (tuple(sorted(free)),)
        elif free:
            groups = ((0, 1, 2),)
        determined = np.array([not any(k in g for g in groups) for k in range(3)])
    return replace(first, cones=np.where(determined, cones, np.nan), determined=determined, groups=groups)
