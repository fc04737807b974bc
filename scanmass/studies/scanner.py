"""A depth sensor that looks at a scene from one place: a range image, with the errors a real one has."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass import seeds
from scanmass.studies.ray_casting import Scene
from scanmass.studies.sensor_errors import (
    PERFECT,
    SensorErrors,
    image_field,
    lattice_field,
    mixed,
    small_rotation,
    white_noise,
)

FloatArray = npt.NDArray[np.float64]

STRAY = -1
"""The part number of a false return."""


@dataclass(frozen=True)
class Pose:
    """Where a sensor stands and looks, in metres, in the scene's frame; ``up`` is any direction that is up for it."""

    position: tuple[float, float, float]
    look_at: tuple[float, float, float]
    up: tuple[float, float, float] = (0.0, 0.0, 1.0)

    def rotation_scene_from_sensor(self) -> FloatArray:
        """Rotation (3, 3) with columns right, down and forward: the sensor looks along its own z.

        Raises
        ------
        ValueError
            If the sensor looks at itself, or straight along ``up``.
        """
        forward = np.subtract(self.look_at, self.position)
        right = np.cross(forward, self.up)
        if np.linalg.norm(right) < 1e-9 * np.linalg.norm(forward) or not forward.any():
            raise ValueError(f"a sensor at {self.position} cannot look at {self.look_at} with up {self.up}")
        forward = forward / np.linalg.norm(forward)
        right = right / np.linalg.norm(right)
        return np.stack([right, np.cross(forward, right), forward], axis=1)


@dataclass(frozen=True)
class Sensor:
    """A range camera of ``rows`` x ``columns`` square pixels; ``field_of_view``: rad, across the columns."""

    rows: int
    columns: int
    field_of_view: float
    errors: SensorErrors = PERFECT

    @property
    def pixel(self) -> float:
        """Tangent of the angle between neighbouring pixels at the middle of the image."""
        return 2.0 * float(np.tan(0.5 * self.field_of_view)) / self.columns

    def directions(self, offset: FloatArray | float = 0.0) -> FloatArray:
        """Unit directions (rows x columns, 3) in the sensor's frame, row by row.

        ``offset`` (rows x columns, 2) moves each ray by shares of a pixel, down and right.
        """
        row, column = np.divmod(np.arange(self.rows * self.columns), self.columns)
        place = np.stack([row - 0.5 * (self.rows - 1), column - 0.5 * (self.columns - 1)], axis=1) + offset
        rays = np.stack([place[:, 1] * self.pixel, place[:, 0] * self.pixel, np.ones(len(place))], axis=1)
        rays /= np.linalg.norm(rays, axis=1, keepdims=True)
        return rays


@dataclass(frozen=True)
class View:
    """The returns of one range image, in metres, in the frame the scene is registered in.

    ``points`` (n, 3); ``rows``, ``columns`` (n,) int32; ``part`` (n,) int32: the body hit, STRAY for false returns;
    ``pose``: where the sensor was believed to stand; ``grid_shape`` (rows, columns).
    """

    points: FloatArray
    rows: npt.NDArray[np.int32]
    columns: npt.NDArray[np.int32]
    part: npt.NDArray[np.int32]
    pose: Pose
    grid_shape: tuple[int, int]

    def keep(self, mask: npt.NDArray[np.bool_]) -> View:
        """The returns where ``mask`` (n,) is true."""
        return View(self.points[mask], self.rows[mask], self.columns[mask], self.part[mask], self.pose, self.grid_shape)

    def in_sensor_frame(self) -> FloatArray:
        """Points (n, 3) in the frame of the sensor at ``pose``."""
        rotation = self.pose.rotation_scene_from_sensor()
        local: FloatArray = (self.points - np.array(self.pose.position)) @ rotation
        return local


