"""What other weights of the views would say: how much hangs on sight that grazes."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from scanmass.uncertainty.following import shares_of
from scanmass.uncertainty.patches import Patches

FloatArray = npt.NDArray[np.float64]

SOURCE = "weights of the views (incidence)"


def changes(patches: Patches) -> dict[str, FloatArray]:
    """Changes (10,) of the volume moments under other weights than points: views alike, by the cosine of incidence
    squared and to the fourth, and the most frontal view alone; the last three only where scanner places are known.

    To first order: sum_j G_j sum_v (w_jv - a_jv) r_jv over patches that views share.
    """
    seen = patches.seen & np.isfinite(patches.residuals)
    r = np.where(seen, np.nan_to_num(patches.residuals), 0.0)
    points = np.where(seen, patches.counts, 0.0)
    kinds = {"views alike": seen.astype(np.float64)}
    if np.isfinite(patches.towards[seen]).all():
        cosine = np.where(seen, np.clip(np.nan_to_num(patches.towards), 0.0, 1.0), 0.0)
        frontal = seen & (cosine >= cosine.max(axis=1, keepdims=True))
        kinds |= {"cosine squared": points * cosine**2, "cosine to the fourth": points * cosine**4}
        kinds["most frontal view"] = frontal.astype(np.float64)
    own = shares_of(points)

    def change(weights: FloatArray) -> FloatArray:
        share = shares_of(weights)
        share = np.where(share.sum(axis=1, keepdims=True) > 0, share, own)
        moved: FloatArray = patches.moments.T @ ((share - own) * r).sum(axis=1)
        return moved

    return {name: change(weights) for name, weights in kinds.items()}


def half_spread(found: dict[str, FloatArray]) -> FloatArray:
    """(10,): half of what lies between the least and the greatest, the points' own weights among them.

    >>> half_spread({"views alike": np.full(10, 3.0), "cosine squared": np.full(10, -1.0)})[0].item()
    2.0
    """
    every = np.stack([np.zeros(10), *found.values()])
    result: FloatArray = 0.5 * np.ptp(every, axis=0)
    return result
