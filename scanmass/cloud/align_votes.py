"""Coarse poses of one view in another's frame, by votes of pairs of oriented points.

Two points with normals have four figures that no motion changes: their distance, the angles of either normal with
the line between them, and the angle between the normals. Pairs alike in both views vote for the motion that lays one
on the other: the point of the first view that a reference point of the second falls on, and the turn about the normal
there (Drost, Ulrich, Navab & Ilic 2010). Nothing is drawn at random, so the same views give the same poses.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from numba import njit

FloatArray = npt.NDArray[np.float64]

STEP = 1.0
"""Distance bins, in coarse cells."""
ANGLES = 12
"""Bins of 15 degrees for each angle."""
PEAKS = 6
"""Poses each of them puts forward."""
RARE = 20.0
"""A pair votes with 1 / (1 + n / this), n pairs of its kind: rare ones tell more."""
TURNS = 30
"""Bins of 12 degrees for the turn about the normal."""
CAP = 300
"""Most pairs of one kind that vote: those of two flat faces would outvote all else and tell nothing."""
REFERENCES = 200
"""Points of the second view that are laid on the first."""
CLOSE_TURN, CLOSE_SHIFT = np.radians(13.0), 1.5
"""Poses nearer than this, in radians and coarse cells, are one."""


@dataclass(frozen=True)
class Votes:
    """Poses (k, 4, 4) that take the second view into the first's frame, most votes first, and their votes (k,)."""

    poses: FloatArray
    votes: FloatArray


@njit(cache=True)
def _kind(p, q, step, most):  # type: ignore[no-untyped-def]
    """The kind of a pair of oriented points (6,), -1 where it has none."""
    dx, dy, dz = q[0] - p[0], q[1] - p[1], q[2] - p[2]
    d = np.sqrt(dx * dx + dy * dy + dz * dz)
    bin_d = int(d / step)
    if d < 0.5 * step or bin_d >= most:
        return -1
    a = np.arccos(min(1.0, max(-1.0, (p[3] * dx + p[4] * dy + p[5] * dz) / d)))
    b = np.arccos(min(1.0, max(-1.0, (q[3] * dx + q[4] * dy + q[5] * dz) / d)))
    c = np.arccos(min(1.0, max(-1.0, p[3] * q[3] + p[4] * q[4] + p[5] * q[5])))
    wide = np.pi / ANGLES
    last = ANGLES - 1
    i, j, k = min(last, int(a / wide)), min(last, int(b / wide)), min(last, int(c / wide))
    return ((bin_d * ANGLES + i) * ANGLES + j) * ANGLES + k


@njit(cache=True)
def _frame(p, out):  # type: ignore[no-untyped-def]
    """Rotation whose first row is the normal of an oriented point (6,)."""
    nx, ny, nz = p[3], p[4], p[5]
    if abs(nx) < 0.9:
        ux, uy, uz = 0.0, nz, -ny
    else:
        ux, uy, uz = -nz, 0.0, nx
    length = np.sqrt(ux * ux + uy * uy + uz * uz)
    ux, uy, uz = ux / length, uy / length, uz / length
    out[0, 0], out[0, 1], out[0, 2] = nx, ny, nz
    out[1, 0], out[1, 1], out[1, 2] = ux, uy, uz
    out[2, 0], out[2, 1], out[2, 2] = ny * uz - nz * uy, nz * ux - nx * uz, nx * uy - ny * ux


@njit(cache=True)
def _turn_of(frame, p, q):  # type: ignore[no-untyped-def]
    """Where the second of a pair lies about the normal of the first, in radians."""
    dx, dy, dz = q[0] - p[0], q[1] - p[1], q[2] - p[2]
    y = frame[1, 0] * dx + frame[1, 1] * dy + frame[1, 2] * dz
    z = frame[2, 0] * dx + frame[2, 1] * dy + frame[2, 2] * dz
    return np.arctan2(z, y)


@njit(cache=True)
def _table(model, step, most):  # type: ignore[no-untyped-def]
    """All pairs of the first view by kind: starts of the kinds, the first point and the turn of each pair."""
    count = np.zeros(most * ANGLES**3 + 1, np.int64)
    m = len(model)
    for i in range(m):
        for j in range(m):
            kind = _kind(model[i], model[j], step, most) if i != j else -1
            if kind >= 0:
                count[kind + 1] += 1
    start = np.cumsum(count)
    place = start[:-1].copy()
    first, turn = np.empty(start[-1], np.int32), np.empty(start[-1], np.float32)
    frame = np.empty((3, 3))
    for i in range(m):
        _frame(model[i], frame)
        for j in range(m):
            kind = _kind(model[i], model[j], step, most) if i != j else -1
            if kind >= 0:
                first[place[kind]] = i
                turn[place[kind]] = _turn_of(frame, model[i], model[j])
                place[kind] += 1
    return start, first, turn


