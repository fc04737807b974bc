"""All placed views laid on each other at once, point to plane, so that loops close."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.cloud.align_fit import FREE, inverse, meet, rows, twist
from scanmass.cloud.align_match import Scale
from scanmass.cloud.align_samples import ViewSamples

FloatArray = npt.NDArray[np.float64]

STILL = 3e-6
"""Steps below this share of the size end the rounds."""
PARALLEL = 0.95
"""Cosine between normals below which a pair takes no part: a normal blended over an edge pushes sideways."""


@dataclass(frozen=True)
class Equations:
    """Normal equations of the motions of all views about ``middle`` (3,), turns in units of 1 / ``radius``.

    ``matrix`` (6v, 6v), ``right`` (6v,); ``weight`` (v,): samples of each view that took part, by weight; ``scale``:
    metres, robust deviation of the heights.
    """

    matrix: FloatArray
    right: FloatArray
    weight: FloatArray
    middle: FloatArray
    radius: float
    scale: float


def settle(
    views: list[ViewSamples], poses: dict[int, FloatArray], scale: Scale, *, rounds: int = 8, stride: int = 1
) -> dict[int, FloatArray]:
    """The poses (4, 4) after joint least squares over all pairs that overlap; the first view stays where it is.

    Each round looks up the nearest samples anew; heights are weighed by Cauchy's function of their robust deviation,
    so what only one view saw has no say. Motions that nothing holds stay as they are.
    """
    numbers = sorted(poses)
    place = dict(poses)
    for k in range(rounds):
        tolerance = scale.tolerance * max(1.0, 4.0 * 0.5**k)
        equations = joint_equations(views, place, tolerance, scale.reach, stride)
        if equations is None:
            break
        size = len(equations.matrix)
        matrix = equations.matrix + FREE * np.trace(equations.matrix) / size * np.eye(size)
        step = np.zeros(6 * len(numbers))
        step[6:] = np.linalg.solve(matrix[6:, 6:], -equations.right[6:])
        for v, number in enumerate(numbers):
            place[number] = _moved(step[6 * v : 6 * v + 6], equations) @ place[number]
        if tolerance == scale.tolerance and float(np.abs(step).max()) < STILL * scale.size:
            break
    return place


def _moved(step: FloatArray, equations: Equations) -> FloatArray:
    motion = np.concatenate([step[:3] / equations.radius, step[3:]])
    move = twist(motion)
    move[:3, 3] += equations.middle - move[:3, :3] @ equations.middle
    return move


def joint_equations(
    views: list[ViewSamples], poses: dict[int, FloatArray], tolerance: float, reach: float, stride: int = 1
) -> Equations | None:
    """Normal equations at ``poses``, from all ordered pairs of views; None where nothing meets."""
    numbers = sorted(poses)
    parts = []
    for v, number in enumerate(numbers):
        view, pose = views[number], poses[number]
        which = view.asked[::stride]
        p = view.points[which] @ pose[:3, :3].T + pose[:3, 3]
        n = view.normals[which] @ pose[:3, :3].T
        for u, other in enumerate(numbers):
            if u == v:
                continue
            back = inverse(poses[other])
            met = meet(views[other], p @ back[:3, :3].T + back[:3, 3], n @ back[:3, :3].T, tolerance, reach)
            used = met.agree & (met.turn > PARALLEL)
            if used.sum() >= 12:
                theirs = views[other].normals[met.at[used]] @ poses[other][:3, :3].T
                between = theirs + n[used]
                between /= np.linalg.norm(between, axis=1, keepdims=True)
                foot = views[other].points[met.at[used]] @ poses[other][:3, :3].T + poses[other][:3, 3]
                height = np.einsum("ij,ij->i", p[used] - foot, between)
                parts.append((v, u, p[used], between, height))
    if not parts:
        return None
    everything = np.concatenate([part[2] for part in parts])
    middle = everything.mean(axis=0)
    radius = float(np.linalg.norm(everything - middle, axis=1).mean())
    scale = 1.4826 * float(np.median(np.abs(np.concatenate([part[4] for part in parts]))))
    scale = max(scale, 1e-3 * tolerance)
    size = 6 * len(numbers)
    matrix, right, weight = np.zeros((size, size)), np.zeros(size), np.zeros(len(numbers))
    for v, u, p, facing, height in parts:
        a = rows((p - middle) / radius, facing)
        w = 1.0 / (1.0 + (height / (2.0 * scale)) ** 2)
        block, force = (a * w[:, None]).T @ a, (a * w[:, None]).T @ height
        i, j = slice(6 * v, 6 * v + 6), slice(6 * u, 6 * u + 6)
        matrix[i, i] += block
        matrix[j, j] += block
        matrix[i, j] -= block
        matrix[j, i] -= block
        right[i] += force
        right[j] -= force
        weight[v] += w.sum()
        weight[u] += w.sum()
    return Equations(matrix, right, weight, middle, radius, scale)
