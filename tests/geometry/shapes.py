"""Triangulated solids for the tests, made from their definitions."""

from __future__ import annotations

import numpy as np


def revolved(profile: np.ndarray, n: int) -> tuple[np.ndarray, np.ndarray]:
    """A profile (k, 2) of radius and height, axis to axis from the bottom up, turned about z in n steps."""
    angle = 2 * np.pi * np.arange(n) / n
    rings = [np.stack([r * np.cos(angle), r * np.sin(angle), np.full(n, z)], axis=1) for r, z in profile[1:-1]]
    poles = np.array([[0, 0, profile[0, 1]], [0, 0, profile[-1, 1]]])
    vertices = np.concatenate([*rings, poles])
    bottom, top = len(vertices) - 2, len(vertices) - 1
    here, after = np.arange(n), (np.arange(n) + 1) % n
    faces = [np.stack([np.full(n, bottom), after, here], axis=1)]
    for k in range(len(rings) - 1):
        a, b, c, d = n * k + here, n * k + after, n * (k + 1) + after, n * (k + 1) + here
        faces += [np.stack([a, b, c], axis=1), np.stack([a, c, d], axis=1)]
    last = n * (len(rings) - 1)
    faces.append(np.stack([np.full(n, top), last + here, last + after], axis=1))
    return vertices, np.concatenate(faces)


def ring(centre_radius: float, tube_radius: float, n: int) -> tuple[np.ndarray, np.ndarray]:
    """A torus with n by n/2 quads, each two triangles."""
    m = n // 2
    u, v = np.meshgrid(2 * np.pi * np.arange(n) / n, 2 * np.pi * np.arange(m) / m, indexing="ij")
    reach = centre_radius + tube_radius * np.cos(v)
    vertices = np.stack([reach * np.cos(u), reach * np.sin(u), tube_radius * np.sin(v)], axis=-1).reshape(-1, 3)
    i, j = np.meshgrid(np.arange(n), np.arange(m), indexing="ij")
    a, b = i * m + j, (i + 1) % n * m + j
    c, d = (i + 1) % n * m + (j + 1) % m, i * m + (j + 1) % m
    faces = np.concatenate([np.stack([a, b, c], -1).reshape(-1, 3), np.stack([a, c, d], -1).reshape(-1, 3)])
    return vertices, faces


def half_profile(curve: np.ndarray) -> np.ndarray:
    """A profile closed to the axis at both ends."""
    return np.concatenate([[[0.0, curve[0, 1]]], curve, [[0.0, curve[-1, 1]]]])


BOX_FACES = np.array(
    [[0, 2, 1], [0, 3, 2], [4, 5, 6], [4, 6, 7], [0, 1, 5], [0, 5, 4], [1, 2, 6], [1, 6, 5], [2, 3, 7], [2, 7, 6],
     [3, 0, 4], [3, 4, 7]]
)  # fmt: skip


def block(low: list[float], high: list[float]) -> tuple[np.ndarray, np.ndarray]:
    """An axis-aligned box as twelve triangles."""
    (a, b, c), (d, e, f) = low, high
    vertices = np.array([[a, b, c], [d, b, c], [d, e, c], [a, e, c], [a, b, f], [d, b, f], [d, e, f], [a, e, f]])
    return vertices.astype(float), BOX_FACES
