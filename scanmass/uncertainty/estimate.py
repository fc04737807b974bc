"""One shape's figures with the random and declared part of their doubt."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.doubt import Figure
from scanmass.geometry.moments import centroid
from scanmass.geometry.tensors import central_inertia
from scanmass.uncertainty.axes import PrincipalAxes, principal_axes
from scanmass.uncertainty.intervals import central, coverage_factor, welch_satterthwaite
from scanmass.uncertainty.replicate import Replicates
from scanmass.uncertainty.sources import Effect, Parts, Term, effects

FloatArray = npt.NDArray[np.float64]

_CUT = 3.3
"""A normal density whose limit is nearer than this many standard deviations is no longer normal in its tails."""


@dataclass(frozen=True)
class Estimate:
    """A value with its doubt, scalars as arrays of shape (); all but ``value`` None where no claim is possible."""

    value: FloatArray
    std: FloatArray | None = None
    low: FloatArray | None = None
    high: FloatArray | None = None
    degrees_of_freedom: FloatArray | None = None


@dataclass(frozen=True)
class ShapeFigures:
    """Figures of one shape, SI, scan's frame; ``inertia`` about the centre of mass, ``principal`` (3,) ascending."""

    volume: Estimate
    mass: Estimate
    com: Estimate
    inertia: Estimate
    principal: Estimate
    axes: PrincipalAxes
    effects: tuple[Effect, ...] = ()


def bare_figures(parts: Parts, centre: FloatArray, level: float) -> ShapeFigures:
    """Values alone, where no bound can be claimed."""
    total = parts.mass_moments
    inertia = central_inertia(total)
    axes = principal_axes(inertia, None, None, level)
    return ShapeFigures(
        volume=Estimate(np.asarray(parts.moments[:, 0].sum())),
        mass=Estimate(np.asarray(total[0])),
        com=Estimate(centre + centroid(total)),
        inertia=Estimate(inertia),
        principal=Estimate(axes.moments),
        axes=axes,
    )


def shape_figures(
    parts: Parts,
    terms: Sequence[Term],
    scale: Figure | None,
    draws: Replicates,
    *,
    centre: FloatArray,
    level: float,
) -> ShapeFigures:
    """Figures with bounds at ``level``.

    Intervals are value +- t(nu) x standard deviation, nu by Welch-Satterthwaite for each figure. Where a density is
    not normal (alike anywhere in a range, or cut by a limit) the figures that feel it take the central interval of the
    replicates instead. A density whose doubt is not stated leaves those figures without bounds.
    """
    bare = bare_figures(parts, centre, level)
    sources = tuple(effects(terms, parts, scale))
    stated = all(d.std is not None for d in parts.densities)
    drawn = not all(_normal(d) for d in parts.densities)
    alone = len(set(parts.materials)) == 1

    def figure(value: FloatArray, name: str, feels_density: bool) -> Estimate:
        if feels_density and not stated:
            return Estimate(value)
        replicates = getattr(draws, name) if feels_density and drawn else None
        return _estimate(value, [getattr(e, name) for e in sources], sources, replicates, level)

    inertia = figure(bare.inertia.value, "inertia", True)
    axes, principal = bare.axes, Estimate(bare.axes.moments)
    if stated or alone:
        rows = np.concatenate([e.inertia for e in sources] or [np.zeros((0, 3, 3))])
        axes = principal_axes(bare.inertia.value, rows, _axes_degrees(bare.inertia.value, sources), level)
    if stated:
        principal = _principal(axes, bare.inertia.value, sources, draws if drawn else None, level)
    return ShapeFigures(
        volume=figure(bare.volume.value, "volume", False),
        mass=figure(bare.mass.value, "mass", True),
        com=figure(bare.com.value, "com", not alone),
        inertia=inertia,
        principal=principal,
        axes=axes,
        effects=sources,
    )


def _normal(density: Figure) -> bool:
    if density.spread in ("uniform", "sampled"):
        return False
    if density.spread == "exact" or not density.std:
        return True
    value, reach = float(density.value), _CUT * float(density.std)
    return value - reach >= density.limits[0] and value + reach <= density.limits[1]


def degrees_of(sources: Sequence[Effect]) -> FloatArray:
    """(k,) degrees of freedom of each source, infinite where declared."""
    return np.array([np.inf if e.degrees_of_freedom is None else e.degrees_of_freedom for e in sources])


def _estimate(
    value: FloatArray,
    rows: Sequence[FloatArray],
    sources: Sequence[Effect],
    replicates: FloatArray | None,
    level: float,
) -> Estimate:
    variances = np.array([(r**2).sum(axis=0) for r in rows]).reshape(len(rows), *value.shape)
    std, nu = np.sqrt(variances.sum(axis=0)), welch_satterthwaite(variances, degrees_of(sources))
    if replicates is not None:
        low, high = central(replicates, level)
    else:
        half = coverage_factor(level, nu) * std
        low, high = value - half, value + half
    return Estimate(value, std, low, high, nu)


def _axes_degrees(inertia: FloatArray, sources: Sequence[Effect]) -> float | None:
    """Degrees of freedom of what can turn the axes: a change of all moments alike cannot."""
    variances = []
    for e in sources:
        alike = np.einsum("kij,ij->k", e.inertia, inertia) / (inertia**2).sum()
        variances.append(((e.inertia - alike[:, None, None] * inertia) ** 2).sum())
    nu = float(welch_satterthwaite(np.array(variances), degrees_of(sources))) if variances else np.inf
    return nu if np.isfinite(nu) else None


def _principal(
    axes: PrincipalAxes, inertia: FloatArray, sources: Sequence[Effect], draws: Replicates | None, level: float
) -> Estimate:
    def linear(directions: FloatArray) -> Estimate:
        along = [np.einsum("ui,kij,uj->ku", directions, e.inertia, directions) for e in sources]
        value = np.einsum("ui,ij,uj->u", directions, inertia, directions)
        if draws is None:
            return _estimate(value, along, sources, None, level)
        replicates = np.einsum("ui,nij,uj->nu", directions, draws.inertia, directions, optimize=True)
        return _estimate(value, along, sources, replicates, level)

    def interval(directions: FloatArray) -> tuple[FloatArray, FloatArray]:
        found = linear(directions)
        assert found.low is not None
        assert found.high is not None
        return found.low, found.high

    low, high = axes.intervals(interval)
    own = linear(axes.axes)
    return Estimate(axes.moments, own.std, low, high, own.degrees_of_freedom)
