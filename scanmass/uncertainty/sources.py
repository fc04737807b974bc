"""Sources of doubt as rows that can be drawn from and carried to any figure."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from scanmass.doubt import Figure
from scanmass.geometry.moments import DEGREE, second_matrix, translated
from scanmass.geometry.tensors import inertia_from_second

FloatArray = npt.NDArray[np.float64]
Kind = Literal["random", "declared", "bracket"]


@dataclass(frozen=True)
class Parts:
    """What a body is made of: ``moments`` (P, 10) of each part at unit density about one point, and densities.

    ``densities``: a Figure in kg/m3 for each part; parts with the same entry of ``materials`` share one draw.
    The first part is the one whose outside was scanned.
    """

    moments: FloatArray
    densities: tuple[Figure, ...]
    materials: tuple[str, ...]

    def __post_init__(self) -> None:
        p = len(self.densities)
        if self.moments.shape != (p, 10) or len(self.materials) != p:
            raise ValueError(f"moments must be ({p}, 10) and materials {p}, got {self.moments.shape}")

    @classmethod
    def make(cls, moments: FloatArray, densities: Sequence[Figure], materials: Sequence[str] | None = None) -> Parts:
        """Parts from sequences; without ``materials`` every part has a draw of its own."""
        names = [f"part {k}" for k in range(len(densities))] if materials is None else materials
        return cls(np.asarray(moments, np.float64), tuple(densities), tuple(names))

    @property
    def density_values(self) -> FloatArray:
        """(P,), kg/m3."""
        return np.array([float(d.value) for d in self.densities])

    @property
    def mass_moments(self) -> FloatArray:
        """(10,), kg m^k."""
        result: FloatArray = self.density_values @ self.moments
        return result


@dataclass(frozen=True)
class Term:
    """One source of doubt of the volume moments: a sum of ``rows`` (k, P, 10), each times its own unit draw.

    Its covariance is the sum of outer products of the rows. ``degrees_of_freedom``: how well the data know the
    size of it (draws are multivariate t: all rows over one chi); None where it is declared (draws are normal).
    """

    source: str
    kind: Kind
    rows: FloatArray
    degrees_of_freedom: float | None = None


def on_outer_part(rows: FloatArray, parts: Parts) -> FloatArray:
    """Rows (k, P, 10) from rows (k, 10) of the outer surface: what is inside stays, the first part gives or takes.

    Layers that follow the surface would spread a row over several parts here.
    """
    result = np.zeros((len(rows), *parts.moments.shape))
    result[:, 0] = rows
    return result


def factor(covariance: FloatArray) -> FloatArray:
    """Rows (k, n) whose outer products sum to a covariance (n, n); moments of unlike size are brought to one scale.

    >>> rows = factor(np.array([[4.0, 2.0], [2.0, 3.0]]))
    >>> (rows.T @ rows).round(12).tolist()
    [[4.0, 2.0], [2.0, 3.0]]
    """
    scale = np.sqrt(np.clip(np.diag(covariance), 0.0, None))
    scale = np.where(scale > 0, scale, 1.0)
    values, vectors = np.linalg.eigh(covariance / np.outer(scale, scale))
    result: FloatArray = np.sqrt(np.clip(values, 0.0, None))[:, None] * vectors.T * scale
    return result


@dataclass(frozen=True)
class Effect:
    """A source of doubt to first order on the figures: rows (k, ...) that sum as squares to variances.

    ``volume`` (k,), ``mass`` (k,), ``com`` (k, 3), ``inertia`` (k, 3, 3) about the centre of mass.
    """

    source: str
    kind: Kind
    volume: FloatArray
    mass: FloatArray
    com: FloatArray
    inertia: FloatArray
    degrees_of_freedom: float | None = None


def effect(
    source: str,
    kind: Kind,
    volume: FloatArray,
    mass_rows: FloatArray,
    mass_moments: FloatArray,
    degrees_of_freedom: float | None = None,
) -> Effect:
    """Carry changes (k, 10) of the mass moments to mass, centre of mass and central inertia, to first order.

    About the centre of mass the first moments are zero, so a change of them moves the centre by itself over the
    mass, and the second moments change by the row's own.
    """
    mass = mass_moments[0]
    centred = translated(mass_rows, -mass_moments[1:4] / mass)
    inertia = inertia_from_second(second_matrix(centred))
    return Effect(source, kind, volume, mass_rows[:, 0], centred[:, 1:4] / mass, inertia, degrees_of_freedom)


def effects(
    terms: Sequence[Term], parts: Parts, scale: Figure | None, moments: FloatArray | None = None
) -> list[Effect]:
    """Every source's effect on the figures: geometry, scale and densities, at ``moments`` (P, 10) if given."""
    volumes = parts.moments if moments is None else moments
    rho = parts.density_values
    total = rho @ volumes
    result = []
    for t in terms:
        mass_rows = np.tensordot(t.rows, rho, ([1], [0]))
        result.append(effect(t.source, t.kind, t.rows[:, :, 0].sum(axis=1), mass_rows, total, t.degrees_of_freedom))
    if scale is not None and scale.std:
        growth = float(scale.std) / float(scale.value) * (3.0 + DEGREE)
        volume = growth[:1] * volumes[:, 0].sum()
        result.append(effect("scale", "declared", volume, (growth * total)[None], total))
    names = list(dict.fromkeys(parts.materials))
    for name in names:
        alike = [k for k, other in enumerate(parts.materials) if other == name]
        std = parts.densities[alike[0]].std
        if std:
            row = float(std) * volumes[alike].sum(axis=0)
            source = "density" if len(names) == 1 else f"density of {name}"
            result.append(effect(source, "declared", np.zeros(1), row[None], total))
    return result
