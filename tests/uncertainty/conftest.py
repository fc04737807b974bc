"""Builders of surfaces and clouds for the tests of bounds."""

import numpy as np
import pytest
from threadpoolctl import threadpool_limits

from scanmass.cloud.cloud import Cloud
from scanmass.surface.surface import Surface


def _surface_of(mesh, inferred=None, **changes):
    faces = np.array(mesh.faces, np.int64)
    return Surface(
        np.array(mesh.vertices),
        faces,
        np.zeros(len(faces), bool) if inferred is None else inferred,
        changes.pop("source", "points"),
        0.01,
        changes.pop("underside", "seen"),
        1,
        **changes,
    )


def _cloud_of(points, view, scanners=None, count=None):
    views = int(view.max()) + 1
    return Cloud(
        points,
        view.astype(np.int32),
        np.ones(len(points), np.int32) if count is None else count.astype(np.int32),
        tuple(f"view {v}" for v in range(views)),
        np.full((views, 3), np.nan) if scanners is None else scanners,
        0.01,
    )


def _on_sphere(rng, n):
    points = rng.normal(size=(n, 3))
    return points / np.linalg.norm(points, axis=1)[:, None]


@pytest.fixture
def surface_of():
    return _surface_of


@pytest.fixture
def cloud_of():
    return _cloud_of


@pytest.fixture
def on_sphere():
    return _on_sphere


@pytest.fixture(autouse=True)
def one_thread():
    """As in a measurement: small matrices wait for each other when threads share them."""
    with threadpool_limits(1):
        yield
