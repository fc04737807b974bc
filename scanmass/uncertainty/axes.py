"""Principal axes that the data allow: cones by inverting a test, and planes where moments cannot be told apart."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.geometry.tensors import principal
from scanmass.uncertainty.region import quantile

FloatArray = npt.NDArray[np.float64]
Interval = Callable[[FloatArray], tuple[FloatArray, FloatArray]]
"""Bounds (k,), (k,) of the moments u.I u about directions u (k, 3)."""

_ROUNDING = 4e-7
"""Share of the mean moment below which a difference of moments is rounding of the scan's numbers (float32)."""
_AROUND = 72
_OUTWARD = np.geomspace(1e-7, np.pi / 4, 180)
_LIMIT = np.pi / 4


@dataclass(frozen=True)
class PrincipalAxes:
    """``moments`` (3,) ascending, kg m2; ``axes`` (3, 3), one a row; ``determined`` (3,).

    ``cones`` (3,): half-angle in radians that holds the axis, NaN where undetermined or not claimed;
    ``groups``: axes that cannot be told apart, as tuples of their numbers: () or ((0, 1),) or ((1, 2),) or
    ((0, 1, 2),).
    """

    moments: FloatArray
    axes: FloatArray
    determined: npt.NDArray[np.bool_]
    cones: FloatArray
    groups: tuple[tuple[int, ...], ...]

    def plane_normal(self, axis: int) -> FloatArray | None:
        """Normal (3,) of the plane in which ``axis`` can lie anyhow; None if determined, or free in all space."""
        for group in self.groups:
            if axis in group and len(group) == 2:
                normal: FloatArray = self.axes[next(k for k in range(3) if k not in group)]
                return normal
        return None

    def intervals(self, interval: Interval) -> tuple[FloatArray, FloatArray]:
        """Bounds (3,), (3,) of the principal moments.

        A determined moment has the bounds of u.I u at its own axis, so labels cannot jump between replicates. Those of
        an undetermined plane all run from the least lower to the greatest upper bound over the plane's directions.
        """
        low, high = interval(self.axes)
        low, high = low.copy(), high.copy()
        for group in self.groups:
            ends = interval(_directions(self.axes[list(group)]))
            low[list(group)], high[list(group)] = ends[0].min(), ends[1].max()
        return low, high


def principal_axes(
    inertia: FloatArray,
    rows: FloatArray | None,
    degrees_of_freedom: float | None,
    level: float,
) -> PrincipalAxes:
    """Axes with cones from an inertia tensor (3, 3) and rows (k, 3, 3) whose squares sum to its covariance.

    A direction u is accepted as the axis if its two terms v.I u across it lie within chi-square (F with few degrees
    of freedom) of zero. The cone reaches to the farthest accepted direction joined to the axis by accepted ones
    on a great circle; where it reaches 45 degrees the two axes cannot be told apart. ``rows`` None: nothing is known
    of the noise; axes are told apart by rounding alone and cones are not claimed.

    Moments closer than 1e-6 of their mean are alike within rounding, even without noise.
    """
    moments, axes = principal(inertia)
    known = np.zeros((0, 3, 3)) if rows is None else rows
    joined = [{0}, {1}, {2}]
    cones = np.zeros(3)
    for i in range(3):
        reach, towards = _reach(inertia, known, axes, i, quantile(2, level, degrees_of_freedom), moments.mean())
        cones[i] = reach.max()
        for heading in towards[reach >= _LIMIT]:
            joined[i].add(int(np.argmax(np.abs(axes @ heading))))
    groups = _groups(joined)
    determined = np.array([not any(i in g for g in groups) for i in range(3)])
    cones = np.where(determined & (rows is not None), cones, np.nan)
    return PrincipalAxes(moments, axes, determined, cones, groups)


def _groups(joined: list[set[int]]) -> tuple[tuple[int, ...], ...]:
    links = {frozenset((i, k)) for i in range(3) for k in joined[i] if k != i}
    if not links:
        return ()
    if len(links) == 1:
        return (tuple(sorted(next(iter(links)))),)
    return ((0, 1, 2),)


def _reach(
    inertia: FloatArray, rows: FloatArray, axes: FloatArray, i: int, limit: float, mean: float
) -> tuple[FloatArray, FloatArray]:
    """How far (A,) accepted directions reach from axis i, and the headings (A, 3) at right angles to it."""
    angle = np.arange(_AROUND) * (2 * np.pi / _AROUND)
    one, two = axes[(i + 1) % 3], axes[(i + 2) % 3]
    heading = np.cos(angle)[:, None] * one + np.sin(angle)[:, None] * two
    floor = (_ROUNDING * mean) ** 2

    def accepted(theta: FloatArray) -> npt.NDArray[np.bool_]:
        """Of angles (A, T), one row a heading."""
        u = np.cos(theta)[..., None] * axes[i] + np.sin(theta)[..., None] * heading[:, None]
        # Two directions across u: the one onwards along the great circle, and the one beside it.
        onward = np.cos(theta)[..., None] * heading[:, None] - np.sin(theta)[..., None] * axes[i]
        beside = np.broadcast_to(np.cross(axes[i], heading)[:, None], u.shape)
        a, b = (np.einsum("ati,ij,atj->at", side, inertia, u) for side in (onward, beside))
        ra, rb = (np.einsum("ati,kij,atj->atk", side, rows, u, optimize=True) for side in (onward, beside))
        aa, bb, ab = (ra * ra).sum(-1) + floor, (rb * rb).sum(-1) + floor, (ra * rb).sum(-1)
        statistic = (bb * a * a - 2 * ab * a * b + aa * b * b) / (aa * bb - ab * ab)
        result: npt.NDArray[np.bool_] = statistic <= limit
        return result

    fine = accepted(np.broadcast_to(_OUTWARD, (_AROUND, len(_OUTWARD))))
    steps = np.cumprod(fine, axis=1).sum(axis=1)
    inner = np.where(steps > 0, _OUTWARD[np.maximum(steps - 1, 0)], 0.0)
    outer = _OUTWARD[np.minimum(steps, len(_OUTWARD) - 1)]
    for _ in range(8):
        middle = 0.5 * (inner + outer)
        good = accepted(middle[:, None])[:, 0]
        inner, outer = np.where(good, middle, inner), np.where(good, outer, middle)
    return np.where(steps == len(_OUTWARD), _LIMIT, outer), heading


def _directions(span: FloatArray) -> FloatArray:
    """Directions spread over the span of two axes (90) or three (400)."""
    if len(span) == 2:
        angle = np.arange(90) * (np.pi / 90)
        result: FloatArray = np.cos(angle)[:, None] * span[0] + np.sin(angle)[:, None] * span[1]
        return result
    k = np.arange(400) + 0.5
    z, turn = 1 - k / 400, np.pi * (1 + np.sqrt(5)) * k
    flat = np.sqrt(1 - z * z)
    sphere: FloatArray = np.stack([flat * np.cos(turn), flat * np.sin(turn), z], axis=1) @ span
    return sphere
