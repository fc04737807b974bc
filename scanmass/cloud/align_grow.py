"""All views brought together, one after the other, each where least speaks against it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.cloud.align_fit import fit, inverse
from scanmass.cloud.align_joint import settle
from scanmass.cloud.align_match import Candidate, Scale, alike, score_of
from scanmass.cloud.align_samples import ViewSamples

FloatArray = npt.NDArray[np.float64]

SEEDS = 6
"""Pairs that are tried as the first two."""
TRIED = 10
"""Poses of each view that are tried against all placed views."""
BRANCHES = 3
"""Poses of one view that are followed."""
KEPT = 6
"""Ways that are followed side by side: the one that looks best half way need not be right."""
STRIDE = 5


@dataclass(frozen=True)
class Assembly:
    """``poses``: (4, 4) of each placed view by its number, in the frame of one of them; ``score`` over all pairs."""

    poses: dict[int, FloatArray]
    score: float


def assemblies(views: list[ViewSamples], found: list[Candidate], scale: Scale) -> list[Assembly]:
    """Ways to bring the views together from the poses ``found`` between pairs, those with most views first.

    Several are followed side by side, since the pair that fits best need not be right: two views of a body that looks
    much the same from two sides fit best the wrong way round.
    """
    both = found + [Candidate(c.other, c.one, inverse(c.pose), c.fit, c.score) for c in found]
    both.sort(key=lambda c: -c.score)
    seeds = _clearest(found, views, scale)[:SEEDS]
    ways = [Assembly({c.one: np.eye(4), c.other: c.pose}, c.score / STRIDE) for c in seeds]
    ended: list[Assembly] = []
    while ways:
        longer: list[Assembly] = []
        for way in ways:
            grown = _longer(views, both, way, scale)
            longer += grown
            if not grown:
                ended.append(way)
        longer.sort(key=lambda w: -w.score)
        ways = []
        for way in longer:
            if len(ways) < KEPT and not any(same_way(way.poses, other.poses, views, scale) for other in ways):
                ways.append(Assembly(settle(views, way.poses, scale, rounds=2, stride=8), way.score))
    return sorted(ended, key=lambda w: (-len(w.poses), -w.score))


def _clearest(found: list[Candidate], views: list[ViewSamples], scale: Scale) -> list[Candidate]:
    """The best pose of every pair, those first that lead most over the next best pose of their pair."""
    leads = []
    for pair in dict.fromkeys((c.one, c.other) for c in found):
        own = sorted((c for c in found if (c.one, c.other) == pair), key=lambda c: -c.score)
        others = [c.score for c in own[1:] if not alike(c.pose, own[0].pose, views[pair[1]], scale.size, 2.0)]
        leads.append((own[0].score - max([0.0, *others]), own[0]))
    leads.sort(key=lambda entry: -entry[0])
    return [candidate for _, candidate in leads]


def _longer(views: list[ViewSamples], found: list[Candidate], way: Assembly, scale: Scale) -> list[Assembly]:
    """The way with one more view, in the likeliest fashions: that view whose place is told most clearly."""
    clearest, best = 0.0, list[Assembly]()
    for view in range(len(views)):
        if view in way.poses:
            continue
        edges = [c for c in found if c.other == view and c.one in way.poses and c.score > 0.0]
        tried: list[FloatArray] = []
        for edge in edges:
            pose = way.poses[edge.one] @ edge.pose
            if len(tried) < TRIED and not any(alike(pose, o, views[view], scale.size, 2.0) for o in tried):
                tried.append(pose)
        scored = [(support(views, way.poses, view, pose, scale), k) for k, pose in enumerate(tried)]
        scored = sorted((entry for entry in scored if entry[0] > 0.0), key=lambda entry: -entry[0])
        lead = scored[0][0] - (scored[1][0] if len(scored) > 1 else 0.0) if scored else -1.0
        if scored and (lead > clearest or not best):
            clearest = lead
            best = [Assembly({**way.poses, view: tried[k]}, way.score + score) for score, k in scored[:BRANCHES]]
    return best


def support(views: list[ViewSamples], poses: dict[int, FloatArray], view: int, pose: FloatArray, scale: Scale) -> float:
    """How well a view at ``pose`` (4, 4) goes with all that are placed already."""
    total = 0.0
    loose = 2.0 * scale.tolerance
    for other, place in poses.items():
        met = fit(views[other], views[view], inverse(place) @ pose, loose, scale.reach, STRIDE)
        total += score_of(met, views[other], views[view], STRIDE)
    return total


def same_way(
    a: dict[int, FloatArray], b: dict[int, FloatArray], views: list[ViewSamples], scale: Scale, slack: float = 2.0
) -> bool:
    """Whether two ways place the same views alike."""
    if a.keys() != b.keys():
        return False
    root = min(a)
    return all(alike(inverse(a[root]) @ a[v], inverse(b[root]) @ b[v], views[v], scale.size, slack) for v in a)