@njit(cache=True)
def _cast(scene, references, start, first, turn, models, step, most):  # type: ignore[no-untyped-def]
    """For each reference point the best few (point of the first view, bin of the turn, votes)."""
    best = np.zeros((len(references), PEAKS, 3))
    box = np.zeros((models, TURNS), np.float64)
    frame = np.empty((3, 3))
    for r in range(len(references)):
        i = references[r]
        box[:] = 0
        _frame(scene[i], frame)
        for j in range(len(scene)):
            kind = _kind(scene[i], scene[j], step, most) if i != j else -1
            if kind < 0:
                continue
            own = _turn_of(frame, scene[i], scene[j])
            low, high = start[kind], start[kind + 1]
            weight = 1.0 / (1.0 + (high - low) / RARE)
            for e in range(low, high, 1 + (high - low) // CAP):
                angle = (turn[e] - own) / (2.0 * np.pi)
                angle -= np.floor(angle)
                box[first[e], int(angle * TURNS) % TURNS] += weight
        for rank in range(PEAKS):
            top = -1.0
            for a in range(models):
                for t in range(TURNS):
                    # Votes near the border of two bins are shared by both.
                    v = box[a, t] + box[a, (t + 1) % TURNS]
                    if v > top:
                        top = v
                        best[r, rank, 0], best[r, rank, 1], best[r, rank, 2] = a, t, v
            at, bin_of_turn = int(best[r, rank, 0]), int(best[r, rank, 1])
            for t in range(-2, 4):
                box[at, (bin_of_turn + t) % TURNS] = 0.0
    return best


def votes(model: FloatArray, scene: FloatArray, cell: float) -> Votes:
    """Poses that lay a second view's oriented points ``scene`` (m, 6) on a first view's ``model`` (n, 6).

    ``cell``: metres, the distance between neighbouring points in both. Poses alike are one and their votes add up.
    """
    step = STEP * cell
    most = int(float(np.linalg.norm(np.ptp(model[:, :3], axis=0))) / step) + 2
    start, first, turn = _table(model, step, most)
    references = np.arange(0, len(scene), -(-len(scene) // REFERENCES))
    found = _cast(scene, references, start, first, turn, len(model), step, most).reshape(-1, 3)
    poses = np.array(
        [_pose(model[int(at)], scene[i], t) for i, (at, t, _) in zip(references.repeat(PEAKS), found, strict=True)]
    )
    return _gathered(poses, found[:, 2], scene[:, :3].mean(axis=0), cell)


def _pose(onto: FloatArray, point: FloatArray, bin_of_turn: float) -> FloatArray:
    """The motion (4, 4) that lays an oriented point (6,) on another with the turn of a bin, the middle of a pair."""
    there, here = np.empty((3, 3)), np.empty((3, 3))
    _frame(onto, there)
    _frame(point, here)
    angle = 2.0 * np.pi * (bin_of_turn + 1.0) / TURNS
    c, s = np.cos(angle), np.sin(angle)
    pose = np.eye(4)
    pose[:3, :3] = there.T @ np.array([[1.0, 0.0, 0.0], [0.0, c, -s], [0.0, s, c]]) @ here
    pose[:3, 3] = onto[:3] - pose[:3, :3] @ point[:3]
    return pose


def _gathered(poses: FloatArray, counts: FloatArray, middle: FloatArray, cell: float) -> Votes:
    """Poses alike as one: that with most votes, with the votes of all."""
    order = np.argsort(-counts, kind="stable")
    poses, counts = poses[order], counts[order]
    places = poses[:, :3, :3] @ middle + poses[:, :3, 3]
    left = np.ones(len(poses), np.bool_)
    kept, sums = [], []
    for k in range(len(poses)):
        if not left[k]:
            continue
        cosine = 0.5 * (np.einsum("nij,ij->n", poses[:, :3, :3], poses[k, :3, :3]) - 1.0)
        near = left & (cosine > np.cos(CLOSE_TURN))
        near &= np.linalg.norm(places - places[k], axis=1) < CLOSE_SHIFT * cell
        kept.append(poses[k])
        sums.append(float(counts[near].sum()))
        left &= ~near
    turn = np.argsort(-np.array(sums), kind="stable")
    return Votes(np.array(kept)[turn], np.array(sums)[turn])
