"""Bounds of every figure: random and declared, beside what the unseen part could be."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from scanmass.cloud.cloud import Cloud
from scanmass.doubt import Figure
from scanmass.errors import Declined, Note
from scanmass.geometry.moments import centroid, translated
from scanmass.surface.surface import Surface
from scanmass.uncertainty import noise, patches, pose_check, weightings
from scanmass.uncertainty.axes import PrincipalAxes
from scanmass.uncertainty.bracket import Bound, at_least_nothing, axes_over, merged
from scanmass.uncertainty.budget import BudgetRow, bracket_row, budget
from scanmass.uncertainty.declared import Declared, field_rows, from_declaration, unknown, upper_bound
from scanmass.uncertainty.detail import detail_rows
from scanmass.uncertainty.estimate import Estimate, ShapeFigures, bare_figures, shape_figures
from scanmass.uncertainty.noise import NoiseModel
from scanmass.uncertainty.reading import offset_terms
from scanmass.uncertainty.region import Region, region
from scanmass.uncertainty.replicate import Replicates, replicates
from scanmass.uncertainty.sources import Parts, Term, on_outer_part

FloatArray = npt.NDArray[np.float64]
IndexArray = npt.NDArray[np.int64]
Coarse = Callable[[], tuple[FloatArray, IndexArray] | None]

_MANY_REDRAWN = 0.01
_NOTABLY_UNSEEN = 0.02
_MOST_PATCHES, _LEAST_PATCHES, _SAMPLES_PER_PATCH = 1000, 150, 12


@dataclass(frozen=True)
class Bounds:
    """Figures with bounds, SI, scan's frame; and what later stages draw on.

    ``com_covariance`` (3, 3) and ``region``: random and declared parts; None where no claim is possible.
    ``axes``: cones widened to hold the axes of every shape the unseen part could have.
    ``replicates``: of the shape as measured, None where no claim is possible; ``closure_replicates``: of the others.
    ``centres`` (s, 3): centre of mass of every shape, the measured one first.
    ``terms``: sources of doubt of the volume moments ``parts.moments`` about ``centre``.
    """

    level: float
    volume: Bound
    mass: Bound
    com: Bound
    com_covariance: FloatArray | None
    region: Region | None
    inertia: Bound
    principal: Bound
    axes: PrincipalAxes
    budget: tuple[BudgetRow, ...]
    noise: NoiseModel
    parts: Parts
    centre: FloatArray
    terms: tuple[Term, ...]
    patches: patches.Patches
    replicates: Replicates | None
    closure_replicates: dict[str, Replicates]
    centres: FloatArray
    observed_fraction: float
    assumptions: tuple[Note, ...]
    warnings: tuple[Note, ...]


def bound(
    surface: Surface,
    cloud: Cloud | None,
    *,
    densities: Sequence[Figure],
    part_moments: FloatArray,
    declared: Declared | None = None,
    materials: Sequence[str] | None = None,
    coarse: Coarse | None = None,
    level: float = 0.95,
    replicate_count: int = 2000,
    seed: int = 0,
) -> Bounds:
    """Bounds of volume, mass, centre of mass, inertia and axes.

    Parameters
    ----------
    cloud : the samples with their views; None for a mesh that came without
    densities : one a part, kg/m3; parts with the same entry of ``materials`` share one draw
    part_moments : (P, 10), unit density, about the scan's origin; together they fill the surface
    coarse : gives vertices and faces of a coarse surface of the same points, or None; asked where nothing else tells
        of the noise

    Raises
    ------
    Declined
        If the body has no mass, or the noise is as large as the object.
    """
    wanted = Declared() if declared is None else declared
    parts, centre = _about_own_centre(part_moments, densities, materials)
    patched = patches.make(surface, cloud, centre=centre, count=_patch_count(cloud))
    model = _noise(surface, cloud, patched, wanted, coarse, seed)
    shapes = {"": parts} | {c.name: _closed(parts, translated(c.moments, -centre)) for c in surface.closures}
    closed = dict(shapes)
    for other in model.alternatives:
        if other.beyond:
            change = on_outer_part(other.far[None], parts)[0]
            shapes |= {f"{name}, {other.name}": replace(s, moments=s.moments + change) for name, s in closed.items()}

    def carried(by: NoiseModel) -> tuple[tuple[Term, ...], dict[str, Replicates], dict[str, ShapeFigures]]:
        terms = _terms(surface, cloud, patched, by, wanted, parts, centre)
        if by.basis == "none":
            return terms, {}, {name: bare_figures(shape, centre, level) for name, shape in shapes.items()}
        draws = {
            name: replicates(shape, terms, wanted.scale, centre=centre, n=replicate_count, seed=seed)
            for name, shape in shapes.items()
        }
        figures = {
            name: shape_figures(shape, terms, wanted.scale, draws[name], centre=centre, level=level)
            for name, shape in shapes.items()
        }
        return terms, draws, figures

    try:
        terms, draws, figures = carried(model)
    except Declined:
        # An upper bound as wide as the object says nothing: no bound is claimed then. A declared noise is a fault.
        if model.basis != "upper_bound":
            raise
        model = unknown(patched)
        terms, draws, figures = carried(model)
    first, redrawn = figures[""], max((d.redrawn for d in draws.values()), default=0.0)
    covariance = None if first.com.std is None else _covariance(first)
    return Bounds(
        level=level,
        volume=at_least_nothing(merged([f.volume for f in figures.values()])),
        mass=at_least_nothing(merged([f.mass for f in figures.values()])),
        com=merged([f.com for f in figures.values()]),
        com_covariance=covariance,
        region=None if covariance is None else region(first.com.value, covariance, level, _least_degrees(first.com)),
        inertia=merged([f.inertia for f in figures.values()]),
        principal=merged([f.principal for f in figures.values()]),
        axes=axes_over(list(figures.values())),
        budget=_budget(figures, len(closed), model, parts),
        noise=model,
        parts=parts,
        centre=centre,
        terms=terms,
        patches=patched,
        replicates=draws.pop("", None),
        closure_replicates=draws,
        centres=np.array([f.com.value for f in figures.values()]),
        observed_fraction=patched.observed_fraction,
        assumptions=model.assumptions + _assumptions(wanted, model),
        warnings=model.warnings + _warnings(surface, patched, parts, redrawn),
    )


def _patch_count(cloud: Cloud | None) -> int:
    """A thousand, or fewer where the views' samples are thin: a dozen of each view to a patch, never under 150."""
    if cloud is None:
        return _MOST_PATCHES
    enough = len(cloud.points) // (_SAMPLES_PER_PATCH * max(len(cloud.view_names), 1))
    return min(max(enough, _LEAST_PATCHES), _MOST_PATCHES)


