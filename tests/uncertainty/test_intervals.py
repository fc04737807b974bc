"""Published cases: JCGM 101:2008 clause 9, NPL DEM-ES-011, Efron & Tibshirani 1993."""

import numpy as np
import pytest
from scipy.stats import chi2, ncx2
from scipy.stats import t as student

from scanmass.doubt import Figure
from scanmass.uncertainty.intervals import (
    acceleration,
    bca,
    central,
    coverage_factor,
    propagate,
    shortest,
    welch_satterthwaite,
)

SPATIAL = np.array(
    [48, 36, 20, 29, 42, 42, 20, 42, 22, 41, 45, 14, 6, 0, 33, 28, 34, 4, 32, 24, 47, 41, 24, 26, 30, 41], float
)
# Efron & Tibshirani 1993, table 3.1: LSAT and GPA of 15 law schools (value from memory; r = 0.776 checks it).
LAW = np.array(
    [
        [576, 3.39], [635, 3.30], [558, 2.81], [578, 3.03], [666, 3.44], [580, 3.07], [555, 3.00], [661, 3.43],
        [651, 3.36], [605, 3.13], [653, 3.12], [575, 2.74], [545, 2.76], [572, 2.88], [594, 2.96],
    ]
)  # fmt: skip


def _sum(*terms):
    def model(rng, n):
        return sum(term(rng, n) for term in terms)

    return model


def _normal(std):
    return Figure.normal(0.0, std).draw


def _rectangular(std):
    return Figure.uniform(-std * np.sqrt(3), std * np.sqrt(3)).draw


@pytest.mark.parametrize(
    ("name", "terms", "u", "end", "linear"),
    [
        ("9.2.2 four normal", [_normal(1)] * 4, 2.0, 3.9200, 3.92),
        ("9.2.3 four rectangular, exact end", [_rectangular(1)] * 4, 2.0, 3.8794, 3.92),
        ("9.2.4 one rectangular dominates", [_rectangular(1)] * 3 + [_rectangular(10)], np.sqrt(103), 17.0, 19.9),
    ],
)
def test_jcgm_101_additive_models(name, terms, u, end, linear):
    # The linear method (GUM): root of the sum of squares times the normal factor, as printed beside the Monte Carlo.
    assert coverage_factor(0.95, None) * u == pytest.approx(linear, abs=0.05 if u > 9 else 0.005)
    found = propagate(_sum(*terms), np.random.default_rng(1), digits=3)
    assert found.settled
    # The stop rule leaves twice the error of the block averages at half a unit of the third digit: 0.005 (0.05 at 10).
    gate = 0.05 if u > 9 else 0.005
    assert found.std == pytest.approx(u, abs=2 * gate)
    assert -found.low == pytest.approx(end, abs=2 * gate)
    assert found.high == pytest.approx(end, abs=2 * gate)


def test_jcgm_101_mass_calibration():
    def model(rng, n):
        mass, extra = Figure.normal(100_000.0, 0.050).draw(rng, n), Figure.normal(1.234, 0.020).draw(rng, n)
        ranges = ((1.10, 1.30), (7000.0, 9000.0), (7950.0, 8050.0))
        air, weight, reference = (Figure.uniform(*ends).draw(rng, n) for ends in ranges)
        return (mass + extra) * (1 + (air - 1.2) * (1 / weight - 1 / reference)) - 100_000

    found = propagate(model, np.random.default_rng(2), digits=3)
    low, high = shortest(found.draws, 0.95)
    # Gates from REFERENCES 5: printed [1.0834, 1.3825], exact shortest [1.0848, 1.3838].
    assert found.mean == pytest.approx(1.2341, abs=0.0003)
    assert found.std == pytest.approx(0.0754, abs=0.0003)
    assert (low, high) == pytest.approx((1.0834, 1.3825), abs=0.004)
    assert high - low == pytest.approx(0.299, abs=0.001)
    # To first order the densities do not count at all (GUM: 0.0539); the product of two doubts is missed there.
    assert found.std > 1.3 * np.hypot(0.050, 0.020)


@pytest.mark.parametrize(("x1", "value", "u", "high"), [(0.0, 50, 50, 150), (0.010, 150, 112, 366)])
def test_jcgm_101_reflection(x1, value, u, high):
    def model(rng, n):
        return (rng.normal(x1, 0.005, n) ** 2 + rng.normal(0, 0.005, n) ** 2) * 1e6

    found = propagate(model, np.random.default_rng(3), digits=3)
    low, top = shortest(found.draws, 0.95)
    # Printed to the unit; Monte Carlo error of the ends with about 1e6 draws is below 0.5.
    assert found.mean == pytest.approx(value, abs=0.5)
    assert found.std == pytest.approx(u, abs=0.7)
    assert low == pytest.approx(0, abs=0.5)
    assert top == pytest.approx(high, abs=1.5)
    # Exactly: 25 times a noncentral chi-square of two degrees of freedom; the median and the tail by its own quantile.
    law = ncx2(2, (x1 / 0.005) ** 2) if x1 else chi2(2)
    ends = central(found.draws, 0.95)
    # Error of a quantile, root of p (1 - p) / n over the density, 3 of them: below 0.4 % of the upper end.
    assert ends[1] == pytest.approx(25 * law.ppf(0.975), rel=0.004)
    assert ends[0] == pytest.approx(25 * law.ppf(0.025), abs=0.4)


