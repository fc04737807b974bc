"""A figure's draws against the distributions it claims, and its interval."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from scanmass import seeds
from scanmass.doubt import NORMAL_95, Figure

N = 20_000
LEAST_P = 1e-4
"""The seed is fixed: one answer for ever. A right sampler falls below this at one seed in 10 000."""


def drawn(figure: Figure) -> np.ndarray:
    return figure.draw(seeds.stream(0, "doubt"), N)


def test_exact_has_no_doubt() -> None:
    figure = Figure.exact(3.5)
    assert (figure.std, figure.low, figure.high) == (0.0, 3.5, 3.5)
    assert (drawn(figure) == 3.5).all()


def test_normal() -> None:
    figure = Figure.normal(10.0, 2.0)
    reference = stats.norm(10.0, 2.0)
    assert pytest.approx(stats.norm.ppf(0.975), rel=1e-15) == NORMAL_95
    assert (figure.low, figure.high) == pytest.approx(reference.interval(0.95), rel=1e-14)
    assert stats.kstest(drawn(figure), reference.cdf).pvalue > LEAST_P


@pytest.mark.parametrize(("low", "high"), [(0.0, np.inf), (-np.inf, 1.5), (0.5, 1.5), (1.9, 2.1)])
def test_normal_within_limits_is_the_truncated_normal(low: float, high: float) -> None:
    figure = Figure.normal(1.0, 1.0, limits=(low, high))
    draws = drawn(figure)
    assert draws.min() >= low
    assert draws.max() <= high
    assert stats.kstest(draws, stats.truncnorm(low - 1.0, high - 1.0, loc=1.0).cdf).pvalue > LEAST_P


def test_interval_is_cut_at_the_limits() -> None:
    figure = Figure.normal(1.0, 1.0, limits=(0.0, 2.0))
    assert (figure.low, figure.high) == (0.0, 2.0)


def test_uniform() -> None:
    figure = Figure.uniform(4.0, 9.0)
    reference = stats.uniform(4.0, 5.0)
    assert figure.value == reference.mean()
    assert figure.std == pytest.approx(reference.std(), rel=1e-14)
    assert (figure.low, figure.high) == (4.0, 9.0)
    assert stats.kstest(drawn(figure), reference.cdf).pvalue > LEAST_P


def test_same_stream_same_draws() -> None:
    figure = Figure.normal(1.0, 1.0, limits=(0.0, np.inf))
    assert np.array_equal(drawn(figure), drawn(figure))


def test_replicates_cannot_be_drawn_from() -> None:
    with pytest.raises(ValueError, match="only through replicates"):
        drawn(Figure(1.0, 0.1, 0.8, 1.2))


def test_absent_doubt_is_none_and_not_zero() -> None:
    figure = Figure(1.0)
    assert (figure.std, figure.low, figure.high) == (None, None, None)
    with pytest.raises(ValueError, match="no stated doubt"):
        drawn(Figure(1.0, spread="normal"))
