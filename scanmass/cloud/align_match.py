"""Poses of one view in the frame of another that may be right: voted, laid on, and weighed by what speaks against."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.cloud.align_fit import Fit, fit, inverse, refined
from scanmass.cloud.align_samples import LEAF, ViewSamples
from scanmass.cloud.align_votes import votes

FloatArray = npt.NDArray[np.float64]

VOTED, REFINED = 50, 10
"""Poses that are laid on coarsely, and of them those that are laid on finely."""
ENOUGH, BEYOND = 0.15, 0.2
"""Overlap beyond which more of it counts for little: two views laid on each other the wrong way round overlap most."""
AGAINST, THROUGH = 20.0, 60.0
"""Samples on one surface that one sample against it outweighs: right poses have one in a hundred of other heights, from
edges and mixed pixels, and hardly any in a line of sight."""
USUAL = 0.01
"""Samples against a right pose, as a share of those on one surface: edges, mixed pixels."""
LEAST_OVERLAP = 0.06
SAME_TURN, SAME_SHIFT = np.radians(2.0), 0.012
"""Poses nearer than this, in radians and sizes of the views, are one."""


@dataclass(frozen=True)
class Scale:
    """Lengths in metres that belong together: ``size`` of the object, ``leaf`` of coarse cells, ``tolerance`` within
    which samples are of one surface, ``reach`` within which they are compared.
    """

    size: float
    tolerance: float

    @property
    def leaf(self) -> float:
        """Edge of the coarse cells."""
        return LEAF * self.size

    @property
    def reach(self) -> float:
        """How far from a surface a sample can contradict it."""
        return 0.06 * self.size


@dataclass(frozen=True)
class Candidate:
    """``pose`` (4, 4) of view ``other`` in the frame of view ``one``, numbers of views, and how well it fits."""

    one: int
    other: int
    pose: FloatArray
    fit: Fit
    score: float


def score_of(found: Fit, one: ViewSamples, other: ViewSamples, stride: int = 1) -> float:
    """Samples on one surface, mostly up to what is enough, less what speaks against it many times over."""
    enough = ENOUGH * min(len(one.asked), len(other.asked)) * 2.0 / stride
    against = max(found.against - USUAL * found.matched, 0.0)
    matched = min(float(found.matched), enough) + BEYOND * max(found.matched - enough, 0.0)
    return matched - AGAINST * against - THROUGH * found.through


def candidates(views: list[ViewSamples], one: int, other: int, scale: Scale) -> list[Candidate]:
    """The poses of ``other`` on ``one`` that may be right, the best first, at most six."""
    target, moving = views[one].sketch(), views[other].sketch()
    leaf = scale.leaf
    few = moving.asked[:: max(1, len(moving.asked) // 400)]
    stride = max(1, len(moving.asked) // 500)
    rough = []
    sparse = max(1, len(moving.asked) // 150)

    def at_once(pose: FloatArray) -> float:
        met = fit(target, moving, pose, 0.6 * leaf, scale.reach, sparse)
        return -score_of(met, target, moving, sparse)

    for pose in sorted(votes(target.coarse, moving.coarse, leaf).poses, key=at_once)[:VOTED]:
        laid = refined(target, moving, pose, leaf * np.array([1.5, 1.5, 1.2, 1.0, 0.9, 0.75, 0.6]), few)
        found = fit(target, moving, laid, 0.3 * leaf, scale.reach, stride)
        rough.append((score_of(found, target, moving, stride), laid))
    rough.sort(key=lambda entry: -entry[0])
    result: list[Candidate] = []
    target, moving = views[one], views[other]
    for pose in _distinct([pose for _, pose in rough], moving, scale.size)[:REFINED]:
        laid = refined(target, moving, pose, np.geomspace(0.5 * leaf, 1.5 * scale.tolerance, 7), moving.asked[::2])
        found = fit(target, moving, laid, scale.tolerance, scale.reach)
        if found.overlap >= LEAST_OVERLAP:
            result.append(Candidate(one, other, laid, found, score_of(found, target, moving)))
    return sorted(result, key=lambda c: -c.score)


def _distinct(poses: list[FloatArray], moving: ViewSamples, size: float) -> list[FloatArray]:
    kept: list[FloatArray] = []
    for pose in poses:
        if not any(alike(pose, other, moving, size) for other in kept):
            kept.append(pose)
    return kept


def alike(pose: FloatArray, other: FloatArray, moving: ViewSamples, size: float, slack: float = 1.0) -> bool:
    """Whether two poses (4, 4) of a view are one and the same, or with more ``slack`` nearly so."""
    between = inverse(pose) @ other
    turn = float(np.arccos(np.clip(0.5 * (np.trace(between[:3, :3]) - 1.0), -1.0, 1.0)))
    middle = moving.middle
    shift = float(np.linalg.norm(between[:3, :3] @ middle + between[:3, 3] - middle))
    return turn < slack * SAME_TURN and shift < slack * SAME_SHIFT * size
