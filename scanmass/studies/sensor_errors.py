"""What a real depth sensor does to a true range. Everything is off by default, and everything is seeded.

These are descriptions of the instrument, made without looking at how doubt is fitted: a smooth field comes from
splines on a random lattice or from a blurred image, never from a covariance function.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt
from scipy.ndimage import gaussian_filter, gaussian_filter1d

FloatArray = npt.NDArray[np.float64]

_STEEPEST = 0.1
"""Noise stops growing at this cosine of incidence (84 degrees): beyond, a sensor gives no return."""
_NODES = 64
"""Lattice nodes along each side before the smooth field repeats itself."""


@dataclass(frozen=True)
class SensorErrors:
    """Errors of one sensor, in metres and radians.

    ``white_std``: range noise of each pixel by itself, at normal incidence; ``incidence_growth`` g: that noise times
    ``cos ** -g``. ``quantum``: ranges are multiples of it. ``footprint``: width of a pixel's spot in pixels: where it
    straddles a depth jump of more than ``mixing_jump`` the range is a mixture of both. ``field_std``,
    ``field_length``: a smooth error with that standard deviation, whose values at places a distance l apart go
    together as exp(-1/2), on the object or across the image. ``rotation_std``, ``shift_std``: error per axis of a
    view's registration, about the point looked at. ``axial_shift``: added to all ranges of all views.
    ``incidence_bias``: ranges are too long by it times ``cos`` of incidence. ``drop_out``: share of returns lost.
    ``steepest``: no return beyond this incidence. ``strays``: false returns a view, anywhere along their rays.
    """

    white_std: float = 0.0
    incidence_growth: float = 0.0
    quantum: float = 0.0
    footprint: float = 0.0
    mixing_jump: float = 0.003
    field_std: float = 0.0
    field_length: float = 0.02
    field_on: Literal["object", "image"] = "object"
    rotation_std: float = 0.0
    shift_std: float = 0.0
    axial_shift: float = 0.0
    incidence_bias: float = 0.0
    drop_out: float = 0.0
    steepest: float = np.pi / 2
    strays: int = 0


PERFECT = SensorErrors()


def white_noise(errors: SensorErrors, cosine: FloatArray, rng: np.random.Generator) -> FloatArray:
    """Range errors (n,) of pixels that see the surface at ``cosine`` (n,) of incidence, each by itself."""
    growth = np.maximum(cosine, _STEEPEST) ** -errors.incidence_growth
    noise: FloatArray = errors.white_std * growth * rng.standard_normal(len(cosine))
    return noise


def mixed(near: FloatArray, beside: FloatArray, jump: float, rng: np.random.Generator) -> FloatArray:
    """Ranges (n,) where the spot's second half ``beside`` (n,) lies more than ``jump`` off: anywhere between.

    Infinite ranges (no return) mix with nothing.
    """
    weight = rng.random(len(near))
    both = np.isfinite(near) & np.isfinite(beside)
    step = np.where(both, beside, 0.0) - np.where(both, near, 0.0)
    return np.where(both & (np.abs(step) > jump), near + weight * step, near)


def lattice_field(points: FloatArray, length: float, rng: np.random.Generator) -> FloatArray:
    """A smooth random field of unit variance at points (n, 3): cubic splines on a lattice of random numbers.

    A spline of node distance h passes white noise on with a reach of variance h^2/3, so values d apart go together
    as a bell of variance 2 h^2/3: h = length sqrt(3/2). The lattice is turned and moved at random, and repeats
    after 64 nodes: 78 lengths.
    """
    turn, _ = np.linalg.qr(rng.standard_normal((3, 3)))
    local = points @ turn.T / (length * np.sqrt(1.5)) + _NODES * rng.random(3)
    nodes = rng.standard_normal((_NODES, _NODES, _NODES))
    base = np.floor(local).astype(np.int64)
    weights = [_spline_weights(local[:, k] - base[:, k]) for k in range(3)]
    power = np.prod([np.sum(w * w, axis=0) for w in weights], axis=0)
    total = np.zeros(len(points))
    for step in np.ndindex(4, 4, 4):
        x, y, z = (base + step).T % _NODES
        total += weights[0][step[0]] * weights[1][step[1]] * weights[2][step[2]] * nodes[x, y, z]
    field: FloatArray = total / np.sqrt(power)
    return field


def _spline_weights(t: FloatArray) -> FloatArray:
    rest = 1.0 - t
    return np.stack([rest**3, 3 * t**3 - 6 * t**2 + 4, 3 * rest**3 - 6 * rest**2 + 4, t**3]) / 6.0


def image_field(shape: tuple[int, int], length: float, rng: np.random.Generator) -> FloatArray:
    """A smooth random field of unit variance over a sensor image; ``length`` in pixels as in :func:`lattice_field`.

    White noise blurred by a bell of standard deviation length / sqrt 2, whose neighbours then go together as a bell
    of standard deviation ``length``; the image wraps round.
    """
    spread = length / np.sqrt(2.0)
    blurred = gaussian_filter(rng.standard_normal(shape), spread, mode="wrap")
    # What the blur leaves of unit variance: its weights' squares, along each side of the image.
    left = [float(np.sum(gaussian_filter1d(np.eye(1, n)[0], spread, mode="wrap") ** 2)) for n in shape]
    field: FloatArray = blurred / np.sqrt(left[0] * left[1])
    return field


def small_rotation(std: float, rng: np.random.Generator) -> FloatArray:
    """A rotation matrix (3, 3) by independent normal angles of ``std`` rad about the three axes (Rodrigues)."""
    angles = std * rng.standard_normal(3)
    size = float(np.linalg.norm(angles))
    if size == 0.0:
        return np.eye(3)
    x, y, z = angles / size
    cross = np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])
    rotation: FloatArray = np.eye(3) + np.sin(size) * cross + (1.0 - np.cos(size)) * cross @ cross
    return rotation