def _about_own_centre(
    part_moments: FloatArray, densities: Sequence[Figure], materials: Sequence[str] | None
) -> tuple[Parts, FloatArray]:
    parts = Parts.make(np.atleast_2d(part_moments), densities, materials)
    mass, volume = parts.mass_moments[0], parts.moments[:, 0].sum()
    if not (volume > 0 and mass > 0):
        raise Declined(
            f"the body has a volume of {volume:.3g} m3 and a mass of {mass:.3g} kg", allowed="both must be positive"
        )
    centre = centroid(parts.mass_moments)
    return replace(parts, moments=translated(parts.moments, -centre)), centre


def _closed(parts: Parts, moments: FloatArray) -> Parts:
    """The parts when the outer shape is another: the first part gives or takes the difference."""
    changed = parts.moments.copy()
    changed[0] += moments - parts.moments.sum(axis=0)
    return replace(parts, moments=changed)


def _noise(
    surface: Surface,
    cloud: Cloud | None,
    patched: patches.Patches,
    declared: Declared,
    coarse: Coarse | None,
    seed: int,
) -> NoiseModel:
    if noise.enough_views(patched):
        return noise.from_views(patched, seed)
    if declared.noise_std is not None:
        return from_declaration(patched, declared)
    model, found = None, None if coarse is None else coarse()
    if found is not None:
        points = surface.vertices if cloud is None else cloud.points
        model = upper_bound(patched, points, *found)
    return unknown(patched) if model is None else model


