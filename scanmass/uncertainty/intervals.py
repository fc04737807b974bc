"""Intervals from draws, from a standard deviation with degrees of freedom, and from a bootstrap."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.stats import norm
from scipy.stats import t as student

FloatArray = npt.NDArray[np.float64]


def coverage_factor(level: float, degrees_of_freedom: float | FloatArray | None) -> float | FloatArray:
    """Half-width over standard deviation of a central interval: Student's t, or normal where None or infinite.

    >>> round(coverage_factor(0.95, None), 3), round(coverage_factor(0.95, 3), 3)
    (1.96, 3.182)
    """
    tail = 0.5 * (1.0 + level)
    if degrees_of_freedom is None:
        return float(norm.ppf(tail))
    # Above this t and normal agree to nine digits, and t's own quantile loses digits.
    nu = np.minimum(degrees_of_freedom, 1e9)
    factor = student.ppf(tail, nu)
    return float(factor) if np.ndim(factor) == 0 else np.asarray(factor)


def welch_satterthwaite(variances: FloatArray, degrees_of_freedom: FloatArray) -> FloatArray:
    """Degrees of freedom (...) of a sum of independent variances (k, ...), each known with its own (k,) degrees.

    Infinite where nothing with finite degrees counts (GUM:1995 G.2b).

    >>> float(welch_satterthwaite(np.array([1.0, 1.0]), np.array([5.0, 5.0])))
    10.0
    """
    total = variances.sum(axis=0)
    nu = np.asarray(degrees_of_freedom, np.float64).reshape(-1, *([1] * (variances.ndim - 1)))
    spread = (variances**2 / nu).sum(axis=0)
    result: FloatArray = np.divide(total**2, spread, out=np.full(np.shape(total), np.inf), where=spread > 0)
    return result


def central(draws: FloatArray, level: float) -> tuple[FloatArray, FloatArray]:
    """Probabilistically symmetric interval of draws (n, ...): as much beyond one end as beyond the other."""
    low, high = np.quantile(draws, [0.5 * (1.0 - level), 0.5 * (1.0 + level)], axis=0)
    return low, high


def shortest(draws: FloatArray, level: float) -> tuple[float, float]:
    """Shortest interval that holds ``level`` of draws (n,) (JCGM 101:2008, 5.3.4)."""
    ordered = np.sort(draws)
    inside = min(int(np.ceil(level * len(ordered))), len(ordered) - 1)
    width = ordered[inside:] - ordered[:-inside]
    start = int(np.argmin(width))
    return float(ordered[start]), float(ordered[start + inside])


@dataclass(frozen=True)
class Propagated:
    """What a Monte Carlo of a model gave; ``settled``: the stop rule was met before the trials ran out."""

    draws: FloatArray
    mean: float
    std: float
    low: float
    high: float
    settled: bool


def propagate(
    model: Callable[[np.random.Generator, int], FloatArray],
    rng: np.random.Generator,
    *,
    level: float = 0.95,
    digits: int = 2,
    most_blocks: int = 400,
) -> Propagated:
    """Adaptive Monte Carlo of ``model(rng, n) -> (n,)`` (JCGM 101:2008, 7.9).

    Blocks are added until there are 1e4 / (1 - level) trials and twice the standard deviation of the block averages
    of mean, standard deviation and both ends is at most half a unit in the last of ``digits`` digits of the standard
    deviation.
    """
    block = max(10_000, int(np.ceil(1e4 / (1.0 - level) / 10.0)))
    draws: list[FloatArray] = []
    rows: list[list[float]] = []
    settled = False
    while len(rows) < most_blocks and not settled:
        draws.append(model(rng, block))
        low, high = central(draws[-1], level)
        rows.append([draws[-1].mean(), draws[-1].std(ddof=1), float(low), float(high)])
        if len(rows) < 2 or len(rows) * block < 1e4 / (1.0 - level):
            continue
        std = float(np.sqrt(np.mean([row[1] ** 2 for row in rows])))
        unit = 10.0 ** (np.floor(np.log10(std)) - (digits - 1)) if std > 0 else np.inf
        doubt = 2.0 * np.std(rows, axis=0, ddof=1) / np.sqrt(len(rows))
        settled = bool(np.all(doubt <= 0.5 * unit))
    every = np.concatenate(draws)
    low, high = central(every, level)
    return Propagated(every, float(every.mean()), float(every.std(ddof=1)), float(low), float(high), settled)


def bca(
    sample: FloatArray,
    statistic: Callable[[FloatArray], FloatArray],
    rng: np.random.Generator,
    *,
    level: float = 0.95,
    replicates: int = 10_000,
) -> tuple[float, float]:
    """Bias-corrected and accelerated bootstrap interval (Efron 1987, JASA 82:171).

    ``sample`` (n, ...): independent observations; ``statistic`` takes samples (b, n, ...) and gives (b,).
    """
    n = len(sample)
    value = float(statistic(sample[None])[0])
    boot = np.sort(
        np.concatenate([statistic(sample[rng.integers(0, n, (1000, n))]) for _ in range(-(-replicates // 1000))])
    )
    below = (np.sum(boot < value) + 0.5 * np.sum(boot == value)) / len(boot)
    bias = norm.ppf(np.clip(below, 0.5 / len(boot), 1 - 0.5 / len(boot)))
    skew = acceleration(sample, statistic)
    z = bias + norm.ppf([0.5 * (1 - level), 0.5 * (1 + level)])
    low, high = np.quantile(boot, norm.cdf(bias + z / (1.0 - skew * z)))
    return float(low), float(high)


def acceleration(sample: FloatArray, statistic: Callable[[FloatArray], FloatArray]) -> float:
    """Acceleration of the BCa interval from the jackknife: sum d^3 / (6 (sum d^2)^1.5)."""
    n = len(sample)
    others = np.array([np.delete(np.arange(n), i) for i in range(n)])
    left = statistic(sample[others])
    d = left.mean() - left
    square = float((d**2).sum())
    return float((d**3).sum() / (6.0 * square**1.5)) if square > 0 else 0.0
