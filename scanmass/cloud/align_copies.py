"""Views that are copies of one another: their differences are no noise."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

import numpy as np
import numpy.typing as npt

from scanmass.cloud.thin import Thinned
from scanmass.errors import ScanFault

FloatArray = npt.NDArray[np.float64]

SAME_COUNT, SAME_SPREAD = 2e-3, 2e-5
"""Shares within which the numbers of points and the spreads of two views are the same, as no two scans are."""


def refuse_copies(thinned: Thinned, names: Sequence[str]) -> None:
    """Refuse two views that hold the same points, also where one was moved, shuffled or rounded by another export.

    The number of points and their spreads along their principal axes do not change when a view is moved; those of two
    real scans differ by far more than rounding.

    Raises
    ------
    ScanFault
        Naming the two.
    """
    seen = [_fingerprint(thinned, v) for v in range(len(names))]
    for i, j in combinations(range(len(names)), 2):
        if seen[i] is None or seen[j] is None:
            continue
        (n, first), (m, second) = seen[i], seen[j]  # type: ignore[misc]
        if abs(n - m) > SAME_COUNT * n or np.abs(first - second).max() > SAME_SPREAD * first.max():
            continue
        raise ScanFault(
            f"{names[j]} holds the same points as {names[i]}, at most moved or rounded: "
            "their differences are not noise",
            allowed="name each view once, or scan again: a copy would make the result look more certain than it is",
        )


def _fingerprint(thinned: Thinned, view: int) -> tuple[int, FloatArray] | None:
    """How many scan points a view has, and their standard deviations along their principal axes, in metres."""
    own = thinned.cloud.view == view
    count = thinned.cloud.count[own].astype(np.float64)
    if len(count) < 3:
        return None
    points = thinned.cloud.points[own]
    middle = count @ points / count.sum()
    away = points - middle
    spread = (away * count[:, None]).T @ away
    if thinned.covariance is not None:
        xx, yy, zz, xy, yz, zx = np.nan_to_num(thinned.covariance[own]).T @ np.maximum(count - 1.0, 0.0)
        spread += np.array([[xx, xy, zx], [xy, yy, yz], [zx, yz, zz]])
    return int(count.sum()), np.sqrt(np.maximum(np.linalg.eigvalsh(spread / count.sum()), 0.0))
