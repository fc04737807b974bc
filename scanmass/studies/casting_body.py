"""A bracket with a bored barrel: an invented grey-iron casting of 300 mm, and its nominal shape."""

from __future__ import annotations

from typing import Any

import numpy as np

from scanmass.studies.bodies import Body, from_solid, solid_modeller

_PLATE = (0.300, 0.190, 0.022)
_PLATE_CORNER, _PLATE_ROUNDING = 0.028, 0.005
_INSIDE = 0.003
"""Height in the foot's metal at which what stands on it begins."""
_BOSSES = tuple((x, y) for x in (-0.118, 0.118) for y in (-0.061, 0.061))
_BARREL_RADIUS, HEIGHT = 0.062, 0.140
_BORE = 0.036
_SIDE_HEIGHT, _SIDE_REACH = 0.084, 0.096
CORE_SHIFT = (0.0004, -0.0018, 0.0)
"""How far the as-cast barrel bore lies off the drawing, in m."""


def casting(core_shift: tuple[float, float, float] = (0.0, 0.0, 0.0), name: str = "iron casting") -> Body:
    """The casting in the drawing's frame: z along the bore, the foot's underside at z = 0, bore axis at x = y = 0.

    ``core_shift`` moves the core that makes the barrel's bore.
    """
    m = solid_modeller()
    metal = _plate(m) + _barrel(m) + _side_boss(m) + _ribs(m)
    for x, y in _BOSSES:
        metal = metal + _foot_boss(m).translate((x, y, 0.0))
    holes = _recess(m) + _drill(m, _BORE, 0.30).translate((core_shift[0], core_shift[1], -0.05))
    holes = holes + _drill(m, 0.046, 0.05).translate((core_shift[0], core_shift[1], HEIGHT - 0.014))
    # The side boss has a blind bore, 22 mm deep.
    side = _drill(m, 0.017, 0.10).rotate((0.0, 90.0, 0.0)).translate((_SIDE_REACH - 0.022, 0.0, _SIDE_HEIGHT))
    holes = holes + side
    for x, y in _BOSSES:
        holes = holes + _drill(m, 0.0075, 0.10).translate((x, y, -0.03))
    for angle in np.radians(np.arange(6) * 60.0 + 30.0):
        # Six blind holes in the barrel's face.
        place = (0.057 * float(np.cos(angle)), 0.057 * float(np.sin(angle)), HEIGHT - 0.008)
        holes = holes + _drill(m, 0.0045, 0.05, 32).translate(place)
    return from_solid(name, metal - holes)


def _drill(m: Any, radius: float, length: float, segments: int = 96) -> Any:
    return m.Manifold.cylinder(length, radius, radius, segments)


def _arc(centre: tuple[float, float], radius: float, start: float, end: float, steps: int = 12) -> list[list[float]]:
    angles = np.radians(np.linspace(start, end, steps + 1))
    return [[centre[0] + radius * float(np.cos(a)), centre[1] + radius * float(np.sin(a))] for a in angles]


def _turned(m: Any, profile: list[list[float]], segments: int = 144) -> Any:
    """The solid of a profile of (radius, height), counter-clockwise."""
    return m.Manifold.revolve(m.CrossSection([np.array(profile)]), segments)


def _plate(m: Any) -> Any:
    """The foot: rounded corners, its upper edge rounded with 5 mm."""
    length, width, height = _PLATE
    corner = _turned(m, [[0.0, 0.0], [_PLATE_CORNER, 0.0], *_upper_rounding(_PLATE_CORNER, height), [0.0, height]], 96)
    x, y = 0.5 * length - _PLATE_CORNER, 0.5 * width - _PLATE_CORNER
    return m.Manifold.batch_hull([corner.translate((i * x, j * y, 0.0)) for i in (-1, 1) for j in (-1, 1)])


def _recess(m: Any) -> Any:
    """Cored out of the underside, 7 mm deep: a rounded square but for a ring round the bore."""
    square = m.CrossSection.square((0.126, 0.106), True).offset(0.012, m.JoinType.Round, 2.0, 64)
    recess = m.Manifold.extrude(square - m.CrossSection.circle(0.052, 96), 0.008)
    return recess.translate((0.0, 0.0, -0.001))


def _upper_rounding(radius: float, height: float) -> list[list[float]]:
    return _arc((radius - _PLATE_ROUNDING, height - _PLATE_ROUNDING), _PLATE_ROUNDING, 0.0, 90.0, 10)


def _barrel(m: Any) -> Any:
    """The barrel with a fillet of 12 mm to the foot, a collar on top and a rounded lip."""
    r, top, foot, fillet = _BARREL_RADIUS, HEIGHT, _PLATE[2], 0.012
    profile = [[0.0, _INSIDE], [r + fillet, _INSIDE], [r + fillet, foot - 1e-4]]
    profile += _arc((r + fillet, foot + fillet), fillet, 270.0, 180.0)
    profile += [[r, top - 0.030]]
    profile += _arc((r + 0.004, top - 0.026), 0.004, 180.0, 90.0, 6)[1:]
    profile += [[r + 0.006, top - 0.022]]
    profile += _arc((r + 0.003, top - 0.003), 0.003, 0.0, 90.0, 6)
    profile += [[0.0, top]]
    return _turned(m, profile)


def _foot_boss(m: Any) -> Any:
    """A bolt boss 40 mm across that stands 10 mm above the foot, with a fillet of 6 mm."""
    foot, r, fillet = _PLATE[2], 0.020, 0.006
    profile = [[0.0, _INSIDE], [r, _INSIDE], [r + fillet, foot - 1e-4]]
    profile += _arc((r + fillet, foot + fillet), fillet, 270.0, 180.0)
    profile += [[r, foot + 0.010], [0.0, foot + 0.010]]
    return _turned(m, profile, 96)


def _side_boss(m: Any) -> Any:
    """A boss on the barrel's side along +x, conical by the mould's draft, with a flange at its end."""
    profile = [[0.0, 0.0], [0.029, 0.0], [0.027, _SIDE_REACH - 0.018]]
    profile += _arc((0.031, _SIDE_REACH - 0.018), 0.004, 180.0, 90.0, 8)[1:]
    profile += [[0.034, _SIDE_REACH - 0.014], [0.034, _SIDE_REACH], [0.0, _SIDE_REACH]]
    return _turned(m, profile, 96).rotate((0.0, 90.0, 0.0)).translate((0.0, 0.0, _SIDE_HEIGHT))


def _ribs(m: Any) -> Any:
    """Three ribs from the barrel down to the foot, 14 mm thick with a hollow curve, towards -x, +y and -y."""
    ribs = m.Manifold()
    for angle, reach in ((180.0, 0.140), (90.0, 0.088), (-90.0, 0.088)):
        low, high, root = _PLATE[2] - 0.002, 0.108, _BARREL_RADIUS - 0.006
        run, rise = reach - root, high - low
        curve = [
            [reach - run * float(np.sin(t)), high - rise * float(np.cos(t))] for t in np.linspace(0, np.pi / 2, 25)
        ]
        side = m.CrossSection([np.array([[root - 0.004, low], *curve, [root - 0.004, high]])])
        rib = m.Manifold.extrude(side, 0.014).translate((0.0, 0.0, -0.007)).rotate((90.0, 0.0, 0.0))
        ribs = ribs + rib.rotate((0.0, 0.0, angle))
    return ribs
