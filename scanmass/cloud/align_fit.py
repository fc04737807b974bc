"""How well two views lie on each other, and the motion that lays them better."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.cloud.align_samples import ViewSamples

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]
IndexArray = npt.NDArray[np.int64]

ALIKE = 0.7
"""Cosine between normals of samples that may be of the same surface."""
CROSSED = 0.3
FREE = 1e-5
"""Share of the stiffest motion's normal equations added to all, so that what slides freely does not run away."""
ASIDE = 1.5
"""Spacings from the foot of a sample to the nearest sample of the other view within which that view saw the place."""


@dataclass(frozen=True)
class Met:
    """What samples of one view meet in another.

    ``at`` (n,): the other's nearest sample; ``height`` (n,) over its surface in metres; ``turn`` (n,): cosine between
    the normals; ``agree`` (n,): on the same surface; ``against`` (n,): where the other saw its surface elsewhere.
    """

    at: IndexArray
    height: FloatArray
    turn: FloatArray
    agree: BoolArray
    against: BoolArray


def meet(target: ViewSamples, points: FloatArray, normals: FloatArray, tolerance: float, reach: float) -> Met:
    """Samples (n, 3) of one view held against another, both in one frame.

    A sample whose nearest in ``target`` lies within ``reach`` and right below or above it, away from the border of
    what ``target`` saw, is on the same surface (within ``tolerance``, normals alike), or contradicts it: a sheet that
    faces the same way at another height, or one that crosses. The back of a wall contradicts nothing.
    """
    distance, at = target.tree.query(points, distance_upper_bound=reach)
    found = np.isfinite(distance)
    at = np.where(found, at, 0)
    step = points - target.points[at]
    height = np.einsum("ij,ij->i", step, target.normals[at])
    aside = np.sqrt(np.maximum(np.einsum("ij,ij->i", step, step) - height**2, 0.0))
    over = found & ~target.border[at] & (aside <= ASIDE * target.spacing + 0.25 * np.abs(height))
    turn = np.einsum("ij,ij->i", normals, target.normals[at])
    agree = over & (turn > ALIKE) & (np.abs(height) <= tolerance)
    against = over & (turn > CROSSED) & (np.abs(height) > 2.0 * tolerance)
    against |= over & (np.abs(turn) < CROSSED) & (np.abs(height) <= tolerance)
    return Met(at, height, turn, agree, against)


@dataclass(frozen=True)
class Fit:
    """Two views in one frame. ``overlap``: share of the smaller view's samples on the other's surface.

    ``matched``, ``against``, ``through``: samples, both ways, on one surface; on another than the other view saw
    there; in the line of sight of the other's scanner. ``rms``: metres, of heights where the two are on one surface.
    """

    overlap: float
    matched: int
    against: int
    through: int
    rms: float

    @property
    def contradiction(self) -> float:
        """Samples that speak against it, as a share of those that tell."""
        return (self.against + self.through) / max(self.matched + self.against, 1)


NOTHING = Fit(0.0, 0, 0, 0, 0.0)


def fit(one: ViewSamples, other: ViewSamples, pose: FloatArray, tolerance: float, reach: float, stride: int = 1) -> Fit:
    """How well ``pose`` (4, 4) of ``other`` in the frame of ``one`` lays them on each other, by every ``stride``-th
    sample."""
    shares, agreed, against, through, squares = [], 0, 0, 0, 0.0
    for target, asked, motion in ((one, other, pose), (other, one, inverse(pose))):
        which = asked.asked[::stride]
        if len(which) == 0:
            return NOTHING
        points = asked.points[which] @ motion[:3, :3].T + motion[:3, 3]
        met = meet(target, points, asked.normals[which] @ motion[:3, :3].T, tolerance, reach)
        shares.append(float(met.agree.mean()))
        agreed += int(met.agree.sum())
        squares += float((met.height[met.agree] ** 2).sum())
        before = np.zeros(len(points), np.bool_)
        if target.sight is not None:
            before = target.sight.before(points, 2.0 * tolerance + target.spacing)
        against += int((met.against & ~before).sum())
        through += int((before & ~met.agree).sum())
    rms = float(np.sqrt(squares / agreed)) if agreed else 0.0
    return Fit(max(shares), agreed, against, through, rms)


def inverse(pose: FloatArray) -> FloatArray:
    """The motion back (4, 4)."""
    back = np.eye(4)
    back[:3, :3] = pose[:3, :3].T
    back[:3, 3] = -pose[:3, :3].T @ pose[:3, 3]
    return back


def twist(pose: FloatArray) -> FloatArray:
    """The motion (4, 4) of a twist (6,): turn (axis x rad) about the origin, then shift, both small or not."""
    from scipy.spatial.transform import Rotation

    moved = np.eye(4)
    moved[:3, :3] = Rotation.from_rotvec(pose[:3]).as_matrix()
    moved[:3, 3] = pose[3:]
    return moved


def rows(points: FloatArray, normals: FloatArray) -> FloatArray:
    """(n, 6): how far each point moves along its normal for a unit of each turn (about the origin) and shift."""
    return np.concatenate([np.cross(points, normals), normals], axis=1)


def refined(
    target: ViewSamples, moving: ViewSamples, pose: FloatArray, tolerances: FloatArray, which: IndexArray
) -> FloatArray:
    """``pose`` (4, 4) of ``moving`` in the frame of ``target``, point to plane, once for each of ``tolerances``.

    Weights fall with the height (Cauchy), so that what only one of them saw has no say. ``which``: samples looked up.
    """
    points, normals = moving.points[which], moving.normals[which]
    middle = target.points.mean(axis=0)
    radius = float(np.linalg.norm(points - points.mean(axis=0), axis=1).mean())
    for tolerance in tolerances:
        p = points @ pose[:3, :3].T + pose[:3, 3]
        n = normals @ pose[:3, :3].T
        distance, at = target.tree.query(p, distance_upper_bound=float(tolerance))
        near = np.flatnonzero(np.isfinite(distance))
        near = near[np.einsum("ij,ij->i", n[near], target.normals[at[near]]) > ALIKE]
        near = near[~target.border[at[near]]]
        if len(near) < 12:
            return pose
        m = target.normals[at[near]]
        height = np.einsum("ij,ij->i", p[near] - target.points[at[near]], m)
        scale = max(1.4826 * float(np.median(np.abs(height))), 1e-3 * float(tolerance))
        weight = 1.0 / (1.0 + (height / (2.0 * scale)) ** 2)
        # Turns in units of the view's radius, so that turns and shifts weigh alike; free motions stay where they are.
        a = rows((p[near] - middle) / radius, m)
        normal = (a * weight[:, None]).T @ a
        normal[np.diag_indices(6)] += FREE * np.trace(normal)
        step = np.linalg.solve(normal, -(a * weight[:, None]).T @ height)
        step[:3] /= radius
        move = twist(step)
        move[:3, 3] += middle - move[:3, :3] @ middle
        pose = move @ pose
    return pose
