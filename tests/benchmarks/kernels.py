"""Kernels against peer libraries, as ratios of the best of several runs taken in turn.

python -m tests.benchmarks.kernels            # full size
python -m tests.benchmarks.kernels --short    # seconds
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Callable

import igl
import numpy as np
import open3d as o3d
import trimesh

from scanmass.density.cells import cut_solid
from scanmass.geometry.polyhedron import polyhedron_moments


def best(work: Callable[[], object], times: int) -> float:
    """The shortest of several runs, in seconds."""
    seconds = []
    for _ in range(times):
        start = time.perf_counter()
        work()
        seconds.append(time.perf_counter() - start)
    return min(seconds)


def lump(subdivisions: int) -> tuple[np.ndarray, np.ndarray]:
    """A smooth uneven body of 20 x 4^n triangles."""
    mesh = trimesh.creation.icosphere(subdivisions)
    p = np.array(mesh.vertices)
    swell = 1 + 0.2 * np.sin(3 * p[:, 0]) * np.cos(2 * p[:, 1]) + 0.1 * np.sin(5 * p[:, 2])
    return p * swell[:, None] * [1.0, 0.8, 0.6], np.array(mesh.faces, np.int64)


def occupancy(vertices: np.ndarray, faces: np.ndarray, cells: int) -> None:
    """Binary occupancy of the cells' centres by open3d's ray casting."""
    scene = o3d.t.geometry.RaycastingScene()
    scene.add_triangles(o3d.core.Tensor(vertices.astype(np.float32)), o3d.core.Tensor(faces.astype(np.uint32)))
    low, high = vertices.min(0), vertices.max(0)
    step = (high - low).max() / cells
    axes = [np.arange(a + step / 2, b, step, dtype=np.float32) for a, b in zip(low, high, strict=True)]
    grid = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1)
    scene.compute_occupancy(o3d.core.Tensor(grid))


def rows(subdivisions: int, cells: int, times: int) -> list[tuple[str, float, str, float]]:
    """(our work, our seconds, the peer's work, its seconds) for each comparison."""
    vertices, faces = lump(subdivisions)
    n = f"{len(faces):,} triangles"
    polyhedron_moments(vertices, faces[:100])
    cut_solid(vertices, faces[:0].reshape(0, 3), cells=4)
    ours = best(lambda: polyhedron_moments(vertices, faces), times)
    libigl = best(lambda: igl.centroid(vertices, faces), times)
    peer = best(lambda: trimesh.Trimesh(vertices, faces, process=False).moment_inertia, 1)
    cut = best(lambda: cut_solid(vertices, faces, cells=cells), times)
    filled = best(lambda: occupancy(vertices, faces, cells // 2), 1)
    return [
        (f"ten moments, {n}", ours, "libigl: volume and centroid only", libigl),
        (f"ten moments, {n}", ours, "trimesh: inertia", peer),
        (f"exact cut cells with moments, {cells}^3, {n}", cut, f"open3d: binary occupancy, {cells // 2}^3", filled),
    ]


def main() -> None:
    """Print the comparisons."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--short", action="store_true")
    short = parser.parse_args().short
    for ours, seconds, theirs, peer in rows(4 if short else 8, 32 if short else 256, 2 if short else 5):
        print(f"{ours}: {seconds * 1e3:.1f} ms | {theirs}: {peer * 1e3:.1f} ms | ratio {peer / seconds:.2f}")


if __name__ == "__main__":
    main()
