"""A shaft with two discs, a keyway and a drilled unbalance: an invented rotor of 400 mm."""

from __future__ import annotations

from typing import Any

import numpy as np

from scanmass.studies.bodies import Body, from_solid, solid_modeller

HOLE_RADIUS, HOLE_DEPTH = 0.006, 0.014
HOLE_PLACE = (0.111, 0.0, 0.068)
"""Middle of the unbalance hole's mouth, in the larger disc's face, in the rotor's frame."""
HOLE_SEGMENTS = 48

_PROFILE = np.array(
    [  # along the axis, radius: metres
        (0.000, 0.0140), (0.001, 0.0150), (0.062, 0.0150), (0.062, 0.0200), (0.111, 0.0200), (0.111, 0.0800),
        (0.113, 0.0820), (0.137, 0.0820), (0.139, 0.0800), (0.139, 0.0240), (0.252, 0.0240), (0.252, 0.0650),
        (0.276, 0.0650), (0.276, 0.0200), (0.332, 0.0200), (0.332, 0.0150), (0.399, 0.0150), (0.400, 0.0140),
    ]
)  # fmt: skip


def rotor(with_hole: bool = True) -> Body:
    """The rotor with its axis along +x from x = 0 to 0.4, its keyway up (+z) at the far end."""
    m = solid_modeller()
    outline = np.concatenate([[[0.0, 0.0]], _PROFILE[:, ::-1], [[0.0, 0.4]]])
    metal = m.Manifold.revolve(m.CrossSection([outline]), 240)
    for angle in np.radians(np.arange(6) * 60.0 + 30.0):
        # Six lightening holes through the larger disc, alike all round.
        hole = m.Manifold.cylinder(0.05, 0.011, 0.011, 64)
        metal = metal - hole.translate((0.052 * float(np.cos(angle)), 0.052 * float(np.sin(angle)), 0.10))
    # Upright so far: the axis along z. Turned so that z goes to x and the x of the section goes to -z.
    metal = metal.rotate((0.0, 90.0, 0.0))
    metal = metal - _keyway(m)
    if with_hole:
        metal = metal - _hole(m)
    return from_solid("rotor", metal)


def _keyway(m: Any) -> Any:
    """8 mm wide, 4 mm deep, 45 mm long with round ends, in the far end's seat."""
    outline = m.CrossSection.square((0.037, 0.008), True) + m.CrossSection.circle(0.004, 48).translate((0.0185, 0.0))
    outline = outline + m.CrossSection.circle(0.004, 48).translate((-0.0185, 0.0))
    return m.Manifold.extrude(outline, 0.02).translate((0.366, 0.0, 0.011))


def _hole(m: Any) -> Any:
    drill = m.Manifold.cylinder(HOLE_DEPTH + 0.01, HOLE_RADIUS, HOLE_RADIUS, HOLE_SEGMENTS)
    return drill.translate((0.0, 0.0, -0.01)).rotate((0.0, 90.0, 0.0)).translate(HOLE_PLACE)
