"""Where the doubt comes from, source by source."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.uncertainty.sources import Effect, Kind

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class BudgetRow:
    """One source. Random and declared rows have standard deviations and shares of the variance, bracket rows half
    ranges; what does not apply, or is not known, is None. kg and metres."""

    source: str
    kind: Kind
    mass_std: float | None = None
    com_std: FloatArray | None = None
    mass_half_range: float | None = None
    com_half_range: FloatArray | None = None
    share_mass: float | None = None
    share_com: float | None = None


def budget(sources: Sequence[Effect], mass_known: bool) -> tuple[BudgetRow, ...]:
    """Rows of random and declared sources; shares sum to one, or are None where there is no doubt at all.

    ``mass_known`` False: a density's doubt is not stated, so nothing is said of the mass.
    """
    mass = np.array([(e.mass**2).sum() for e in sources])
    com = np.array([(e.com**2).sum(axis=0) for e in sources]).reshape(-1, 3)
    in_mass, in_com = mass.sum(), com.sum()
    return tuple(
        BudgetRow(
            e.source,
            e.kind,
            mass_std=float(np.sqrt(mass[k])) if mass_known else None,
            com_std=np.sqrt(com[k]),
            share_mass=float(mass[k] / in_mass) if mass_known and in_mass > 0 else None,
            share_com=float(com[k].sum() / in_com) if in_com > 0 else None,
        )
        for k, e in enumerate(sources)
    )


def bracket_row(source: str, mass: FloatArray, com: FloatArray) -> BudgetRow:
    """What lies between the masses (c,) and centres (c, 3) of the shapes the unseen part could have."""
    return BudgetRow(
        source,
        "bracket",
        mass_half_range=float(0.5 * np.ptp(mass)),
        com_half_range=0.5 * np.ptp(com, axis=0),
    )