def look(scene: Scene, sensor: Sensor, pose: Pose, *, seed: int = 0, index: int = 0) -> View:
    """The range image of ``scene`` from ``pose``.

    Errors are drawn for the whole image whether or not a pixel has a return, from streams of (seed, kind of error,
    index): switching one kind on leaves the others as they were. ``index`` tells views apart.

    >>> from scanmass.studies.bodies import box
    >>> view = look(Scene([box("crate", (1.0, 1.0, 1.0))]), Sensor(3, 3, 0.1), Pose((0.0, -4.5, 0.0), (0.0, 0.0, 0.0)))
    >>> view.points[4].round(9).tolist(), len(view.points)
    ([0.0, -0.5, 0.0], 9)
    """
    errors = sensor.errors
    rotation = pose.rotation_scene_from_sensor()
    directions = sensor.directions() @ rotation.T
    origins = np.broadcast_to(np.array(pose.position), directions.shape)
    hits = scene.first_hits(origins, directions)
    ranges = hits.distance
    if errors.footprint > 0:
        ranges = _with_mixed_pixels(scene, sensor, rotation, origins, ranges, seed, index)
    seen = hits.found & (hits.cosine >= np.cos(errors.steepest))
    seen &= seeds.stream(seed, "scanner drop-outs", index).random(len(seen)) >= errors.drop_out
    ranges = np.where(seen, ranges, 0.0)
    ranges = ranges + _range_errors(sensor, pose, origins + ranges[:, None] * directions, hits.cosine, seed, index)
    part = np.where(seen, hits.part, STRAY).astype(np.int32)
    if errors.strays:
        pixels, places = _strays(errors, pose, len(ranges), seeds.stream(seed, "scanner strays", index))
        ranges[pixels], seen[pixels], part[pixels] = places, True, STRAY
    if errors.quantum > 0:
        ranges = errors.quantum * np.round(ranges / errors.quantum)
    points = origins + ranges[:, None] * directions
    points = _misregistered(points[seen], errors, pose, seeds.stream(seed, "scanner registration", index))
    row, column = np.divmod(np.flatnonzero(seen), sensor.columns)
    grid = (sensor.rows, sensor.columns)
    return View(points, row.astype(np.int32), column.astype(np.int32), part[seen], pose, grid)


def _with_mixed_pixels(
    scene: Scene,
    sensor: Sensor,
    rotation: FloatArray,
    origins: FloatArray,
    ranges: FloatArray,
    seed: int,
    index: int,
) -> FloatArray:
    rng = seeds.stream(seed, "scanner mixed pixels", index)
    offset = sensor.errors.footprint * (rng.random((len(ranges), 2)) - 0.5)
    beside = scene.first_hits(origins, sensor.directions(offset) @ rotation.T)
    return mixed(ranges, beside.distance, sensor.errors.mixing_jump, rng)


def _range_errors(
    sensor: Sensor, pose: Pose, true_points: FloatArray, cosine: FloatArray, seed: int, index: int
) -> FloatArray:
    errors = sensor.errors
    total = white_noise(errors, cosine, seeds.stream(seed, "scanner white noise", index))
    if errors.field_std > 0:
        rng = seeds.stream(seed, "scanner field", index)
        if errors.field_on == "object":
            field = lattice_field(true_points, errors.field_length, rng)
        else:
            pixel = sensor.pixel * float(np.linalg.norm(np.subtract(pose.look_at, pose.position)))
            field = image_field((sensor.rows, sensor.columns), errors.field_length / pixel, rng).ravel()
        total = total + errors.field_std * field
    return total + errors.axial_shift + errors.incidence_bias * cosine


def _strays(
    errors: SensorErrors, pose: Pose, pixels: int, rng: np.random.Generator
) -> tuple[npt.NDArray[np.int64], FloatArray]:
    """Pixels with a false return, and its range: from half way to the object to a third beyond it."""
    which = rng.choice(pixels, errors.strays, replace=False)
    distance = float(np.linalg.norm(np.subtract(pose.look_at, pose.position)))
    return which, distance * rng.uniform(0.5, 1.3, errors.strays)


def _misregistered(points: FloatArray, errors: SensorErrors, pose: Pose, rng: np.random.Generator) -> FloatArray:
    rotation = small_rotation(errors.rotation_std, rng)
    shift = errors.shift_std * rng.standard_normal(3)
    centre = np.array(pose.look_at)
    moved: FloatArray = (points - centre) @ rotation.T + centre + shift
    return moved
