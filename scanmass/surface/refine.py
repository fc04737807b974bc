"""Refinement: the surface goes to where the points are, on average."""

from __future__ import annotations

import numpy as np
from numba import njit
from scipy.sparse import csr_matrix

from scanmass.cloud.cloud import Cloud
from scanmass.geometry.edges import half_edges
from scanmass.geometry.neighbours import nearest
from scanmass.geometry.polyhedron import face_areas
from scanmass.geometry.triangles import between, closest, dot, mixed, row
from scanmass.progress import Progress, silent
from scanmass.surface.mesh import FaceArray, FloatArray, Mesh

ROUNDS = 3
REACH = 3.0
"""Samples farther than so many grid cells from the surface do not pull at it."""
LEAST_POINTS = 3.0
"""A vertex moves by the mean over so many samples or more: those of its neighbours, or where samples are fewer than
vertices of wider rings."""
FEW = 0.5
"""A vertex with fewer samples than this counts for less than its area."""
RINGS = 6
"""... but of no more than so many rings."""


def refine(mesh: Mesh, cloud: Cloud, *, rounds: int = ROUNDS, progress: Progress = silent) -> Mesh:
    """The mesh with each vertex moved, ``rounds`` times, by the mean signed residual of its nearest samples.

    Each sample's distance to the nearest triangle is shared among that triangle's corners by barycentric weights
    (times the scan points behind the sample); a vertex moves along its normal by the weighted mean over itself and
    its neighbours, and where samples are sparse over wider rings, so that the surface does not stay behind between
    them. Residuals to the surface, not to a tangent plane, so curvature makes no bias. Vertices without
    samples near stay.
    """
    middle = cloud.points.mean(axis=0)
    vertices = mesh.vertices - middle
    points = np.ascontiguousarray(cloud.points - middle)
    owner = nearest(vertices, 1, points)[1][:, 0]  # vertices move by far less than their spacing: asked once
    start, fan = _fans(mesh.faces, len(vertices))
    ring = ring_of(mesh.faces, len(vertices))
    weight = cloud.count.astype(np.float64)
    for step in range(rounds):
        progress("refine", step, rounds)
        normals = vertex_normals(vertices, mesh.faces)
        pull, total, seen = _pulls(
            points, weight, owner, vertices, normals, mesh.faces, start, fan, REACH * mesh.resolution
        )
        move = mean_pulls(ring, vertex_areas(vertices, mesh.faces), pull, total, seen)
        vertices = vertices + np.clip(move, -mesh.resolution, mesh.resolution)[:, None] * normals
    progress("refine", rounds, rounds)
    return mesh.moved(vertices + middle)


def mean_pulls(ring: csr_matrix, area: FloatArray, pull: FloatArray, total: FloatArray, seen: FloatArray) -> FloatArray:
    """Mean pull on each vertex over the smallest patch round it that holds enough samples; 0 where none does.

    Parameters
    ----------
    ring : (n, n), see :func:`ring_of`
    area : (n,), see :func:`vertex_areas`
    pull : (n,) or (n, k), sums of pulls times weights at each vertex
    total, seen : (n,), sums of weights, and of samples
    """
    # A rounded corner of the mesh gathers the samples of both faces on less area than they came from. Weighed by
    # samples, it would push its neighbours out for it (a fifth of the pitch squared for each metre of edge).
    each = np.where(seen > 0, area / np.maximum(seen, FEW) * seen / np.where(total > 0, total, 1.0), 0.0)
    total = each * total
    pull = each * pull if pull.ndim == 1 else each[:, None] * pull
    degree = np.asarray(ring.sum(axis=1)).ravel()
    mean = np.zeros_like(pull)
    settled = np.zeros(len(pull), np.bool_)
    for rings in range(1, RINGS + 1):
        total, seen = ring @ total / degree, ring @ seen / degree
        pull = ring @ pull / (degree if pull.ndim == 1 else degree[:, None])
        # A patch of k rings holds some 1 + 3 k (k + 1) vertices.
        enough = ~settled & (seen * (1 + 3 * rings * (rings + 1)) >= LEAST_POINTS)
        mean[enough] = pull[enough] / (total[enough] if pull.ndim == 1 else total[enough, None])
        settled |= enough
        if settled.all():
            break
    return mean


def vertex_areas(vertices: FloatArray, faces: FaceArray) -> FloatArray:
    """Area (n,) that each vertex stands for: a third of the faces round it."""
    area, _ = face_areas(vertices, faces)
    owned: FloatArray = np.bincount(faces.ravel(), np.repeat(area / 3.0, 3), minlength=len(vertices)).astype(np.float64)
    return owned


def vertex_normals(vertices: FloatArray, faces: FaceArray) -> FloatArray:
    """Unit normals (n, 3) at vertices: means of the faces round them by area; zero where faces cancel."""
    a, b, c = vertices[faces[:, 0]], vertices[faces[:, 1]], vertices[faces[:, 2]]
    cross = np.cross(b - a, c - a)
    total = np.stack(
        [np.bincount(faces.ravel(), np.repeat(cross[:, k], 3), minlength=len(vertices)) for k in range(3)], axis=1
    )
    length = np.linalg.norm(total, axis=1)
    normals: FloatArray = total / np.where(length > 0, length, 1.0)[:, None]
    return normals


def _fans(faces: FaceArray, n: int) -> tuple[FaceArray, FaceArray]:
    """Faces round each vertex: vertex i owns ``fan[start[i]:start[i + 1]]``."""
    corners = faces.ravel()
    start = np.zeros(n + 1, np.int64)
    np.cumsum(np.bincount(corners, minlength=n), out=start[1:])
    return start, (np.argsort(corners, kind="stable") // 3).astype(np.int64)


def ring_of(faces: FaceArray, n: int) -> csr_matrix:
    """Sum over a vertex and its neighbours, as a matrix (n, n) of ones."""
    edges = half_edges(faces)
    rows = np.concatenate([edges[:, 0], edges[:, 1], np.arange(n)])
    columns = np.concatenate([edges[:, 1], edges[:, 0], np.arange(n)])
    ring = csr_matrix((np.ones(len(rows)), (rows, columns)), shape=(n, n))
    ring.data[:] = 1.0
    return ring


@njit(cache=True)
def _pulls(points, weight, owner, vertices, normals, faces, start, fan, reach):  # type: ignore[no-untyped-def]
    n = len(vertices)
    pull, total, seen = np.zeros(n), np.zeros(n), np.zeros(n)
    for k in range(len(points)):
        p = row(points, k)
        best, face, shares, away = np.inf, -1, (0.0, 0.0, 0.0), (0.0, 0.0, 0.0)
        for j in range(start[owner[k]], start[owner[k] + 1]):
            f = row(faces, fan[j])
            a, b, c = row(vertices, f[0]), row(vertices, f[1]), row(vertices, f[2])
            weights = closest(p, a, b, c)
            d = between(mixed(weights, a, b, c), p)
            distance = dot(d, d)
            if distance < best:
                best, face, shares, away = distance, fan[j], weights, d
        if face < 0 or best > reach * reach:
            continue
        f = row(faces, face)
        up = mixed(shares, row(normals, f[0]), row(normals, f[1]), row(normals, f[2]))
        length = np.sqrt(dot(up, up))
        if length == 0.0:
            continue
        residual = dot(away, up) / length
        for i in range(3):
            pull[f[i]] += shares[i] * weight[k] * residual
            total[f[i]] += shares[i] * weight[k]
            seen[f[i]] += shares[i]
    return pull, total, seen
