"""Bodies of the coverage study: closed meshes, so that their moments are exact. None of them is a sample scan's.

They were fixed before any result of the study was seen, and stay as they are: a body that is changed until bounds
hold proves nothing.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

import numpy as np
import numpy.typing as npt

from scanmass.geometry.moments import central_second, centroid
from scanmass.studies.bodies import Body, from_rings, from_solid, solid_modeller

FloatArray = npt.NDArray[np.float64]


def wedge() -> Body:
    """Sharp edges only: a stepped block of 0.45 m, cut slantwise, with a notch; no two faces square but by chance."""
    m = solid_modeller()
    side = [[0.0, 0.0], [0.45, 0.0], [0.45, 0.11], [0.30, 0.13], [0.28, 0.24], [0.05, 0.27], [0.0, 0.20]]
    block = m.Manifold.extrude(m.CrossSection([np.array(side)]), 0.22)
    notch = m.Manifold.cube((0.09, 0.08, 0.10)).rotate((0.0, 0.0, 12.0)).translate((0.12, -0.03, 0.14))
    cut = block.trim_by_plane((-0.35, -0.25, -0.9), -0.34)
    return from_solid("wedge", cut - notch)


def bowl() -> Body:
    """Thin-walled: an oval open bowl 0.5 m across, its wall 9 to 14 mm, with a foot ring."""
    m = solid_modeller()
    t = np.linspace(0.0, 1.0, 40)
    outside = np.stack([0.09 + 0.16 * np.sin(0.5 * np.pi * t), 0.02 + 0.19 * (1.0 - np.cos(0.5 * np.pi * t))], axis=1)
    inside = np.stack([(outside[:, 0] - 0.009 - 0.003 * (1 - t)), outside[:, 1] + 0.006 * (1 - t)], axis=1)
    rim = [[0.2495, 0.2130], [0.2440, 0.2140], [0.2415, 0.2120]]
    foot = [[0.0, 0.012], [0.072, 0.012], [0.074, 0.0], [0.088, 0.0], [0.090, 0.004]]
    profile = np.concatenate([foot, outside, rim, inside[::-1], [[0.0, 0.026]]])
    turned = m.Manifold.revolve(m.CrossSection([profile]), 192)
    return from_solid("bowl", turned.scale((1.0, 0.82, 1.0)))


def bored() -> Body:
    """Bores: a plate of 0.42 x 0.30 x 0.075 m with three through bores, one slanted, and a blind one."""
    m = solid_modeller()
    outline = m.CrossSection.square((0.38, 0.26), True).offset(0.02, m.JoinType.Round, 2.0, 64)
    plate = m.Manifold.extrude(outline, 0.075)
    holes = m.Manifold.cylinder(0.2, 0.048, 0.048, 128).translate((-0.11, 0.045, -0.05))
    holes = holes + m.Manifold.cylinder(0.2, 0.032, 0.032, 128).translate((0.03, -0.065, -0.05))
    slanted = m.Manifold.cylinder(0.3, 0.036, 0.036, 128, True).rotate((14.0, 9.0, 0.0)).translate((0.13, 0.05, 0.04))
    blind = m.Manifold.cylinder(0.2, 0.027, 0.027, 128).translate((-0.10, -0.075, 0.04))
    return from_solid("bored plate", plate - holes - slanted - blind)


def spindle() -> Body:
    """Axisymmetric: a turned baluster 0.9 m high with a flat foot, beads and a neck."""
    z = np.linspace(0.0, 1.0, 90)
    radius = 0.085 + 0.055 * np.sin(2.6 * np.pi * z + 0.5) * (1.0 - 0.5 * z) + 0.018 * np.sin(7.0 * np.pi * z)
    around = 2 * np.pi * np.arange(160) / 160
    x, y = (radius[:, None] * f(around) for f in (np.cos, np.sin))
    rings = np.stack([x, y, np.broadcast_to(0.9 * z[:, None], x.shape)], axis=2)
    return from_rings("spindle", rings, (0.0, 0.0, 0.0), (0.0, 0.0, 0.9))


def _lumpy(name: str, radii: tuple[float, float, float], waves: FloatArray, rings: int = 90, sides: int = 140) -> Body:
    """An ellipsoid whose radius is modulated by ``waves`` (k, 5): amplitude, then three wave numbers, then phase."""
    z = np.cos(np.linspace(np.pi, 0.0, rings + 2)[1:-1])
    around = 2 * np.pi * np.arange(sides) / sides
    flat = np.sqrt(1.0 - z * z)[:, None]
    sphere = np.stack([flat * np.cos(around), flat * np.sin(around), np.broadcast_to(z[:, None], (rings, sides))], 2)

    def shaped(unit: FloatArray) -> FloatArray:
        swell = 1.0 + sum(w[0] * np.sin(unit @ w[1:4] + w[4]) for w in waves)
        grown: FloatArray = unit * swell[..., None] * np.array(radii)
        return grown

    ends = shaped(np.array([[0.0, 0.0, -1.0], [0.0, 0.0, 1.0]]))
    return from_rings(name, shaped(sphere), ends[0].tolist(), ends[1].tolist())


def pebble() -> Body:
    """Organic: a lumpy boulder, 1.3 m long."""
    waves = np.array(
        [
            [0.11, 2.1, -1.3, 0.7, 0.4],
            [0.07, -1.1, 3.2, 2.0, 1.9],
            [0.05, 3.9, 1.7, -3.1, 0.2],
            [0.03, -5.2, 2.8, 4.4, 2.6],
        ]
    )
    return _lumpy("pebble", (0.62, 0.45, 0.36), waves)


def gourd() -> Body:
    """Organic, 0.35 m, with a waist; scanned 25 times denser at one end than at the other."""
    waves = np.array(
        [
            [0.20, 0.0, 0.0, 4.2, 1.1],
            [0.05, 3.1, 1.9, 0.6, 0.3],
            [0.04, -2.3, 3.4, -1.2, 2.2],
        ]
    )
    return _lumpy("gourd", (0.11, 0.10, 0.17), waves)


def bracket() -> Body:
    """Rounded and re-entrant: a bent arm of 0.6 m with two bosses, all edges rounded."""
    m = solid_modeller()
    hull = m.Manifold.batch_hull

    def ball(r: float, place: tuple[float, float, float]) -> object:
        return m.Manifold.sphere(r, 64).translate(place)

    arm = hull([ball(0.060, (0.0, 0.0, 0.0)), ball(0.045, (0.30, 0.02, 0.04))])
    arm = arm + hull([ball(0.045, (0.30, 0.02, 0.04)), ball(0.055, (0.42, 0.24, 0.0))])
    arm = arm + hull([ball(0.035, (0.05, 0.0, 0.02)), ball(0.040, (0.06, -0.02, 0.17))])
    return from_solid("bent arm", arm)


def near_symmetric(gap: float) -> Body:
    """A lumpy body of 0.7 m whose two lower principal moments differ by the share ``gap``, the third by 30 %.

    Any body stretched along its own principal axes keeps them; the stretches are solved for in closed form.
    """
    waves = np.array([[0.06, 3.1, 1.2, -2.0, 0.7], [0.05, -1.9, 2.7, 3.3, 1.4], [0.03, 4.1, -3.6, 1.5, 2.9]])
    body = _lumpy("near symmetric", (0.33, 0.33, 0.33), waves)
    body = body.moved(np.eye(3), (-centroid(body.moments())).tolist())
    second, axes = np.linalg.eigh(central_second(body.moments()))
    if np.linalg.det(axes) < 0:
        axes = axes * np.array([1.0, 1.0, -1.0])
    wanted = np.array([1.0, 1.0 + gap, 1.3])
    # Moments I = trace(S) - S: the second moments that give them, then the stretch of each axis, volume apart.
    spread = 0.5 * wanted.sum() - wanted
    stretch = np.sqrt(spread / spread.max() / second * second.max())
    along = body.vertices @ axes
    return Body(f"near symmetric, gap {100 * gap:g} %", along * (stretch / stretch.max()), body.faces)


def _standing(name: str, ring: Callable[[FloatArray, FloatArray], FloatArray], recess: float = 0.0) -> Body:
    """A body on the floor z = 0: rings ``ring(angle, t)`` (..., 3) from the floor (t = 0) to the top (t = 1).

    ``recess``: how deep the underside is hollowed in the middle, in metres; 0: flat.
    """
    t, angle = np.linspace(0.0, 1.0, 80), 2 * np.pi * np.arange(144) / 144
    rings = ring(angle[None, :], t[:, None])
    below = []
    middle = rings[0].mean(axis=0)
    for share in np.linspace(0.0, 1.0, 12)[1:-1]:
        inner = middle + share * (rings[0] - middle)
        inner[:, 2] = recess * (1.0 - share**2)
        below.append(inner)
    top = rings[-1].mean(axis=0)
    return from_rings(name, np.concatenate([np.array(below), rings]), (middle[0], middle[1], recess), top.tolist())


def column() -> Body:
    """Standing: a slightly leaning, tapered four-sided column 1.1 m high; its base is some 7 % of its area."""

    def ring(angle: FloatArray, t: FloatArray) -> FloatArray:
        r = (0.17 - 0.04 * t) / (np.abs(np.cos(angle)) ** 6 + np.abs(np.sin(angle)) ** 6) ** (1 / 6)
        return np.stack(np.broadcast_arrays(r * np.cos(angle) + 0.06 * t, 0.85 * r * np.sin(angle), 1.1 * t), axis=2)

    return _standing("column", ring)


def mound() -> Body:
    """Standing: a rough dome 0.8 m high; its base is some 17 % of its area."""

    def ring(angle: FloatArray, t: FloatArray) -> FloatArray:
        r = np.cos(0.47 * np.pi * t**1.3) * (
            0.24 + 0.02 * np.sin(3 * angle + 4 * t) + 0.012 * np.sin(7 * angle - 5 * t)
        )
        return np.stack(np.broadcast_arrays(r * np.cos(angle), 1.2 * r * np.sin(angle), 0.8 * t), axis=2)

    return _standing("mound", ring)


def drum() -> Body:
    """Standing: a low barrel 0.34 m high and 0.6 m across; its base is some 20 % of its area."""

    def ring(angle: FloatArray, t: FloatArray) -> FloatArray:
        r = 0.25 + 0.05 * np.sin(np.pi * t) + 0.004 * np.sin(9 * angle)
        return np.stack(np.broadcast_arrays(r * np.cos(angle), r * np.sin(angle), 0.34 * t), axis=2)

    return _standing("drum", ring)


def torso() -> Body:
    """Standing: a waisted, twisted piece 0.8 m high; its base is some 10 % of its area, dished 12 mm deep."""

    def ring(angle: FloatArray, t: FloatArray) -> FloatArray:
        r = 0.17 - 0.05 * np.sin(2.4 * np.pi * t) * (1 - 0.4 * t) - 0.05 * t
        oval = 1.0 + 0.25 * np.cos(2 * (angle - 1.1 * t))
        return np.stack(np.broadcast_arrays(r * oval * np.cos(angle), r * oval * np.sin(angle), 0.8 * t), axis=2)

    return _standing("torso", ring, recess=0.012)


BODIES: dict[str, Callable[[], Body]] = {
    **{f.__name__: f for f in (wedge, bowl, bored, spindle, pebble, gourd, bracket, column, mound, drum, torso)},
    **{f"gap{1000 * g:03.0f}": (lambda g=g: near_symmetric(g)) for g in (0.0, 0.005, 0.01, 0.02, 0.05)},  # type: ignore[misc]
}
"""Every body by its name in the table of cells; gap005: two moments 0.5 % apart."""


@cache
def body(name: str) -> Body:
    """One of :data:`BODIES`, made once."""
    return BODIES[name]()
