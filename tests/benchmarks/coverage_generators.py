"""Scans of the coverage study, with planted errors. Nothing here is shared with the fit of the noise.

Every scan is ray-cast from stations round the body, with what a range camera does to it (`scanmass.studies.scanner`:
noise that grows with incidence, quantisation, mixed pixels, occlusion, strays, drop-outs). On top come, per view, a
smooth field (cubic splines on a random lattice), stripes across the range image, a low-order warp, and a wrong pose.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cache

import numpy as np
import numpy.typing as npt
from scipy.spatial import ConvexHull

from scanmass import seeds
from scanmass.studies.bodies import Body, box
from scanmass.studies.ray_casting import Scene
from scanmass.studies.scanner import Pose, Sensor, View, look
from scanmass.studies.sensor_errors import SensorErrors, lattice_field, small_rotation

FloatArray = npt.NDArray[np.float64]
_FAR = 4.0
"""Distance of the stations from the body's middle, in its sizes."""


@dataclass(frozen=True)
class Planted:
    """Errors of one cell, as shares of the body's size (longest side of its box) but for angles, in radians.

    ``white``, ``growth``, ``quantum``, ``footprint``, ``strays``, ``axial``, ``cosine``: as in SensorErrors;
    ``field``, ``length``: of the smooth error of each view along its rays; ``common``: the same in all views instead,
    along the surface's normals, as a declared noise is;
    ``shift``, ``turn``: of each view's pose; ``bad``: this many times more field, shift and turn in the first view;
    ``stripes``, ``warp``: std of a sinusoid over the range image, of a polynomial of degree three over it;
    ``scale``: std of true over scanned length; ``scale_limit``: anywhere within this limit instead; ``offset_limit``:
    the surface lies off by anything within this, everywhere alike; ``uneven``: ratio of densities from one end to the
    other; ``own_frames``: every view is given in a frame of its own.
    """

    white: float = 0.0005
    growth: float = 0.0
    quantum: float = 0.0
    footprint: float = 0.0
    strays: int = 0
    axial: float = 0.0
    cosine: float = 0.0
    field: float = 0.0
    length: float = 0.07
    common: bool = False
    shift: float = 0.0
    turn: float = 0.0
    bad: float = 1.0
    stripes: float = 0.0
    warp: float = 0.0
    scale: float = 0.0
    scale_limit: float = 0.0
    offset_limit: float = 0.0
    uneven: float = 1.0
    own_frames: bool = False


@dataclass(frozen=True)
class Simulated:
    """Views of one scan in metres, in the first one's frame, and the true ``body`` there; ``size``: its longest side
    before it was turned; ``facing``: root mean square of the cosine of incidence, which the surface feels of an error
    along the ray.
    """

    views: tuple[View, ...]
    body: Body
    size: float
    facing: float


