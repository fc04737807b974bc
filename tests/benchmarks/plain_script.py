"""What a user would write with open3d and trimesh alone: the thing to beat. No bounds, no checks."""

from __future__ import annotations

import time

import numpy as np
import open3d as o3d
import trimesh


def weigh(path: str, depth: int, density: float = 7200.0) -> tuple[float, dict[str, float]]:
    """Mass (kg, points in mm) and the seconds of each step."""
    seconds: dict[str, float] = {}
    start = time.perf_counter()

    def lap(step: str) -> None:
        nonlocal start
        now = time.perf_counter()
        seconds[step] = now - start
        start = now

    cloud = o3d.io.read_point_cloud(path)
    cloud, _ = cloud.remove_statistical_outlier(20, 2.0)
    lap("outliers")
    spacing = float(np.median(np.asarray(cloud.compute_nearest_neighbor_distance())))
    cloud.estimate_normals(o3d.geometry.KDTreeSearchParamHybrid(5 * spacing, 30))
    lap("normals")
    cloud.orient_normals_consistent_tangent_plane(12)
    lap("orientation")
    surface, _ = o3d.geometry.TriangleMesh.create_from_point_cloud_poisson(cloud, depth=depth)
    lap("poisson")
    mesh = trimesh.Trimesh(np.asarray(surface.vertices) / 1000, np.asarray(surface.triangles), process=False)
    mass = density * mesh.volume
    _ = mesh.center_mass, mesh.moment_inertia, mesh.principal_inertia_vectors
    lap("moments")
    return mass, seconds
