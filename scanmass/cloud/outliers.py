"""Samples that stand off from the surface round them."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from scanmass.cloud.cloud import Cloud, Removed
from scanmass.errors import Note
from scanmass.geometry.neighbours import nearest
from scanmass.geometry.planes import local_planes

FloatArray = npt.NDArray[np.float64]

NEIGHBOURS = 20
DEVIATIONS = 2.0
"""Standard deviations of the logarithm of the ratio beyond which a sample is an outlier; one would eat edges."""
LEAST_RATIO = 1.5
"""A sample below this is never an outlier: rims of what was seen lie at 1.1 to 1.3."""
RANK = 3
"""The local scale is the third largest of the neighbours' own: up to three strays together do not hide each other."""
FOG_SCALE, FOG_DEPTH = 8.0, 0.15
"""Fog: this many times sparser in length than the median sample, and this deep off its own plane for its width."""
WARN_SHARE = 0.02


def outliers(cloud: Cloud) -> tuple[Cloud, Removed, tuple[Note, ...]]:
    """The cloud without its outliers, the outliers, and a warning where they are many.

    For each sample the mean distance to its 20 nearest others is set against the third largest of that same figure
    over those 20: the ratio does not change with the density of the scan, so the sparse side of an uneven scan
    stays, and a stray sample stands out whatever its distance. Removed are ratios above two standard deviations
    (of the ratio's logarithm) and above 1.5. Strays so many that they are each other's neighbours go where they lie
    eight times farther apart than samples do in the median, and fill space rather than a surface.
    """
    distance, index = nearest(cloud.points, NEIGHBOURS)
    if distance.shape[1] <= RANK:
        return cloud, Removed.nothing(), ()
    mean = np.maximum(distance.mean(axis=1), np.finfo(float).tiny)
    fog = _fog(cloud.points, index, mean)
    around = np.where(fog[index], np.finfo(float).tiny, mean[index])
    around.partition(around.shape[1] - RANK, axis=1)
    ratio = np.log(mean / around[:, -RANK])
    middle = float(np.median(ratio))
    # The spread of the bulk: strays must not widen the gate they are judged by.
    bulk = ratio[np.abs(ratio - middle) < np.log(LEAST_RATIO)]
    stray = fog | (ratio > max(middle + DEVIATIONS * float(bulk.std()), float(np.log(LEAST_RATIO))))
    notes: tuple[Note, ...] = ()
    share = float(cloud.count[stray].sum() / max(int(cloud.count.sum()), 1))
    if share > WARN_SHARE:
        text = f"{100 * share:.1f} % of the points were taken for outliers and removed; look at them in removed.ply."
        notes = (Note("many-outliers", text),)
    return cloud.keep(~stray), Removed.from_cloud(cloud, stray, "outlier"), notes


def _fog(points: FloatArray, index: npt.NDArray[np.int64], mean: FloatArray) -> npt.NDArray[np.bool_]:
    sparse = np.flatnonzero(mean > FOG_SCALE * np.median(mean))
    _, depth = local_planes(points, index[sparse], sparse)
    fog = np.zeros(len(points), np.bool_)
    fog[sparse] = depth > FOG_DEPTH * mean[sparse]
    return fog
