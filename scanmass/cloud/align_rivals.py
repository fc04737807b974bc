"""Other ways to bring views together that a rigid part of them, turned over or shifted, would give."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations

import numpy as np
import numpy.typing as npt
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import breadth_first_order, minimum_spanning_tree

from scanmass.cloud.align_fit import fit, inverse
from scanmass.cloud.align_joint import settle
from scanmass.cloud.align_match import Candidate, Scale, alike
from scanmass.cloud.align_samples import ViewSamples

FloatArray = npt.NDArray[np.float64]

STRIDE = 6
LOOSE = 0.02
"""Contradicting share above which a way is not looked at more closely."""
MOST = 6
"""Ways that are looked at closely."""
LEAST_OVERLAP = 0.1


def rivals(
    views: list[ViewSamples], found: list[Candidate], poses: dict[int, FloatArray], scale: Scale
) -> list[dict[int, FloatArray]]:
    """Ways (poses of all views) other than ``poses`` that a pose between two views would give, least spoken against.

    The views are parted in two where the chain of overlaps between the two views of a pose can be cut; one part is
    moved as a whole so that the two come to lie in that pose.
    """
    seen: list[tuple[float, dict[int, FloatArray]]] = []
    for candidate in found:
        i, j = candidate.one, candidate.other
        if candidate.score <= 0.0 or candidate.fit.overlap < LEAST_OVERLAP:
            continue
        if alike(inverse(poses[i]) @ poses[j], candidate.pose, views[j], 2.0 * scale.size):
            continue
        move = poses[i] @ candidate.pose @ inverse(poses[j])
        for part in _parts(views, poses, i, j, scale):
            share = _across(views, poses, part, move, scale)
            if share < LOOSE:
                seen.append((share, {v: move @ p if v in part else p for v, p in poses.items()}))
    seen.sort(key=lambda entry: entry[0])
    return [settle(views, way, scale, rounds=6, stride=3) for _, way in seen[:MOST]]


def _parts(
    views: list[ViewSamples], poses: dict[int, FloatArray], i: int, j: int, scale: Scale
) -> Iterator[frozenset[int]]:
    """The views that hang on view ``j`` once a link of the chain of best overlaps from ``i`` to ``j`` is cut."""
    n = len(views)
    links = [(a, b, _link(views, poses, a, b, scale)) for a, b in combinations(range(n), 2)]
    links = [link for link in links if link[2] > 0]
    rows, columns, matched = zip(*links, strict=True)
    tree = minimum_spanning_tree(coo_matrix((1.0 / np.array(matched, float), (rows, columns)), shape=(n, n)).tocsr())
    edges = list(zip(*tree.nonzero(), strict=True))
    for a, b in edges:
        left = tree.copy().tolil()
        left[a, b] = 0.0
        part = frozenset(int(v) for v in breadth_first_order(left.tocsr(), j, directed=False)[0])
        if i not in part:
            yield part


def _link(views: list[ViewSamples], poses: dict[int, FloatArray], a: int, b: int, scale: Scale) -> int:
    return fit(views[a], views[b], inverse(poses[a]) @ poses[b], scale.tolerance, scale.reach, STRIDE).matched


def _across(
    views: list[ViewSamples], poses: dict[int, FloatArray], part: frozenset[int], move: FloatArray, scale: Scale
) -> float:
    """What speaks against the pairs between a moved part and the rest, as a share; 1 where they do not overlap."""
    matched, against = 0, 0
    for a in poses.keys() - part:
        for b in part:
            met = fit(
                views[a], views[b], inverse(poses[a]) @ move @ poses[b], 2.0 * scale.tolerance, scale.reach, STRIDE
            )
            matched += met.matched + met.against
            against += met.against + met.through
    return against / matched if matched >= 40 else 1.0
