"""Poses of views in a pipeline file: a matrix or a quaternion, one text a view."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass import units
from scanmass.errors import Note
from scanmass.pipeline.models_read import Reader, refusal, shown

FloatArray = npt.NDArray[np.float64]

ROUNDED = 2e-3
"""A printed rotation may be off by so much in any number; it is made exact."""


@dataclass(frozen=True)
class GivenPose:
    """A pose as it was written: 16 numbers of a matrix, row by row, or 7 of a quaternion and translation, in metres."""

    numbers: tuple[float, ...]

    def matrix(self) -> FloatArray:
        """(4, 4): p_object = R p_view + t."""
        if len(self.numbers) == 16:
            given = np.array(self.numbers).reshape(4, 4)
            return rigid(given[:3, :3], given[:3, 3])
        return rigid(rotation_of(self.numbers[:4]), np.array(self.numbers[4:]))


def rotation_of(quaternion: Any) -> FloatArray:
    """Rotation (3, 3) of a quaternion w x y z of any length."""
    w, x, y, z = np.asarray(quaternion, np.float64) / np.linalg.norm(quaternion)
    return np.array(
        [
            [1 - 2 * (y * y + z * z), 2 * (x * y - w * z), 2 * (x * z + w * y)],
            [2 * (x * y + w * z), 1 - 2 * (x * x + z * z), 2 * (y * z - w * x)],
            [2 * (x * z - w * y), 2 * (y * z + w * x), 1 - 2 * (x * x + y * y)],
        ]
    )


def rigid(rotation: FloatArray, shift: FloatArray) -> FloatArray:
    """The motion (4, 4) with the rotation nearest to a printed one."""
    u, _, vt = np.linalg.svd(rotation)
    pose = np.eye(4)
    pose[:3, :3], pose[:3, 3] = u @ vt, shift
    return pose


@dataclass(frozen=True)
class PoseText(Reader):
    """A pose from a view's frame to the object's, p_object = R p_view + t."""

    @property
    def allowed(self) -> str:
        return (
            "from the view to the object, p_object = R p_view + t: 16 numbers of a 4x4 matrix, row by row, or 7 "
            "numbers, quaternion w x y z then translation; and the length unit of the translation"
        )

    def read(self, text: str, notes: list[Note]) -> GivenPose:
        words = text.replace(",", " ").split()
        unit = words.pop() if words and not _is_number(words[-1]) else None
        if len(words) not in (7, 16) or not all(_is_number(word) for word in words):
            raise refusal(f"{shown(text)} is no pose", self.rule)
        if unit is None:
            raise refusal(f"{shown(text)} has no unit", "end it with the length unit of the translation, such as mm")
        metres = units.metres_per(unit)
        numbers = np.array([float(word) for word in words])
        if len(numbers) == 7:
            _check_quaternion(numbers[:4])
            numbers[4:] *= metres
        else:
            _check_matrix(numbers.reshape(4, 4))
            numbers[[3, 7, 11]] *= metres
        return GivenPose(tuple(float(x) for x in numbers))

    def write(self, value: Any) -> str:
        return " ".join(repr(x + 0.0).removesuffix(".0") for x in value.numbers) + " m"


def _is_number(word: str) -> bool:
    return re.fullmatch(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?", word, re.ASCII) is not None


def _check_quaternion(q: FloatArray) -> None:
    length = float(np.linalg.norm(q))
    if abs(length - 1.0) > ROUNDED:
        raise refusal(f"a quaternion of length {length:.4g}", "w x y z of length 1, before the translation")


def _check_matrix(m: FloatArray) -> None:
    if not np.allclose(m[3], [0.0, 0.0, 0.0, 1.0], atol=1e-9):
        if np.allclose(m[:3, 3], 0.0) and m[3, 3] == 1.0:
            raise refusal("a matrix written column by column", "write it row by row: the translation ends rows 1 to 3")
        raise refusal("a matrix whose last row is not 0 0 0 1", "16 numbers, row by row")
    turn = m[:3, :3]
    if float(np.abs(turn @ turn.T - np.eye(3)).max()) > 3.0 * ROUNDED:
        raise refusal(
            "a matrix whose first three columns are no rotation", "a rotation without scale, and a translation"
        )
    if float(np.linalg.det(turn)) < 0.0:
        raise refusal("a matrix that mirrors", "a rotation: exchange the axes in the scan instead")
