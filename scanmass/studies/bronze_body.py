"""A hollow cast standing figure, draped and without arms: an invented bronze with a closed core space."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy.interpolate import PchipInterpolator

from scanmass.studies.bodies import Body, from_rings, with_cavity

FloatArray = npt.NDArray[np.float64]

_HEIGHT = np.array([0.000, 0.004, 0.018, 0.045, 0.110, 0.240, 0.380, 0.480, 0.560, 0.640, 0.700, 0.735, 0.760])
_GIRTH = np.array([0.108, 0.118, 0.124, 0.120, 0.104, 0.093, 0.097, 0.084, 0.094, 0.107, 0.085, 0.050, 0.042])
_HEAD_HEIGHT = np.array([0.775, 0.795, 0.825, 0.855, 0.880, 0.893])
_HEAD_GIRTH = np.array([0.046, 0.060, 0.067, 0.060, 0.038, 0.014])
_TOP = 0.896
_FOOT = 0.090
"""Radius of the flat the figure stands on."""


def bronze_figure(turns: int = 120, levels: int = 150) -> Body:
    """The figure 0.9 m tall, its foot at z = 0: ``turns`` vertices round and ``levels`` up, in two closed shells.

    The wall is 5 mm at the head and 8 mm at the foot, with a slow change round it as of a core that lay askew.
    """
    rings = _surface(turns, levels)
    outer = from_rings("bronze figure", rings, (0.0, 0.0, 0.0), (*rings[-1, :, :2].mean(axis=0), _TOP))
    inner = _inset(outer, turns, levels)
    cavity = from_rings("core space", inner[:-2].reshape(levels, turns, 3), inner[-2], inner[-1])
    return with_cavity(outer, cavity)


def _surface(turns: int, levels: int) -> FloatArray:
    knots = np.concatenate([_HEIGHT, _HEAD_HEIGHT])
    girth = PchipInterpolator(knots, np.concatenate([_GIRTH, _HEAD_GIRTH]))
    # A few rings under the foot, then up: evenly in height, closer where the foot and the crown turn over.
    u = np.linspace(0.0, 1.0, levels - 3)
    height = knots[-1] * (u - 0.35 * np.sin(4 * np.pi * u) / (4 * np.pi) * (1 - u))
    radius = np.concatenate([_FOOT * np.array([0.34, 0.67, 1.0]), girth(height)])
    height = np.concatenate([np.zeros(3), height])
    angle = 2 * np.pi * np.arange(turns) / turns
    z, a = np.meshgrid(height, angle, indexing="ij")
    dress = np.clip((0.62 - z) / 0.5, 0.0, 1.0) * np.clip(z / 0.02, 0.0, 1.0)
    folds = 1.0 + dress * (0.055 * np.cos(9 * a + 11 * z) + 0.03 * np.cos(5 * a - 7 * z + 1.0))
    shoulders = 1.0 + 0.30 * np.exp(-(((z - 0.63) / 0.09) ** 2)) * np.cos(2 * a)
    face = 1.0 + 0.12 * np.exp(-(((z - 0.83) / 0.02) ** 2) - (np.angle(np.exp(1j * (a - np.pi / 2))) / 0.35) ** 2)
    r = radius[:, None] * folds * shoulders * face
    sway = np.clip(z / 0.1, 0.0, 1.0)
    x = r * np.cos(a) + sway * 0.022 * np.sin(2 * np.pi * z / 0.80)
    y = 0.82 * r * np.sin(a) + sway * 0.015 * np.sin(np.pi * z / 0.90)
    return np.stack([x, y, z], axis=2)


def _inset(outer: Body, turns: int, levels: int) -> FloatArray:
    corners = outer.vertices[outer.faces]
    weighted = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    normals = np.zeros_like(outer.vertices)
    for corner in range(3):
        np.add.at(normals, outer.faces[:, corner], weighted)
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    z = outer.vertices[:, 2]
    angle = np.arctan2(outer.vertices[:, 1], outer.vertices[:, 0])
    wall = 0.0075 - 0.0020 * z / _TOP + 0.0005 * np.cos(angle) * np.clip(z / 0.1, 0.0, 1.0)
    return outer.vertices - wall[:, None] * normals