def _terms(
    surface: Surface,
    cloud: Cloud | None,
    patched: patches.Patches,
    model: NoiseModel,
    declared: Declared,
    parts: Parts,
    centre: FloatArray,
) -> tuple[Term, ...]:
    """Sources of doubt of the volume moments; scale and densities are not among them, they multiply."""
    if model.basis == "none":
        return ()
    found: list[Term] = []
    for name, rows, degrees in model.parts:
        found.append(Term(name, "random", on_outer_part(rows, parts), degrees))
    if model.basis == "views" and declared.noise_std and not declared.noise_from_certificate:
        length = (
            declared.noise_length if declared.noise_length is not None else from_declaration(patched, declared).length
        )
        rows = field_rows(patched, declared.noise_std, float(length or 0.0))
        found.append(Term("declared noise common to all views", "declared", on_outer_part(rows, parts)))
    found.extend(offset_terms(patched, declared, parts))
    if surface.settling_moments is not None:
        refined = parts.moments.sum(axis=0) - translated(surface.settling_moments, -centre)
        found.append(Term("reconstruction", "random", on_outer_part(0.5 * refined[None], parts)))
    if surface.source == "points" and cloud is not None:
        rows = detail_rows(surface, cloud, centre)
        if rows.any():
            found.append(Term("edges finer than the points", "random", on_outer_part(rows, parts)))
    return tuple(found)


def _covariance(figures: ShapeFigures) -> FloatArray:
    rows = np.concatenate([e.com for e in figures.effects] or [np.zeros((0, 3))])
    result: FloatArray = rows.T @ rows
    return result


def _least_degrees(estimate: Estimate) -> float | None:
    if estimate.degrees_of_freedom is None:
        return None
    least = float(np.min(estimate.degrees_of_freedom))
    return least if np.isfinite(least) else None


def _budget(figures: dict[str, ShapeFigures], closed: int, model: NoiseModel, parts: Parts) -> tuple[BudgetRow, ...]:
    """Sources, the bracket of the first ``closed`` shapes, and what the checks of the views found."""
    first = figures[""]
    rows = budget(first.effects, first.mass.std is not None)
    if closed > 1:
        shapes = list(figures.values())[:closed]
        masses = np.array([float(f.mass.value) for f in shapes])
        rows += (bracket_row("unseen surface", masses, np.array([f.com.value for f in shapes])),)
    if model.alternatives:
        found = [a.far if a.beyond else a.change for a in model.alternatives if a.beyond or not _any(model)]
        changes = np.stack([np.zeros(10), *found])
        row = bracket_row(pose_check.SOURCE, *_masses_and_centres(changes, parts))
        rows += (row if _any(model) else replace(row, kind="random"),)
    if model.weightings:
        changes = np.stack([np.zeros(10), *model.weightings.values()])
        rows += (replace(bracket_row(weightings.SOURCE, *_masses_and_centres(changes, parts)), kind="random"),)
    return rows


def _any(model: NoiseModel) -> bool:
    return any(a.beyond for a in model.alternatives)


def _masses_and_centres(changes: FloatArray, parts: Parts) -> tuple[FloatArray, FloatArray]:
    """Masses (c,) and centres (c, 3) about the object's own with the outer part changed by (c, 10)."""
    mass = parts.mass_moments + parts.density_values[0] * changes
    return mass[:, 0], centroid(mass)


def _assumptions(declared: Declared, model: NoiseModel) -> tuple[Note, ...]:
    if declared.scale is not None or model.basis == "none":
        return ()
    text = (
        "No doubt of the scan's scale is declared, so none is in the bounds: an error of 0.1 % would change the mass "
        "by 0.3 %. Declare scan.scale (for example 1 ± 0.0004), or the E of scan.certificate."
    )
    return (Note("scale-taken-as-exact", text),)


def _warnings(
    surface: Surface,
    patched: patches.Patches,
    parts: Parts,
    redrawn: float,
) -> tuple[Note, ...]:
    found = []
    unseen = 1.0 - patched.observed_fraction
    if unseen > _NOTABLY_UNSEEN and not surface.closures and surface.underside in ("seen", "unknown"):
        text = f"{100 * unseen:.0f} % of the surface was not seen, and no bracket for it is in the bounds."
        found.append(Note("unseen-without-bracket", text))
    if any(d.std is None for d in parts.densities):
        text = "The doubt of a density is not stated, so mass and inertia have no bounds: give it as value ± doubt."
        found.append(Note("density-doubt-unknown", text))
    if redrawn > _MANY_REDRAWN:
        text = (
            f"{100 * redrawn:.1f} % of the replicates enclosed nothing and were drawn again: the noise is near the "
            "object's size, and bounds are too narrow."
        )
        found.append(Note("noise-near-object-size", text))
    return tuple(found)
