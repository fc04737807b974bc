"""A number, or an array of numbers, that carries its doubt."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, Self

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
Spread = Literal["exact", "normal", "uniform", "sampled"]

NORMAL_95 = 1.959963984540054
"""Half-width of the central 95 % of a standard normal distribution."""


@dataclass(frozen=True)
class Figure:
    """A value with its standard deviation and the ends of its interval, in SI units.

    ``value``, ``std``, ``low`` and ``high`` are floats or arrays of one shape. ``None`` means that
    no claim is possible; it is never zero by default. ``spread`` tells what a draw from it looks like:
    ``exact`` (no doubt), ``normal`` (kept within ``limits``), ``uniform`` (anywhere in [low, high]
    alike) or ``sampled`` (known only through replicates: cannot be drawn from).

    >>> density = Figure.normal(1250.0, 30.0, limits=(0.0, np.inf))
    >>> density.value, density.std
    (1250.0, 30.0)
    """

    value: float | FloatArray
    std: float | FloatArray | None = None
    low: float | FloatArray | None = None
    high: float | FloatArray | None = None
    spread: Spread = "sampled"
    limits: tuple[float, float] = (-np.inf, np.inf)
    degrees_of_freedom: float | None = None

    @classmethod
    def exact(cls, value: float) -> Self:
        """A number known without doubt."""
        return cls(value, 0.0, value, value, "exact")

    @classmethod
    def normal(cls, value: float, std: float, limits: tuple[float, float] = (-np.inf, np.inf)) -> Self:
        """A normal distribution about ``value``; ``low`` and ``high`` are its central 95 %."""
        reach = NORMAL_95 * std
        return cls(value, std, max(value - reach, limits[0]), min(value + reach, limits[1]), "normal", limits)

    @classmethod
    def uniform(cls, low: float, high: float) -> Self:
        """Alike anywhere in [low, high]; the value is the middle."""
        return cls(0.5 * (low + high), (high - low) / np.sqrt(12.0), low, high, "uniform", (low, high))

    def draw(self, rng: np.random.Generator, n: int) -> FloatArray:
        """``n`` independent draws, shape (n,). Normal draws beyond ``limits`` are drawn again.

        Raises
        ------
        ValueError
            If the figure is known only through replicates.
        """
        if self.spread == "exact":
            return np.full(n, float(self.value))
        if self.spread == "uniform":
            return rng.uniform(float(_known(self.low)), float(_known(self.high)), n)
        if self.spread == "normal":
            return self._draw_normal(rng, n)
        raise ValueError("a figure known only through replicates cannot be drawn from")

    def _draw_normal(self, rng: np.random.Generator, n: int) -> FloatArray:
        value, std = float(self.value), float(_known(self.std))
        draws = rng.normal(value, std, n)
        beyond = (draws < self.limits[0]) | (draws > self.limits[1])
        while np.any(beyond):
            draws[beyond] = rng.normal(value, std, int(beyond.sum()))
            beyond = (draws < self.limits[0]) | (draws > self.limits[1])
        return draws


def _known(number: float | FloatArray | None) -> float | FloatArray:
    if number is None:
        raise ValueError("the figure has no stated doubt")
    return number
