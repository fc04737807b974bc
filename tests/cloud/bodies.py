"""Bodies with known normals, sampled, and the scenes they stand in."""

from __future__ import annotations

import numpy as np
import trimesh
from scipy.spatial import ConvexHull, Delaunay

from scanmass.cloud.cloud import Cloud
from scanmass.geometry.neighbours import median_spacing

NOISE = 0.002
_make = trimesh.creation


def _moved(mesh: trimesh.Trimesh, x: float, y: float, z: float) -> trimesh.Trimesh:
    mesh = mesh.copy()
    mesh.apply_translation((x, y, z))
    return mesh


def body(name: str) -> trimesh.Trimesh:
    """A body about 1 m in size."""
    if name == "box":
        return _make.box((1, 0.7, 0.5))
    if name == "short cylinder":
        return _make.cylinder(0.5, 0.3, sections=128)
    if name == "plate":
        return _make.box((1, 0.7, 0.02))
    if name == "torus":
        return _make.torus(0.35, 0.15)
    if name == "bracket":
        return _joined(_make.box((1, 0.6, 0.08)), _moved(_make.box((0.08, 0.6, 0.7)), -0.46, 0, 0.35))
    if name == "plate with boss":
        return _joined(_make.box((1, 1, 0.1)), _moved(_make.cylinder(0.15, 0.3, sections=64), 0, 0, 0.2))
    if name == "bowl":
        outer, inner = _make.icosphere(5, 0.5), _make.icosphere(5, 0.48)
        return _cut(outer, inner, _moved(_make.box((2, 2, 1)), 0, 0, 0.55))
    if name == "casting":
        solid = _joined(_make.box((1, 0.6, 0.15)), _moved(_make.cylinder(0.2, 0.4), 0, 0, 0.2))
        bores = [_moved(_make.cylinder(0.05, 2), x, 0.2, 0) for x in (-0.35, 0.35)]
        return _cut(solid, _make.cylinder(0.12, 2), *bores)
    if name == "hollow sphere":
        inner = _make.icosphere(5, 0.3)
        inner.invert()
        return trimesh.util.concatenate([_make.icosphere(5, 0.5), inner])
    if name == "thin closed box":
        inner = _make.box((0.96, 0.66, 0.46))
        inner.invert()
        return trimesh.util.concatenate([_make.box((1, 0.7, 0.5)), inner])
    if name == "open base":
        mesh = _make.box((0.5, 0.5, 1))
        mesh.update_faces(mesh.face_normals[:, 2] > -0.9)
        return mesh
    raise ValueError(name)


def _joined(*meshes: trimesh.Trimesh) -> trimesh.Trimesh:
    return trimesh.boolean.union(list(meshes), engine="manifold")


def _cut(*meshes: trimesh.Trimesh) -> trimesh.Trimesh:
    return trimesh.boolean.difference(list(meshes), engine="manifold")


def sampled(mesh: trimesh.Trimesh, n: int, seed: int = 0, noise: float = NOISE) -> tuple[np.ndarray, np.ndarray]:
    """Points (n, 3) with noise along their true normals (n, 3)."""
    points, faces = trimesh.sample.sample_surface(mesh, n, seed=seed)
    normals = np.array(mesh.face_normals[faces])
    rng = np.random.default_rng([seed, 1])  # not the stream that chose the points
    return np.array(points) + noise * rng.normal(size=(n, 1)) * normals, normals


def cloud_of(points: np.ndarray, view: np.ndarray | None = None, scanners: np.ndarray | None = None, **more) -> Cloud:
    """A cloud of single points, one view without scanner unless told."""
    scanners = np.full((1, 3), np.nan) if scanners is None else scanners
    return Cloud(
        points=points,
        view=np.zeros(len(points), np.int32) if view is None else view.astype(np.int32),
        count=np.ones(len(points), np.int32),
        view_names=tuple(f"view {i}" for i in range(len(scanners))),
        scanners=scanners,
        spacing=median_spacing(points),
        **more,
    )


TURN = trimesh.transformations.rotation_matrix(0.7, (1, 2, 0.3))[:3, :3]
SHIFT = np.array([3.0, 4.0, 5.0])


def standing(name: str, on: str, n: int) -> tuple[np.ndarray, np.ndarray]:
    """A body on a floor, a table or a turntable's disc, and which points (m,) are the body's; turned by TURN.

    What the body covers of the support, and the body's underside, are not seen. The support is at height 0.
    """
    mesh = body(name)
    mesh.apply_translation((0, 0, -mesh.bounds[0, 2]))
    points, normals = sampled(mesh, n)
    points = points[~((normals[:, 2] < -0.9) & (points[:, 2] < 0.01))]
    rng = np.random.default_rng(1)
    reach = np.linalg.norm(mesh.vertices[:, :2], axis=1).max()
    half = {"floor": 4.0, "table": 1.4, "disc": 1.15}[on] * reach
    density = n / mesh.area
    flat = rng.uniform(-half, half, (int(density * 4 * half**2), 2))
    foot = mesh.section(plane_origin=(0, 0, 0.004), plane_normal=(0, 0, 1)).vertices[:, :2]
    flat = flat[Delaunay(foot[ConvexHull(foot).vertices]).find_simplex(flat) < 0]
    side = np.empty((0, 3))
    if on == "disc":
        flat = flat[np.hypot(*flat.T) < half]
        angle = rng.uniform(0, 2 * np.pi, int(density * 2 * np.pi * half * 0.08))
        side = np.stack([half * np.cos(angle), half * np.sin(angle), -rng.uniform(0, 0.08, len(angle))], axis=1)
    top = np.column_stack([flat, NOISE * rng.normal(size=len(flat))])
    scene = np.concatenate([points, top, side])
    return scene @ TURN.T + SHIFT, np.arange(len(scene)) < len(points)
