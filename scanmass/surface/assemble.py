"""A closed mesh from the seen surface and the spans of its gaps, and the moments that bracket it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from scanmass.geometry.loops import rim_edges
from scanmass.geometry.moments import translated
from scanmass.surface.columns import Columns
from scanmass.surface.mesh import FaceArray, FloatArray, Mesh
from scanmass.surface.span import Mask, Span, corners
from scanmass.surface.surface import Closure

AXES = ("x", "y", "z")
STILL = 1e-9
"""A rim that moves by less than this share of the size needs no wall."""


def assembled(mesh: Mesh, spans: list[Span]) -> tuple[Mesh, Mask]:
    """The mesh with each gap at its best guess, and which faces are inferred by it; walls join a rim that moved."""
    vertices = [mesh.vertices.copy()]
    faces = mesh.faces.copy()
    walls: list[FaceArray] = []
    inferred = np.zeros(len(faces), bool)
    n = len(mesh.vertices)
    for span in spans:
        inside, rim = corners(mesh, span.region)
        guess = span.near + span.share * (span.far - span.near)
        inner = inside & ~rim
        vertices[0][inner] = guess[inner]
        inferred |= span.region
        numbers = np.flatnonzero(rim)
        if np.abs(guess[rim] - mesh.vertices[rim]).max(initial=0.0) <= STILL * np.ptp(mesh.vertices, axis=0).max():
            continue
        lower = np.arange(len(mesh.vertices))
        lower[numbers] = n + np.arange(len(numbers))
        n += len(numbers)
        vertices.append(guess[numbers])
        walls.append(_wall(rim_edges(mesh.faces, span.region), lower))
        faces[span.region] = lower[faces[span.region]]
    extra = np.concatenate([*walls, np.empty((0, 3), np.int64)])
    whole = Mesh(np.concatenate(vertices), np.concatenate([faces, extra]), mesh.resolution, mesh.notes)
    return whole, np.concatenate([inferred, np.ones(len(extra), bool)])


def _wall(rim: FaceArray, lower: FaceArray) -> FaceArray:
    """Two triangles for each rim edge a -> b of a region, down to its lowered twin; cut as the columns are cut."""
    a, b = rim[:, 0], rim[:, 1]
    c, d = lower[a], lower[b]
    rising = (a < b)[:, None]
    first = np.where(rising, np.stack([a, b, d], axis=1), np.stack([a, b, c], axis=1))
    second = np.where(rising, np.stack([a, d, c], axis=1), np.stack([b, d, c], axis=1))
    return np.concatenate([first, second])


def closures(mesh: Mesh, spans: list[Span]) -> tuple[Closure, ...]:
    """Shapes whose least and greatest values bracket the volume and each coordinate of the centre of mass."""
    open_spans = [span for span in spans if span.bracket]
    if not open_spans:
        return ()
    whole, _ = assembled(mesh, [replace(span, share=0.0) for span in spans])
    middle = whole.vertices.mean(axis=0)
    base = translated(whole.moments, -middle)
    parts, edges = [], []
    for span in spans:
        faces = mesh.faces[span.region]
        columns = Columns.between(faces, span.near - middle, span.far - middle)
        if not span.bracket:
            base = base + _at(columns, span.share)
            continue
        parts.append(columns)
        edges.append(columns if span.lid is None else Columns.between(faces, span.near - middle, span.lid - middle))
    found = _extremes(base, Columns.joined(parts), Columns.joined(edges))
    return tuple(Closure(name, translated(moments, middle)) for name, moments in found)


def _at(columns: Columns, share: float) -> FloatArray:
    layer = round(share * (columns.filled.shape[1] - 1))
    total: FloatArray = columns.filled[:, layer].sum(axis=0)
    return total


def _extremes(base: FloatArray, columns: Columns, reach: Columns) -> list[tuple[str, FloatArray]]:
    """The two plain shapes, and the extremes of volume and of each coordinate of the centre.

    Each column is filled by itself, so an extreme is over every combination of gaps, filled, empty, or filled on one
    side. ``reach``: columns that go as far as any shape allows, ``columns`` to where the best guess is taken from.
    """
    volume = np.eye(10)[0]
    found = [("membrane", base), ("filled", base + columns.filled[:, -1].sum(axis=0))]
    found += [("least volume", base + reach.best(-volume)), ("greatest volume", base + reach.best(volume))]
    for k, axis in enumerate(AXES):
        for sign, name in ((-1.0, "least"), (1.0, "greatest")):
            found.append((f"{name} {axis}", reach.extreme_centroid(base, sign * np.eye(3)[k])))
    return found
