"""Places to put a scanner round an object."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from scanmass.studies.scanner import Pose


def ring(
    centre: Sequence[float], distance: float, elevation: float, azimuths: Sequence[float], up: float = 1.0
) -> list[Pose]:
    """Poses that look at ``centre`` (3,) from ``distance`` m, ``elevation`` degrees above it, at ``azimuths`` degrees.

    ``up`` -1 for an object that was turned over: above is then towards -z.

    >>> ring((0.0, 0.0, 1.0), 2.0, 30.0, [90.0])[0].position[2]
    2.0
    """
    lift = np.radians(elevation)
    x0, y0, z0 = (float(part) for part in centre)
    poses = []
    for azimuth in np.radians(azimuths):
        step = distance * np.array([np.cos(lift) * np.cos(azimuth), np.cos(lift) * np.sin(azimuth), up * np.sin(lift)])
        x, y, z = (float(np.round(part, 12)) for part in np.asarray(centre) + step)
        sideways = (float(np.round(-np.cos(azimuth), 12)), float(np.round(-np.sin(azimuth), 12)), 0.0)
        straight = abs(elevation) > 85.0
        poses.append(Pose((x, y, z), (x0, y0, z0), sideways if straight else (0.0, 0.0, up)))
    return poses