def simulate(
    body: Body,
    planted: Planted,
    *,
    views: int,
    stations: int,
    points: int,
    seed: int,
    standing: bool = False,
    floor: bool = False,
) -> Simulated:
    """One scan: ``views`` views of ``stations`` stations each and about ``points`` points each.

    ``standing``: the body stands on the floor, only turned about the upright, and no station sees it from below;
    else it floats, turned at random, with stations all round it. ``floor``: the floor is left in the scan.
    """
    rng = seeds.stream(seed, "coverage setting")
    middle = 0.5 * (body.vertices.min(axis=0) + body.vertices.max(axis=0))
    size = float(np.ptp(body.vertices, axis=0).max())
    turn = _upright(rng) if standing else _any_turn(rng)
    place = rng.uniform(-1.0, 1.0, 3)
    placed = body.moved(turn, (place - turn @ middle).tolist())
    looks = [_from(place, size, d) for d in _directions(views * stations, standing, rng)]
    # Where the floor's returns are cut away, as an operator does, it still hides what stands on it.
    ground = [box("floor", (20.0, 20.0, 0.02), (0.0, 0.0, placed.vertices[:, 2].min() - 0.01))] if standing else []
    scene = Scene([placed, *ground])
    sensor = _sensor(planted, size, body, points // stations)
    # Interleaved, so that each view is spread all round.
    taken = [
        [_one_look(scene, sensor, looks[k], planted, placed, seed, k, floor) for k in range(v, len(looks), views)]
        for v in range(views)
    ]
    declared = seeds.stream(seed, "coverage scale")
    scale = planted.scale * float(declared.standard_normal()) + planted.scale_limit * declared.uniform(-1.0, 1.0)
    merged = [_with_errors(one, scene, planted, size, scale, place, seed, v) for v, one in enumerate(taken)]
    return Simulated(tuple(merged), placed, size, _facing(scene, taken))


def _facing(scene: Scene, taken: list[list[View]]) -> float:
    """Root mean square of the cosine of incidence over about a hundred points of each look."""
    cosines = []
    for look_at in (one for looks in taken for one in looks):
        points = look_at.points[:: max(1, len(look_at.points) // 100)]
        rays = points - np.array(look_at.pose.position)
        across = np.einsum("ij,ij->i", rays, scene.nearest(points)[1])
        cosines.append(across / np.linalg.norm(rays, axis=1))
    return float(np.sqrt(np.mean(np.concatenate(cosines) ** 2)))


def _one_look(
    scene: Scene, sensor: Sensor, pose: Pose, planted: Planted, body: Body, seed: int, index: int, floor: bool
) -> View:
    view = look(scene, sensor, pose, seed=seed, index=index)
    view = view if floor else view.keep(view.part != 1)
    if planted.uneven > 1.0:
        # Thinner and thinner along the body's own length.
        along = np.linalg.svd(body.vertices - body.vertices.mean(axis=0), full_matrices=False)[2][0]
        reach = body.vertices @ along
        t = np.clip((view.points @ along - reach.min()) / np.ptp(reach), 0.0, 1.0)
        chosen = seeds.stream(seed, "coverage thinning", index).random(len(t)) < planted.uneven**-t
        view = view.keep(chosen)
    return view


def _sensor(planted: Planted, size: float, body: Body, points: int) -> Sensor:
    """A camera that holds the body from any side, with pixels for about ``points`` returns."""
    errors = SensorErrors(
        white_std=planted.white * size,
        incidence_growth=planted.growth,
        quantum=planted.quantum * size,
        footprint=planted.footprint,
        mixing_jump=0.01 * size,
        axial_shift=planted.axial * size,
        incidence_bias=planted.cosine * size,
        steepest=np.radians(82.0),
        strays=planted.strays,
    )
    middle = 0.5 * (body.vertices.min(axis=0) + body.vertices.max(axis=0))
    radius = 1.05 * float(np.linalg.norm(body.vertices - middle, axis=1).max())
    # Seen from all sides a convex body shows a quarter of its surface on average (Cauchy).
    filled = 0.25 * ConvexHull(body.vertices).area / (2.0 * radius) ** 2
    kept = (1.0 - 1.0 / planted.uneven) / np.log(planted.uneven) if planted.uneven > 1.0 else 1.0
    side = int(np.ceil(np.sqrt(points / (filled * kept))))
    return Sensor(side, side, 2.0 * float(np.arctan(radius / (_FAR * size))), errors)


def _with_errors(
    looks: list[View], scene: Scene, planted: Planted, size: float, scale: float, place: FloatArray, seed: int, v: int
) -> View:
    """The looks of one view as one, with the errors of the whole view."""
    points = np.concatenate([one.points for one in looks])
    worse = planted.bad if v == 0 else 1.0
    error = np.zeros(len(points))
    if planted.common:
        along = scene.nearest(points)[1]
        error += planted.offset_limit * seeds.stream(seed, "coverage offset").uniform(-1.0, 1.0)
    else:
        along = np.concatenate([one.points - np.array(one.pose.position) for one in looks])
        along /= np.linalg.norm(along, axis=1, keepdims=True)
    if planted.field > 0.0:
        rng = seeds.stream(seed, "coverage field", 0 if planted.common else v)
        error += worse * planted.field * lattice_field(points / size, planted.length, rng)
    if planted.stripes > 0.0 or planted.warp > 0.0:
        across = np.concatenate([_across(one, size) for one in looks])
        rng = seeds.stream(seed, "coverage image", v)
        error += worse * (planted.stripes * _stripes(across, rng) + planted.warp * _warp(across, rng))
    points = points + size * error[:, None] * along
    rng = seeds.stream(seed, "coverage pose", v)
    turn = small_rotation(worse * planted.turn, rng)
    points = (points - place) @ turn.T + place + worse * planted.shift * size * rng.standard_normal(3)
    points = place + (points - place) / (1.0 + scale)
    if planted.own_frames and v > 0:
        rng = seeds.stream(seed, "coverage frame", v)
        points = points @ _any_turn(rng).T + rng.uniform(-1.0, 1.0, 3)
    first = looks[0]
    cells = np.concatenate([one.rows for one in looks]), np.concatenate([one.columns for one in looks])
    return View(points, *cells, np.concatenate([one.part for one in looks]), first.pose, first.grid_shape)


def _across(view: View, size: float) -> FloatArray:
    """Places (n, 2) over the range image in body sizes, from its middle."""
    half = 0.5 * np.array(view.grid_shape)
    pixels = np.stack([view.rows, view.columns], axis=1) + 0.5 - half
    local = view.in_sensor_frame()
    pixel = float(np.median(np.abs(local[:, 0]) / np.maximum(np.abs(pixels[:, 1]), 0.5))) / size
    across: FloatArray = pixels * pixel
    return across


def _stripes(across: FloatArray, rng: np.random.Generator) -> FloatArray:
    """A sinusoid of unit variance, 0.1 to 0.25 of the size from crest to crest, in any direction."""
    heading, phase = rng.uniform(0.0, 2.0 * np.pi, 2)
    wave = 2.0 * np.pi / rng.uniform(0.10, 0.25)
    stripes: FloatArray = np.sqrt(2.0) * np.sin(wave * (across @ np.array([np.cos(heading), np.sin(heading)])) + phase)
    return stripes


def _warp(across: FloatArray, rng: np.random.Generator) -> FloatArray:
    """A polynomial of degrees one to three, about unit variance over the image."""
    x, y = 2.0 * across.T
    basis = np.stack([x, y, x * x - 0.33, x * y, y * y - 0.33, x**3, x * x * y, x * y * y, y**3], axis=1)
    weights = rng.standard_normal(9)
    warp: FloatArray = basis @ weights / np.sqrt(np.sum(weights**2 * np.var(_UNIT_BASIS, axis=0)))
    return warp


def _unit_basis() -> FloatArray:
    side = np.linspace(-1.0, 1.0, 41)
    x, y = (g.ravel() for g in np.meshgrid(side, side))
    inside = x * x + y * y <= 1.0
    x, y = x[inside], y[inside]
    return np.stack([x, y, x * x - 0.33, x * y, y * y - 0.33, x**3, x * x * y, x * y * y, y**3], axis=1)


_UNIT_BASIS = _unit_basis()


def _any_turn(rng: np.random.Generator) -> FloatArray:
    """A rotation (3, 3), every one as likely (QR of normal numbers)."""
    q, r = np.linalg.qr(rng.standard_normal((3, 3)))
    q = q * np.sign(np.diag(r))
    return q if np.linalg.det(q) > 0 else -q


def _upright(rng: np.random.Generator) -> FloatArray:
    angle = rng.uniform(0.0, 2.0 * np.pi)
    c, s = np.cos(angle), np.sin(angle)
    return np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])


def _from(place: FloatArray, size: float, direction: FloatArray) -> Pose:
    x, y, z = (float(c) for c in place + _FAR * size * direction)
    up = (0.0, 0.0, 1.0) if abs(direction[2]) < 0.9 else (1.0, 0.0, 0.0)
    return Pose((x, y, z), (float(place[0]), float(place[1]), float(place[2])), up)


def _directions(n: int, standing: bool, rng: np.random.Generator) -> FloatArray:
    """Unit directions (n, 3) of stations: all round, or from 8 to 60 degrees above the floor."""
    if not standing:
        return _spread(n)
    azimuth = 2.0 * np.pi * (np.arange(n) / n) + rng.uniform(0.0, 2.0 * np.pi)
    height = np.radians(np.where(np.arange(n) % 2 == 0, 12.0, 50.0))
    return np.stack([np.cos(height) * np.cos(azimuth), np.cos(height) * np.sin(azimuth), np.sin(height)], axis=1)


@cache
def _spread(n: int) -> FloatArray:
    """Unit directions (n, 3) as far from each other as charges on a sphere would settle; the same for every scan."""
    rng = np.random.default_rng(7)
    best, least = np.zeros((n, 3)), np.inf
    for _ in range(3):
        d = rng.standard_normal((n, 3))
        for step in range(400):
            d /= np.linalg.norm(d, axis=1, keepdims=True)
            apart = d[:, None] - d[None]
            distance = np.linalg.norm(apart, axis=2) + np.eye(n)
            d = d + 0.2 / n * 0.995**step * (apart / distance[..., None] ** 3).sum(axis=1)
        d /= np.linalg.norm(d, axis=1, keepdims=True)
        energy = float((1.0 / (np.linalg.norm(d[:, None] - d[None], axis=2) + np.eye(n))).sum())
        if energy < least:
            best, least = d, energy
    return best


def merged_into_one(scan: Simulated) -> Simulated:
    """The same scan as one cloud without views."""
    first = scan.views[0]
    every = View(
        np.concatenate([v.points for v in scan.views]),
        np.concatenate([v.rows for v in scan.views]),
        np.concatenate([v.columns for v in scan.views]),
        np.concatenate([v.part for v in scan.views]),
        first.pose,
        first.grid_shape,
    )
    return replace(scan, views=(every,))
