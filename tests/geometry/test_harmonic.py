"""Harmonic maps and rims of regions."""

from __future__ import annotations

import numpy as np

from scanmass.geometry.harmonic import harmonic
from scanmass.geometry.loops import area_vector, rim_edges, untangled


def grid(n: int) -> tuple[np.ndarray, np.ndarray]:
    x, y = np.meshgrid(np.arange(n, dtype=float), np.arange(n, dtype=float), indexing="ij")
    cell = (np.arange(n - 1)[:, None] * n + np.arange(n - 1)).ravel()
    faces = np.concatenate([np.stack([cell, cell + n, cell + 1], 1), np.stack([cell + n, cell + n + 1, cell + 1], 1)])
    return np.stack([x.ravel(), y.ravel(), 0 * x.ravel()], axis=1), faces


def test_linear_functions_are_harmonic() -> None:
    vertices, faces = grid(9)
    rim = (vertices[:, :2] % 8 == 0).any(axis=1)
    start = vertices.copy()
    start[~rim] = 99.0
    # Each inner vertex of this grid is the mean of its six neighbours; a sparse solve of 49 unknowns keeps 1e-13.
    np.testing.assert_allclose(harmonic(faces, start, rim), vertices, atol=1e-12)


def test_what_nothing_holds_stays() -> None:
    vertices, faces = grid(3)
    np.testing.assert_array_equal(harmonic(faces, vertices, np.zeros(9, bool)), vertices)


def test_touching_regions_are_joined() -> None:
    vertices, faces = grid(5)
    # Two squares that share the middle vertex only.
    middles = vertices[faces].mean(axis=1)
    region = ((middles[:, :2] > 1) & (middles[:, :2] < 2)).all(axis=1)
    region |= ((middles[:, :2] > 2) & (middles[:, :2] < 3)).all(axis=1)
    starts = rim_edges(faces, region)[:, 0]
    assert len(np.unique(starts)) < len(starts)
    grown = untangled(faces, region)
    starts = rim_edges(faces, grown)[:, 0]
    assert len(np.unique(starts)) == len(starts)
    assert (grown | ~region).all()


def test_area_vector_depends_on_the_rim_alone() -> None:
    vertices, faces = grid(5)
    rim = (vertices[:, :2] % 4 == 0).any(axis=1)
    bumpy = vertices + np.where(rim, 0.0, np.random.default_rng(0).normal(size=25))[:, None] * [0, 0, 1.0]
    np.testing.assert_allclose(area_vector(bumpy, faces), [0, 0, 16], atol=1e-12)
