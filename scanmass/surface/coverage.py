"""What of a reconstructed surface the scan saw, and the regions it did not."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy.sparse import csr_matrix
from scipy.sparse.csgraph import connected_components, dijkstra

from scanmass.cloud.cloud import Cloud
from scanmass.geometry.edges import half_edges, shell_labels
from scanmass.geometry.harmonic import neighbour_matrix
from scanmass.geometry.loops import untangled
from scanmass.geometry.neighbours import nearest
from scanmass.geometry.polyhedron import face_areas
from scanmass.surface.mesh import FloatArray, Mesh
from scanmass.surface.sampling import local_pitch

Mask = npt.NDArray[np.bool_]

NEAR = 2.0
"""A vertex with no sample within so many local pitches was not seen (an even random sampling leaves such a gap
once in 2e12 places; the nearest-neighbour distance is about half a pitch, so this is some six of those)."""
GAP = 2.5
"""A gap whose middle is no farther than this from a sample is bridged well by the reconstruction: left as it is."""
WIDEN = 2.0
"""Gaps are widened by so many pitches along the surface: back past the edge of the data, where it still is data. More
loses data near the floor (6 made a stone 4 % too large, its walls drawn on from too high up), less leaves balloon."""
BEYOND, SMOOTHING = 3.0, 4
"""Paths along edges are longer the one way than the other: distances are known to so many pitches beyond, and averaged
over neighbours so often, or the rim is ragged."""
ISLAND = 0.05
"""A seen patch surrounded by a gap joins it when its area is below this share of the gap's."""
LARGEST_PITCH = 8.0
"""A stray sample counts for a place no wider than this many median pitches."""


def seen_vertices(mesh: Mesh, cloud: Cloud) -> tuple[FloatArray, FloatArray]:
    """Distance of each vertex to the nearest sample in local pitches, and that pitch in metres: (n,), (n,)."""
    middle = cloud.points.mean(axis=0)
    pitch = local_pitch(cloud.points - middle)
    pitch = np.minimum(pitch, LARGEST_PITCH * np.median(pitch))
    distance, index = nearest(cloud.points - middle, 1, mesh.vertices - middle)
    local: FloatArray = pitch[index[:, 0]]
    return distance[:, 0] / local, local


def inferred_faces(mesh: Mesh, distance: FloatArray) -> Mask:
    """Faces (m,) with no sample near any corner."""
    inferred: Mask = np.all((distance > NEAR)[mesh.faces], axis=1)
    return inferred


def gaps(mesh: Mesh, distance: FloatArray, pitch: FloatArray, below: Mask | None = None) -> list[Mask]:
    """Regions the scan missed, widened, each a mask (m,) of faces with simple rims; small gaps are not among them.

    Vertices ``below`` (n,) what the object stands on were made by the reconstruction: gaps, however small.
    """
    n = len(mesh.vertices)
    edges = half_edges(mesh.faces)
    length = np.linalg.norm(mesh.vertices[edges[:, 0]] - mesh.vertices[edges[:, 1]], axis=1)
    length = np.maximum(length, 1e-12 * mesh.resolution) / pitch[edges].mean(axis=1)
    unseen = distance > NEAR
    inside = unseen[edges].all(axis=1)
    _, label = connected_components(csr_matrix((np.ones(inside.sum()), edges[inside].T), shape=(n, n)), directed=False)
    deepest = np.zeros(label.max() + 1)
    np.maximum.at(deepest, label, distance)
    missed = unseen & (deepest[label] > GAP)
    seeds = np.flatnonzero(missed if below is None else missed | below)
    if len(seeds) == 0:
        return []
    # Each edge is there twice, once each way, with the same length; later duplicates must not add up.
    once = np.unique(edges[:, 0] * n + edges[:, 1], return_index=True)[1]
    graph = csr_matrix((length[once], edges[once].T), shape=(n, n))
    reach = dijkstra(graph, directed=False, indices=seeds, min_only=True, limit=WIDEN + BEYOND)
    reach = np.minimum(reach, WIDEN + BEYOND)
    ring = neighbour_matrix(mesh.faces, n)
    degree = np.asarray(ring.sum(axis=1)).ravel()
    for _ in range(SMOOTHING):
        reach = (reach + ring @ reach) / (1.0 + degree)
    region: Mask = np.any((reach < WIDEN)[mesh.faces], axis=1)
    region = untangled(mesh.faces, _without_islands(mesh, untangled(mesh.faces, region)))
    labels = np.full(len(mesh.faces), -1)
    if region.all():
        return [region]
    count, labels[region] = shell_labels(mesh.faces[region])
    return [labels == k for k in range(count)]


def _without_islands(mesh: Mesh, region: Mask) -> Mask:
    if region.all():
        return region
    area, _ = face_areas(mesh.vertices, mesh.faces)
    count, label = shell_labels(mesh.faces[~region])
    part = np.bincount(label, area[~region], minlength=count)
    small = (part < ISLAND * area[region].sum()) & (part < part.max())
    joined = region.copy()
    joined[~region] = small[label]
    return joined
