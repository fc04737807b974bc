"""Replicates: thousands of bodies that the data allow, each as its ten moments."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.doubt import Figure
from scanmass.errors import Declined
from scanmass.geometry.moments import central_second, centroid, scaled
from scanmass.geometry.tensors import inertia_from_second
from scanmass.seeds import stream
from scanmass.uncertainty.sources import Parts, Term

FloatArray = npt.NDArray[np.float64]

_REDRAWS = 20


@dataclass(frozen=True)
class Replicates:
    """``N`` draws, SI, scan's frame. ``volume``, ``mass`` (N,); ``com`` (N, 3); ``inertia`` (N, 3, 3) about ``com``;
    ``principal`` (N, 3) ascending. ``redrawn``: share of draws that were no body at first (no volume, or no size).
    """

    volume: FloatArray
    mass: FloatArray
    com: FloatArray
    inertia: FloatArray
    principal: FloatArray
    redrawn: float = 0.0


def replicates(
    parts: Parts,
    terms: Sequence[Term],
    scale: Figure | None,
    *,
    centre: FloatArray,
    n: int = 2000,
    seed: int = 0,
) -> Replicates:
    """Draw ``n`` bodies: every source from its own distribution and its own stream of ``seed``.

    A term with degrees of freedom is multivariate t: its normal draw over sqrt(chi2_nu / nu), one for all rows.
    Declared terms are normal; the scale acts about ``centre`` (3,), the object's own; densities draw themselves,
    once per material. Draws that are no body are drawn again, and counted.

    Raises
    ------
    Declined
        If most draws are no body: the doubt is as large as the object.
    """
    moments = _moments(parts, terms, n, seed, 0)
    wrong = ~_is_body(moments, parts)
    redrawn = float(wrong.mean())
    for again in range(1, _REDRAWS + 1):
        if redrawn > 0.5 or not wrong.any():
            break
        fresh = _moments(parts, terms, n, seed, again)
        moments[wrong] = fresh[wrong]
        wrong = ~_is_body(moments, parts)
    if wrong.any():
        raise Declined(
            f"the noise is as large as the object: {100 * redrawn:.0f} % of the shapes it allows enclose nothing",
            allowed="give a better scan, or check scan.noise_std and its unit",
        )
    if scale is not None and scale.std:
        factor = scale.draw(stream(seed, "replicates scale"), n) / float(scale.value)
        moments = scaled(moments, factor[:, None])
    densities = _densities(parts, n, seed)
    mass_moments = np.einsum("np,npk->nk", densities, moments)
    inertia = inertia_from_second(central_second(mass_moments))
    return Replicates(
        volume=moments[:, :, 0].sum(axis=1),
        mass=mass_moments[:, 0],
        com=centre + centroid(mass_moments),
        inertia=inertia,
        principal=np.linalg.eigvalsh(inertia).astype(np.float64, copy=False),
        redrawn=redrawn,
    )


def _moments(parts: Parts, terms: Sequence[Term], n: int, seed: int, again: int) -> FloatArray:
    moments = np.repeat(parts.moments[None], n, axis=0)
    for term in terms:
        if len(term.rows) == 0:
            continue
        rng = stream(seed, f"replicates {term.source}", again)
        draws = rng.standard_normal((n, len(term.rows)))
        if term.degrees_of_freedom is not None:
            nu = term.degrees_of_freedom
            draws /= np.sqrt(rng.chisquare(nu, n) / nu)[:, None]
        moments += np.tensordot(draws, term.rows, 1)
    return moments


def _is_body(moments: FloatArray, parts: Parts) -> npt.NDArray[np.bool_]:
    """Every part with a volume keeps one, and the whole keeps an extent in every direction."""
    able = parts.moments[:, 0] > 0
    filled = (moments[:, able, 0] > 0).all(axis=1)
    whole = moments.sum(axis=1)
    whole[~filled] = parts.moments.sum(axis=0)
    extent = np.linalg.eigvalsh(central_second(whole))[:, 0]
    result: npt.NDArray[np.bool_] = filled & (extent > 0)
    return result


def _densities(parts: Parts, n: int, seed: int) -> FloatArray:
    """(n, P) draws, one per material name."""
    by_name: dict[str, FloatArray] = {}
    for name, density in zip(parts.materials, parts.densities, strict=True):
        if name not in by_name:
            known = density.std is not None
            rng = stream(seed, f"replicates density {name}")
            by_name[name] = density.draw(rng, n) if known else np.full(n, float(density.value))
    return np.stack([by_name[name] for name in parts.materials], axis=1)
