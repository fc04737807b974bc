"""Clouds of closed forms and meshes, with normals as a scan would have them: fitted, and turned by the true ones."""

from __future__ import annotations

import numpy as np
from scipy.spatial import cKDTree

from scanmass.cloud.cloud import Cloud


def fitted_normals(points: np.ndarray, true: np.ndarray, k: int = 24) -> np.ndarray:
    """Least eigenvector of the k nearest points, on the side of the true normal."""
    tree = cKDTree(points)
    found = np.empty_like(points)
    for start in range(0, len(points), 50_000):
        near = points[tree.query(points[start : start + 50_000], k)[1]]
        near = near - near.mean(axis=1, keepdims=True)
        found[start : start + 50_000] = np.linalg.eigh(np.einsum("nki,nkj->nij", near, near))[1][:, :, 0]
    return found * np.where(np.einsum("ij,ij->i", found, true) < 0, -1.0, 1.0)[:, None]


def cloud_of(points: np.ndarray, true_normals: np.ndarray, noise: float = 0.0, seed: int = 0) -> Cloud:
    """One view with white noise of ``noise`` metres a coordinate."""
    n = len(points)
    noisy = points + np.random.default_rng(seed).normal(0.0, noise, points.shape)
    spacing = float(np.median(cKDTree(noisy).query(noisy, [2])[0]))
    one = np.ones(n, np.int32)
    scanner = np.full((1, 3), np.nan)
    return Cloud(noisy, one - 1, one, ("view",), scanner, spacing, fitted_normals(noisy, true_normals))


def on_mesh(vertices: np.ndarray, faces: np.ndarray, n: int, seed: int = 0) -> tuple[np.ndarray, np.ndarray]:
    """Points (n, 3) even over the area, and the normals there."""
    rng = np.random.default_rng(seed)
    a, b, c = (vertices[faces[:, k]] for k in range(3))
    cross = np.cross(b - a, c - a)
    area = np.linalg.norm(cross, axis=1)
    chosen = rng.choice(len(faces), n, p=area / area.sum())
    u, v = rng.random((2, n))
    beyond = u + v > 1
    u[beyond], v[beyond] = 1 - u[beyond], 1 - v[beyond]
    points = a[chosen] + u[:, None] * (b - a)[chosen] + v[:, None] * (c - a)[chosen]
    return points, cross[chosen] / area[chosen, None]


def on_sphere(n: int, seed: int = 0) -> np.ndarray:
    """Points (n, 3) even over the unit sphere: they are its normals too."""
    points = np.random.default_rng(seed).normal(size=(n, 3))
    return points / np.linalg.norm(points, axis=1)[:, None]


def on_frustum(n: int, base: float, top: float, height: float, seed: int = 0) -> tuple[np.ndarray, np.ndarray]:
    """Points on the side and the top of an upright cone frustum, its base (z = 0) missing, and normals."""
    rng = np.random.default_rng(seed)
    slant = np.hypot(height, base - top)
    side = int(n * (base + top) * slant / ((base + top) * slant + top**2))
    radius = np.sqrt(base**2 + rng.random(side) * (top**2 - base**2)) if base != top else np.full(side, base)
    z = rng.random(side) * height if base == top else (base - radius) / (base - top) * height
    turn, spin = rng.random(side) * 2 * np.pi, rng.random(n - side) * 2 * np.pi
    disc = top * np.sqrt(rng.random(n - side))
    lean = height / slant
    points = np.concatenate(
        [
            np.stack([radius * np.cos(turn), radius * np.sin(turn), z], axis=1),
            np.stack([disc * np.cos(spin), disc * np.sin(spin), np.full(n - side, height)], axis=1),
        ]
    )
    normals = np.stack([lean * np.cos(turn), lean * np.sin(turn), np.full(side, (base - top) / slant)], axis=1)
    return points, np.concatenate([normals, np.tile([0.0, 0.0, 1.0], (n - side, 1))])
