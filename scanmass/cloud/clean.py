"""Drop samples at the edges of range grids, but nowhere that no other view saw."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy.spatial import cKDTree

from scanmass.cloud.cloud import Cloud, Removed
from scanmass.errors import Note
from scanmass.geometry.neighbours import median_spacing

REACH = 3.0
"""Spacings of the view within which an unmarked sample of another view covers the place."""
WARN_SHARE = 0.15


def drop_edges(cloud: Cloud) -> tuple[Cloud, Removed, tuple[Note, ...]]:
    """The cloud without the samples at their view's grid edges that another view covers, those samples, and notes.

    A pixel at an edge mixes two surfaces. What one view sees at its edge another sees frontally, so a marked sample
    goes where an unmarked one of another view lies within 3 spacings; elsewhere it stays, so that cleaning
    opens no hole in what was seen, and a note counts what stayed.
    """
    if cloud.at_edge is None or not cloud.at_edge.any():
        return cloud, Removed.nothing(), ()
    drop = np.zeros(len(cloud.points), np.bool_)
    for view in np.unique(cloud.view[cloud.at_edge]):
        own = cloud.view == view
        marked = np.flatnonzero(own & cloud.at_edge)
        others = cloud.points[~own & ~cloud.at_edge]
        if len(others):
            drop[marked] = _covered(cloud.points[marked], others, REACH * median_spacing(cloud.points[own]))
    stayed = int((cloud.at_edge & ~drop).sum())
    notes = []
    if stayed:
        text = f"{stayed} samples at edges of their view's range grid stayed, since no other view covers the place."
        notes.append(Note("edges-kept", text))
    share = float(cloud.count[drop].sum() / cloud.count.sum())
    if share > WARN_SHARE:
        notes.append(
            Note("many-edges", f"{100 * share:.0f} % of the points lie at edges of range grids and were removed.")
        )
    return cloud.keep(~drop), Removed.from_cloud(cloud, drop, "grid edge"), tuple(notes)


def _covered(points: npt.NDArray[np.float64], others: npt.NDArray[np.float64], reach: float) -> npt.NDArray[np.bool_]:
    distance, _ = cKDTree(others).query(points, distance_upper_bound=max(reach, np.finfo(float).tiny))
    covered: npt.NDArray[np.bool_] = np.isfinite(distance)
    return covered
