"""A carved beast lying on a plinth: an invented stone piece, rounded, with deep undercuts and a hole under the neck."""

from __future__ import annotations

import numpy as np
from numba import njit

from scanmass.studies.bodies import Body, from_solid, solid_modeller

_CAPSULES = np.array(
    [  # two ends, radius, how softly it runs into the others; metres; x along the body, z up, underside at z = 0
        [-0.150, 0.000, 0.135, 0.060, 0.000, 0.150, 0.078, 0.030],  # trunk
        [-0.185, 0.045, 0.100, -0.170, 0.055, 0.120, 0.078, 0.030],  # haunch
        [-0.185, -0.045, 0.100, -0.170, -0.055, 0.120, 0.078, 0.030],  # haunch
        [0.070, 0.000, 0.140, 0.115, 0.000, 0.225, 0.062, 0.028],  # chest
        [0.125, 0.000, 0.245, 0.165, -0.006, 0.300, 0.046, 0.022],  # neck
        [0.170, -0.008, 0.325, 0.225, -0.018, 0.315, 0.046, 0.018],  # skull
        [0.225, -0.018, 0.308, 0.268, -0.026, 0.286, 0.027, 0.014],  # muzzle
        [0.268, -0.026, 0.286, 0.272, -0.026, 0.110, 0.020, 0.016],  # the strut from chin to paws
        [0.150, 0.030, 0.365, 0.128, 0.046, 0.392, 0.015, 0.010],  # ear
        [0.150, -0.042, 0.365, 0.128, -0.058, 0.388, 0.015, 0.010],  # ear
        [0.105, 0.062, 0.170, 0.085, 0.078, 0.072, 0.038, 0.018],  # upper foreleg
        [0.105, -0.062, 0.170, 0.085, -0.078, 0.072, 0.038, 0.018],  # upper foreleg
        [0.085, 0.070, 0.068, 0.270, 0.052, 0.066, 0.029, 0.014],  # forearm and paw
        [0.085, -0.070, 0.068, 0.272, -0.052, 0.066, 0.029, 0.014],  # forearm and paw
        [0.240, -0.045, 0.078, 0.265, 0.045, 0.078, 0.026, 0.014],  # one paw crosses to the other
        [-0.110, 0.105, 0.062, -0.020, 0.112, 0.060, 0.027, 0.014],  # hind foot
        [-0.110, -0.105, 0.062, -0.020, -0.112, 0.060, 0.027, 0.014],  # hind foot
        [-0.255, 0.000, 0.120, -0.268, -0.060, 0.105, 0.021, 0.014],  # tail
        [-0.268, -0.060, 0.105, -0.190, -0.128, 0.085, 0.019, 0.012],  # tail
        [-0.190, -0.128, 0.085, -0.120, -0.118, 0.098, 0.018, 0.012],  # tail
    ]
)
_PLINTH_CENTRE = np.array([0.0, 0.0, 0.012])
_PLINTH_HALF = np.array([0.300, 0.150, 0.036])
_PLINTH_CORNER = 0.030
_ABOVE_EVERYTHING = 0.44


@njit(cache=True)
def _depth_inside(x, y, z, capsules, plinth_centre, plinth_half, corner):  # type: ignore[no-untyped-def]
    """About how deep a place lies in the stone: positive inside."""
    # The tool's marks: shallow waves that run across the work, deeper on the plinth.
    marks = 0.0012 * np.sin(95.0 * x + 40.0 * z) * np.sin(80.0 * y - 55.0 * z + 1.3)
    marks += 0.0020 * np.sin(31.0 * x + 17.0 * y + 0.4) * np.sin(23.0 * z + 19.0 * y + 2.0)
    # A worn block: one end of the plinth is lower and leans.
    dx = abs(x - plinth_centre[0]) - plinth_half[0] + corner
    dy = abs(y - plinth_centre[1]) - plinth_half[1] + corner + 0.04 * x
    dz = abs(z - plinth_centre[2]) - plinth_half[2] + corner + 0.02 * (0.3 - x)
    outside = np.sqrt(max(dx, 0.0) ** 2 + max(dy, 0.0) ** 2 + max(dz, 0.0) ** 2)
    distance = outside + min(max(dx, dy, dz), 0.0) - corner
    for k in range(capsules.shape[0]):
        ux, uy, uz = capsules[k, 3] - capsules[k, 0], capsules[k, 4] - capsules[k, 1], capsules[k, 5] - capsules[k, 2]
        px, py, pz = x - capsules[k, 0], y - capsules[k, 1], z - capsules[k, 2]
        along = (px * ux + py * uy + pz * uz) / (ux * ux + uy * uy + uz * uz)
        along = min(max(along, 0.0), 1.0)
        away = np.sqrt((px - along * ux) ** 2 + (py - along * uy) ** 2 + (pz - along * uz) ** 2) - capsules[k, 6]
        soft = capsules[k, 7]
        share = max(soft - abs(distance - away), 0.0) / soft
        distance = min(distance, away) - 0.25 * share * share * soft
    return marks - distance


def stone_beast(edge: float = 0.006) -> Body:
    """The piece as a closed mesh with edges of about ``edge``; its flat underside is at z = 0, x runs along it."""
    m = solid_modeller()

    def depth(x: float, y: float, z: float) -> float:
        return float(_depth_inside(x, y, z, _CAPSULES, _PLINTH_CENTRE, _PLINTH_HALF, _PLINTH_CORNER))

    bounds = (-0.34, -0.20, -0.05, 0.34, 0.20, _ABOVE_EVERYTHING)
    solid = m.Manifold.level_set(depth, bounds, edge)
    pieces = solid.trim_by_plane((0.0, 0.0, 1.0), 0.0).decompose()
    return from_solid("stone beast", max(pieces, key=lambda piece: piece.volume()))
