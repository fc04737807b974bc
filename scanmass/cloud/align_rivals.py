"""Other ways to bring views together that a rigid part of them, turned over or shifted, would give."""

from __future__ import annotations

from collections.abc import Set
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
LOOSE = 0.06
"""Contradicting share above which a way is not looked at more closely."""
MOST = 10
"""Ways that are looked at closely."""
AS_MUCH, LEAST_SHARED = 0.5, 30
"""A way that lays less of a part on the rest, as a share of what this one does, or so few samples, is no rival."""
LEAST_OVERLAP = 0.05


def rivals(
    views: list[ViewSamples], found: list[Candidate], poses: dict[int, FloatArray], scale: Scale
) -> list[dict[int, FloatArray]]:
    """Ways (poses of all views) other than ``poses`` that a pose between two views would give, least spoken against.

    The views are parted in two where the chain of overlaps between the two views of a pose can be cut; one part is
    moved as a whole so that the two come to lie in that pose.
    """
    seen: list[tuple[float, dict[int, FloatArray]]] = []
    cuts = _cuts(views, poses, scale)
    for candidate in found:
        i, j = candidate.one, candidate.other
        if candidate.fit.contradiction > LOOSE or candidate.fit.overlap < LEAST_OVERLAP:
            continue
        if alike(inverse(poses[i]) @ poses[j], candidate.pose, views[j], scale.size, 2.0):
            continue
        move = poses[i] @ candidate.pose @ inverse(poses[j])
        for part in (side if j in side else poses.keys() - side for side in cuts):
            if i in part:
                continue
            matched, share = _across(views, poses, part, move, scale)
            if share < LOOSE and matched >= AS_MUCH * _across(views, poses, part, np.eye(4), scale)[0]:
                seen.append((share, {v: move @ p if v in part else p for v, p in poses.items()}))
    seen.sort(key=lambda entry: entry[0])
    return [settle(views, way, scale, rounds=6, stride=3) for _, way in seen[:MOST]]


def _cuts(views: list[ViewSamples], poses: dict[int, FloatArray], scale: Scale) -> list[frozenset[int]]:
    """The views on one side of each link of the tree of best overlaps, when that link is cut."""
    n = len(views)
    links = [(a, b, _link(views, poses, a, b, scale)) for a, b in combinations(range(n), 2)]
    links = [link for link in links if link[2] > 0]
    if not links:
        return []
    rows, columns, matched = zip(*links, strict=True)
    tree = minimum_spanning_tree(coo_matrix((1.0 / np.array(matched, float), (rows, columns)), shape=(n, n)).tocsr())
    sides = []
    for a, b in zip(*tree.nonzero(), strict=True):
        left = tree.copy().tolil()
        left[a, b] = 0.0
        sides.append(frozenset(int(v) for v in breadth_first_order(left.tocsr(), b, directed=False)[0]))
    return sides


def _link(views: list[ViewSamples], poses: dict[int, FloatArray], a: int, b: int, scale: Scale) -> int:
    return fit(views[a], views[b], inverse(poses[a]) @ poses[b], scale.tolerance, scale.reach, STRIDE).matched


def _across(
    views: list[ViewSamples], poses: dict[int, FloatArray], part: Set[int], move: FloatArray, scale: Scale
) -> tuple[int, float]:
    """Samples on one surface between a moved part and the rest, and what speaks against it as a share."""
    matched, against = 0, 0
    for a in poses.keys() - part:
        for b in part:
            pose = inverse(poses[a]) @ move @ poses[b]
            met = fit(views[a], views[b], pose, 2.0 * scale.tolerance, scale.reach, STRIDE)
            matched += met.matched
            against += met.against + met.through
    return matched, against / matched if matched >= LEAST_SHARED else 1.0
