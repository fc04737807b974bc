"""Points on a sphere, and other people's writers."""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest


@dataclass(frozen=True)
class Ball:
    """600 points (n, 3) on a sphere of radius 100, their unit normals, and colours of 8 bits."""

    points: np.ndarray
    normals: np.ndarray
    colours: np.ndarray


@pytest.fixture(scope="session")
def ball() -> Ball:
    normals = np.random.default_rng(0).normal(size=(600, 3))
    normals /= np.linalg.norm(normals, axis=1)[:, None]
    return Ball(100 * normals, normals, np.round(127.5 * (normals + 1)).astype(np.uint8))


@pytest.fixture(scope="session")
def open3d() -> ModuleType:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        import open3d
    return open3d


@pytest.fixture(scope="session")
def open3d_files(ball: Ball, open3d: ModuleType, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder of the ball in every form of cloud that open3d writes."""
    folder = tmp_path_factory.mktemp("open3d")
    vector = open3d.utility.Vector3dVector
    cloud = open3d.geometry.PointCloud(vector(ball.points))
    cloud.normals, cloud.colors = vector(ball.normals), vector(ball.colours / 255.0)
    for name, options in (
        ("binary.ply", {}),
        ("ascii.ply", {"write_ascii": True}),
        ("binary.pcd", {}),
        ("compressed.pcd", {"compressed": True}),
        ("ascii.pcd", {"write_ascii": True}),
        ("plain.xyz", {}),
        ("counted.pts", {}),
    ):
        assert open3d.io.write_point_cloud(str(folder / name), cloud, **options)
    return folder
