"""Screened Poisson reconstruction (Kazhdan & Hoppe 2013), closed by the count of its edges."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy.spatial import cKDTree

from scanmass import libraries
from scanmass.cloud.cloud import Cloud
from scanmass.errors import Declined, Note
from scanmass.geometry.edges import count_edges, parted, shell_labels
from scanmass.progress import Progress, silent
from scanmass.surface.mesh import FaceArray, FloatArray, Mesh
from scanmass.surface.quiet import quiet
from scanmass.surface.sampling import median_pitch

SCALES = (1.1, 1.5, 2.2, 3.0)
"""Side of the reconstruction cube over the longest side of the cloud, tried until the mesh is closed."""
LEAST_DEPTH, GREATEST_DEPTH = 4, 9
CELLS_PER_PITCH = 2.0
"""Grid cells no finer than twice the pitch: finer ones follow the noise and cost four times the time a level."""
NEAR = 4.0
"""A vertex is supported by the points within so many median pitches."""
LEAST_SUPPORT, LEAST_POINTS = 0.3, 50


def reconstruct(cloud: Cloud, *, resolution: float | None = None, progress: Progress = silent) -> Mesh:
    """A closed mesh through oriented samples; where there are none, it bulges as it likes (see :mod:`.close`).

    Parameters
    ----------
    cloud : with outward unit ``normals``
    resolution : edge of the grid's cells in metres; twice the median pitch of the samples where None. Rounded to
        the nearest power of two of the cube's side, between 2^4 and 2^9 cells.

    Raises
    ------
    ValueError
        If the cloud has no normals.
    Declined
        If no scale gives a closed mesh.

    Notes
    -----
    Works about the cloud's middle at unit size, whatever the scan's origin. One thread: same bytes at every call.
    Shells without points on them are dropped and noted; shells with points (cavities) are kept.
    """
    if cloud.normals is None:
        raise ValueError("reconstruction needs oriented normals")
    middle = 0.5 * (cloud.points.min(axis=0) + cloud.points.max(axis=0))
    size = cloud.size
    points = (cloud.points - middle) / size
    pitch = median_pitch(points)
    cell = CELLS_PER_PITCH * pitch if resolution is None else resolution / size
    cell = float(np.clip(cell, SCALES[0] / 2**GREATEST_DEPTH, SCALES[0] / 2**LEAST_DEPTH))
    for attempt, scale in enumerate(SCALES):
        progress("reconstruct", attempt, len(SCALES))
        # The cells stay as small whatever the cube: an open underside often needs the larger ones.
        depth = round(np.log2(scale / cell))
        vertices, faces = _poisson(points, cloud.normals, depth, scale)
        if len(faces) and count_edges(faces).balanced:
            progress("reconstruct", len(SCALES), len(SCALES))
            vertices, faces = parted(vertices, faces)
            unit = _supported(Mesh(vertices, faces, scale / 2**depth), points, pitch)
            return Mesh(unit.vertices * size + middle, unit.faces, unit.resolution * size, unit.notes)
    raise Declined(
        "the surface through these points does not close: edges stay open at every size of the reconstruction",
        allowed="scan the parts that were missed, or give a mesh that is closed",
    )


def _poisson(points: FloatArray, normals: FloatArray, depth: int, scale: float) -> tuple[FloatArray, FaceArray]:
    open3d = libraries.open3d()
    samples = open3d.geometry.PointCloud(open3d.utility.Vector3dVector(points))
    samples.normals = open3d.utility.Vector3dVector(normals)
    with quiet(), open3d.utility.VerbosityContextManager(open3d.utility.VerbosityLevel.Error):
        mesh, _ = open3d.geometry.TriangleMesh.create_from_point_cloud_poisson(
            samples, depth=depth, scale=scale, linear_fit=True, n_threads=1
        )
    return np.array(mesh.vertices, np.float64), np.array(mesh.triangles, np.int64).reshape(-1, 3)


def _supported(mesh: Mesh, points: FloatArray, pitch: float) -> Mesh:
    """Without the shells that float where no point is."""
    n, labels = shell_labels(mesh.faces)
    if n == 1:
        return mesh
    kept = [label for label in range(n) if _has_points(mesh.keep(labels == label).vertices, points, pitch)]
    if len(kept) == n:
        return mesh
    if not kept:
        raise Declined(
            "no part of the reconstructed surface lies near the points",
            allowed="check the normals and the outliers of the scan",
        )
    text = f"{n - len(kept)} floating shell(s) that the reconstruction made where no point lies were dropped"
    mask: npt.NDArray[np.bool_] = np.isin(labels, kept)
    part = mesh.keep(mask)
    return Mesh(part.vertices, part.faces, part.resolution, (Note("floating-shells-dropped", text),))


def _has_points(vertices: FloatArray, points: FloatArray, pitch: float) -> bool:
    low, high = vertices.min(axis=0), vertices.max(axis=0)
    margin = NEAR * pitch
    around = np.all((points > low - margin) & (points < high + margin), axis=1)
    if around.sum() < LEAST_POINTS:
        return False
    distance, _ = cKDTree(points[around]).query(vertices)
    return bool(np.mean(distance < margin) >= LEAST_SUPPORT)