def test_npl_logarithm_is_asymmetric():
    found = propagate(lambda rng, n: np.log(rng.uniform(0.1, 1.1, n)), np.random.default_rng(4), digits=2)
    # Lower end exactly ln(0.125), upper ln(1.075): the central interval of a monotone function.
    assert found.low == pytest.approx(np.log(0.125), abs=0.006)
    assert found.high == pytest.approx(np.log(1.075), abs=0.003)
    assert found.mean == pytest.approx(-0.665, abs=0.002)
    assert found.std == pytest.approx(0.606, abs=0.002)
    # The printed interval [-1.895, 0.095] (exact lower end ln 0.15) is the shortest one.
    assert shortest(found.draws, 0.95) == pytest.approx((np.log(0.15), 0.095), abs=0.01)


def test_trials_and_stop_rule_are_those_of_the_guide():
    """JCGM 101:2008, 7.2.2 and 7.9.4: 1e4 / (1 - p) trials at least, and twice the error of every average, worked out
    anew from the draws, at most half a unit of the last digit."""
    found = propagate(_normal(1), np.random.default_rng(9), level=0.99, digits=2)
    assert found.settled
    assert len(found.draws) >= 1e4 / (1 - 0.99)
    blocks = found.draws.reshape(-1, 100_000)
    rows = [[b.mean(), b.std(ddof=1), *central(b, 0.99)] for b in blocks]
    # Two digits of 1.0: the last one is worth 0.1.
    assert np.all(2 * np.std(rows, axis=0, ddof=1) / np.sqrt(len(rows)) <= 0.05)


def test_stop_rule_reports_a_model_that_does_not_settle():
    found = propagate(lambda rng, n: rng.standard_t(1.5, n), np.random.default_rng(5), digits=3, most_blocks=3)
    assert not found.settled


def _variance(samples):
    return samples.var(axis=1)


def test_bca_of_spatial_data():
    assert _variance(SPATIAL[None])[0] == pytest.approx(171.5, abs=0.05)
    assert acceleration(SPATIAL, _variance) == pytest.approx(0.061, abs=0.0005)
    low, high = bca(SPATIAL, _variance, np.random.default_rng(6), level=0.90, replicates=20_000)
    # Gate from REFERENCES 5: [115.3, 260.8] +- 2.5.
    assert (low, high) == pytest.approx((115.3, 260.8), abs=2.5)


def test_law_school_correlation():
    def r(samples):
        d = samples - samples.mean(axis=1, keepdims=True)
        return (d[..., 0] * d[..., 1]).sum(1) / np.sqrt((d[..., 0] ** 2).sum(1) * (d[..., 1] ** 2).sum(1))

    assert r(LAW[None])[0] == pytest.approx(0.776, abs=0.0005)
    rng = np.random.default_rng(7)
    boot = r(LAW[rng.integers(0, 15, (20_000, 15))])
    # Printed standard error 0.13 to two digits.
    assert boot.std() == pytest.approx(0.13, abs=0.006)
    low, high = bca(LAW, r, rng, level=0.90)
    plain = central(boot, 0.90)
    assert low < plain[0]
    assert high < plain[1] < 1


def test_degrees_of_freedom():
    assert coverage_factor(0.95, np.inf) == pytest.approx(coverage_factor(0.95, None), abs=1e-7)
    # Student's table: t(0.975; 5) = 2.571, t(0.975; 60) = 2.000.
    assert coverage_factor(0.95, np.array([5.0, 60.0])) == pytest.approx([2.571, 2.000], abs=5e-4)
    nu = welch_satterthwaite(np.array([[1.0, 0.0], [3.0, 2.0]]), np.array([4.0, np.inf]))
    assert nu[0] == pytest.approx(16 / (1 / 4))
    assert np.isinf(nu[1])


def test_t_interval_covers_with_few_degrees():
    rng = np.random.default_rng(8)
    sample = rng.normal(size=(4000, 4))
    std = sample.std(axis=1, ddof=1) / 2
    t = np.mean(np.abs(sample.mean(1)) <= coverage_factor(0.95, 3) * std)
    z = np.mean(np.abs(sample.mean(1)) <= coverage_factor(0.95, None) * std)
    # Binomial error of 4000 trials 0.0034: three of them.
    assert t == pytest.approx(0.95, abs=0.0105)
    assert z == pytest.approx(2 * student.cdf(1.96, 3) - 1, abs=0.0165)
