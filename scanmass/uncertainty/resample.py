"""The second bootstrap: views, and patches of views, drawn again with no model of the noise."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from scanmass.seeds import stream
from scanmass.uncertainty.distances import farthest_seeds
from scanmass.uncertainty.following import against_mean
from scanmass.uncertainty.patches import Patches

FloatArray = npt.NDArray[np.float64]

_BLOCKS = 60
_REACH = 3.0
"""Blocks are so many lengths of the field apart: at 3 the field of neighbours goes together by exp(-4.5)."""


def by_views(patches: Patches, n: int, seed: int) -> FloatArray:
    """Draws (n, 10) of the errors of the volume moments: what each view adds, whole, with a sign at random.

    A wild bootstrap of clusters (Wu 1986, Ann. Statist. 14:1261; Mammen 1993, Ann. Statist. 21:255). Whatever is alike
    within a view stays so: its pose, a bend, a field. Leverages as in the jackknife by views.
    """
    added = _added(patches, 1.0)
    return _drawn(patches, (added[:, :, None] * patches.moments[:, None, :]).sum(axis=0), n, seed)


def by_patches(patches: Patches, length: float, n: int, seed: int) -> FloatArray:
    """The same by blocks of patches of each view: what is alike over less than a block stays, the rest is lost."""
    added, block = _added(patches, 0.5), _blocks(patches, length)
    rows = added[:, :, None] * patches.moments[:, None, :]
    sums = np.zeros((block.max() + 1, patches.views, 10))
    np.add.at(sums, block, rows)
    return _drawn(patches, sums.reshape(-1, 10), n, seed)


def _added(patches: Patches, power: float) -> FloatArray:
    """(J, V): a_jv u_jv / (1 - a_jv)^power, what each view's error adds to the surface in each patch.

    u is the residual against the views' mean by their shares a; the root (power 1/2) gives back what that mean took
    where the same views see all of a block, power 1 where the other views change from patch to patch (HC2 and HC3 of
    MacKinnon & White 1985, J. Econometrics 29:305). Zero where a view alone saw the patch.
    """
    share, about = against_mean(_told(patches), patches.counts)
    alone = share >= 1.0 - 1e-9
    result: FloatArray = np.where(alone, 0.0, share * about / np.where(alone, 1.0, 1.0 - share) ** power)
    return result


def _told(patches: Patches) -> FloatArray:
    """Residuals (J, V), NaN where too few samples lie."""
    return np.where(patches.seen, patches.residuals, np.nan)


def _drawn(patches: Patches, sums: FloatArray, n: int, seed: int) -> FloatArray:
    """Random signs of sums (k, 10), raised by the area that views alone saw: nothing is known of it."""
    shared = patches.seen.sum(axis=1) >= 2
    area = patches.areas[patches.seen.any(axis=1)].sum() / max(patches.areas[shared].sum(), 1e-300)
    signs = stream(seed, "bootstrap of views and patches").choice([-1.0, 1.0], (n, len(sums)))
    result: FloatArray = area * (signs @ sums)
    return result


def covariance(patches: Patches) -> FloatArray:
    """Covariance (10, 10) of the moments by products between views, whatever the kind of their errors.

    Each pair of patches weighs by what its products are short of for the mean that was taken off (:mod:`.field`), so
    it is unbiased if views err alike. With equal shares it is the variance of a mean of V views, with its V - 1.
    """
    share, about = against_mean(_told(patches), patches.counts)
    both = share @ share.T
    left = both * (1.0 + both) - share**2 @ share.T - share @ (share**2).T
    product = (share * about) @ (share * about).T
    weight = np.divide(both, left, out=np.zeros_like(both), where=left > 1e-6 * both.max(initial=1e-300))
    result: FloatArray = patches.moments.T @ (product * weight) @ patches.moments
    return result


def _blocks(patches: Patches, length: float) -> npt.NDArray[np.int64]:
    """Block (J,) of every patch: cells round seeds at least three lengths apart, at most sixty."""
    seeds = farthest_seeds(patches.centres, _BLOCKS)
    apart = np.linalg.norm(patches.centres[seeds][:, None] - patches.centres[seeds][None], axis=2)
    far = [bool(apart[k, :k].min() >= _REACH * length) for k in range(1, len(seeds))]
    kept = 1 + int(np.cumprod(far, dtype=np.int64).sum())
    distance = np.linalg.norm(patches.centres[:, None] - patches.centres[seeds[:kept]][None], axis=2)
    nearest: npt.NDArray[np.int64] = distance.argmin(axis=1)
    return nearest
