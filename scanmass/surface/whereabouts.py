"""Where on an object a part of its surface lies, in words that hold in the scan's own axes."""

from __future__ import annotations

import numpy as np

from scanmass.surface.mesh import FloatArray, Mesh
from scanmass.surface.span import Mask, corners

CENTRAL = 0.1
"""Within this share of the size of the middle, a part is in the middle."""


def whereabouts(mesh: Mesh, region: Mask, up: FloatArray | None) -> str:
    """Of a gap (m,): how high up, where up is known, and towards which axes its rim lies from the object's middle."""
    _, rim = corners(mesh, region)
    seen, _ = corners(mesh, ~region)
    low, high = mesh.vertices[seen].min(axis=0), mesh.vertices[seen].max(axis=0)
    size = float((high - low).max())
    place = (mesh.vertices[rim].mean(axis=0) if rim.any() else mesh.vertices.mean(axis=0)) - 0.5 * (low + high)
    height = ""
    if up is not None:
        tall = mesh.vertices[seen] @ up
        share = ((place + 0.5 * (low + high)) @ up - tall.min()) / max(float(np.ptp(tall)), 1e-300)
        height = f"{100 * float(np.clip(share, 0.0, 1.0)):.0f} % of the height up, "
        place = place - (place @ up) * up
    far = [
        f"{'+' if place[k] > 0 else '-'}{'xyz'[k]}"
        for k in np.argsort(-np.abs(place))
        if abs(place[k]) > CENTRAL * size
    ]
    return height + ("towards " + " and ".join(far[:2]) if far else "near the middle")
