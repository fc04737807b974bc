"""Reads a point (three numbers and a unit) and a direction (three bare numbers)."""

from __future__ import annotations

import re
from typing import Final

import numpy as np

from scanmass.doubt import FloatArray
from scanmass.errors import UserFault
from scanmass.units.characters import screen
from scanmass.units.quantity import NUMBER, read_number
from scanmass.units.table import unit_named

_POINT: Final = re.compile(rf"({NUMBER})\s+({NUMBER})\s+({NUMBER})(?:\s*([^\d\s.+-].*))?", re.ASCII)
_POINT_FORM: Final = "write three numbers and one unit, like '120 0 300 mm'"
_DIRECTION_FORM: Final = "write three bare numbers, like '0 0 1'"


def parse_point(text: str) -> FloatArray:
    """The point (3,) that ``text`` states, in metres.

    Raises
    ------
    UserFault
        If it is not three numbers and a length unit.

    >>> parse_point("120 0 -300 mm").tolist()
    [0.12, 0.0, -0.3]
    """
    match = _POINT.fullmatch(screen(text))
    if match is None:
        raise UserFault(f"'{text}' is not a point", allowed=_POINT_FORM)
    *numbers, name = match.groups()
    try:
        unit = unit_named(name or "", ("length",))
    except UserFault as fault:
        raise UserFault(f"'{text}': {fault.seen}", allowed=fault.allowed) from None
    try:
        point = np.array([float(read_number(number) * unit.factor) for number in numbers])
    except OverflowError:
        point = np.full(3, np.inf)
    if np.abs(point).max() > 1e9:
        raise UserFault(f"'{text}' is farther than 1e9 m away", allowed="check the numbers and the unit")
    return point


def parse_direction(text: str) -> FloatArray:
    """The unit vector (3,) along the direction that ``text`` states.

    Raises
    ------
    UserFault
        If it is not three bare numbers, or all are zero.

    >>> parse_direction("0 3 4").tolist()
    [0.0, 0.6, 0.8]
    """
    match = _POINT.fullmatch(screen(text))
    if match is None:
        raise UserFault(f"'{text}' is not a direction", allowed=_DIRECTION_FORM)
    *numbers, unit = match.groups()
    if unit:
        raise UserFault(f"'{text}' has a unit; a direction has none", allowed=_DIRECTION_FORM)
    parts = [read_number(number) for number in numbers]
    greatest = max(abs(part) for part in parts)
    if greatest == 0:
        raise UserFault(f"'{text}' has no length", allowed=_DIRECTION_FORM)
    vector = np.array([float(part / greatest) for part in parts])
    unit_vector: FloatArray = vector / np.linalg.norm(vector)
    return unit_vector
