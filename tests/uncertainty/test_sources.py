import numpy as np
import pytest

from scanmass.doubt import Figure
from scanmass.geometry.moments import central_second, centroid, scaled
from scanmass.geometry.tensors import inertia_from_second
from scanmass.uncertainty.sources import Parts, Term, effects, factor

# Two boxes' worth of moments about a point near their common centre: volumes 2 and 1 (units do not matter here).
MOMENTS = np.array(
    [[2, 0.1, -0.2, 0.05, 0.9, 0.5, 0.4, 0.02, 0.01, -0.03], [1, -0.05, 0.1, 0, 0.2, 0.3, 0.1, 0, 0.02, 0.01]]
)


def figures(moments, densities):
    total = densities @ moments
    return moments[:, 0].sum(), total[0], centroid(total), inertia_from_second(central_second(total))


def parts_of(densities, materials=None):
    return Parts.make(MOMENTS, densities, materials)


def test_effects_are_the_derivatives_of_the_figures():
    parts = parts_of([Figure.normal(3.0, 0.1), Figure.uniform(4.0, 6.0)])
    row = np.random.default_rng(0).normal(size=(1, 2, 10)) * 0.01
    scale = Figure.normal(1.0, 0.002)
    geometry, growth, first, second = effects([Term("scan noise", "random", row, 5.0)], parts, scale)
    rho, step = parts.density_values, 1e-4
    ways = {
        "geometry": (geometry, lambda s: figures(MOMENTS + s * row[0], rho)),
        "scale": (growth, lambda s: figures(scaled(MOMENTS, 1 + s * 0.002), rho)),
        "first": (first, lambda s: figures(MOMENTS, rho + s * np.array([0.1, 0]))),
        "second": (second, lambda s: figures(MOMENTS, rho + s * np.array([0, 2 / np.sqrt(12)]))),
    }
    for name, (found, at) in ways.items():
        # Central differences: error of the order step^2.
        for got, up, down in zip(
            (found.volume, found.mass, found.com, found.inertia), at(step), at(-step), strict=True
        ):
            # The design's k = M (3, 4, 4, 4, 5 ...) acts about the point the moments are about.
            assert got[0] == pytest.approx((np.asarray(up) - down) / (2 * step), rel=1e-5, abs=1e-7), name
    assert (geometry.kind, geometry.degrees_of_freedom, growth.kind) == ("random", 5.0, "declared")


def test_parts_of_one_material_go_together():
    density = Figure.normal(3.0, 0.1)
    together = effects([], parts_of([density, density], ["iron", "iron"]), None)
    apart = effects([], parts_of([density, density], ["iron", "bronze"]), None)
    assert [e.source for e in together] == ["density"]
    assert [e.source for e in apart] == ["density of iron", "density of bronze"]
    assert together[0].mass[0] == pytest.approx(0.3)
    assert np.hypot(apart[0].mass[0], apart[1].mass[0]) == pytest.approx(np.hypot(0.2, 0.1))
    # One material all through: its density cannot move the centre of mass.
    assert together[0].com == pytest.approx(np.zeros((1, 3)), abs=1e-15)


def test_factor_of_moments_of_unlike_size():
    rng = np.random.default_rng(1)
    base = rng.normal(size=(10, 10)) * np.geomspace(1, 1e-9, 10)
    rows = factor(base.T @ base)
    got, want = rows.T @ rows, base.T @ base
    size = np.sqrt(np.outer(np.diag(want), np.diag(want)))
    assert np.abs(got - want).max() <= 1e-12
    assert (np.abs(got - want) / size).max() < 1e-12
    assert factor(np.zeros((10, 10))) == pytest.approx(np.zeros((10, 10)))


def test_shapes_are_checked():
    with pytest.raises(ValueError, match=r"moments must be \(1, 10\) and materials 1, got \(2, 10\)"):
        Parts.make(MOMENTS, [Figure.exact(1.0)])
