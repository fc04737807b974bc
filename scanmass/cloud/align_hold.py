"""How firmly views hold each other, and which motions of a symmetric body nothing can tell."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.cloud.align_fit import fit, inverse, rows, twist
from scanmass.cloud.align_joint import Equations
from scanmass.cloud.align_match import Scale
from scanmass.cloud.align_samples import ViewSamples

FloatArray = npt.NDArray[np.float64]

FLAT = 0.004
"""Mean square of how far a motion of unit size moves the surface along its normals, below which it may be a motion of
the body onto itself; normals that are 3 degrees off make 0.003 of nothing."""
TOGETHER = 20.0
"""Samples whose errors go together: as many times fewer tell."""
TRIALS = (np.radians(25.0), np.radians(70.0))
SLID = 0.06
"""Shift, in sizes, that a body that slides along itself is tried with."""


@dataclass(frozen=True)
class Free:
    """Motions (k, 6) of the body onto itself, turns in units of 1 / radius about ``middle`` (3,), and what to say."""

    motions: FloatArray
    middle: FloatArray
    radius: float
    text: str | None


def free_motions(views: list[ViewSamples], poses: dict[int, FloatArray], scale: Scale) -> Free:
    """The motions that lay the whole surface on itself, tried out by as large a step as shows.

    A surface of revolution turns about its axis, an extrusion slides along itself, a ball turns anyhow.
    """
    points, normals = [], []
    for v, pose in poses.items():
        which = views[v].asked
        points.append(views[v].points[which] @ pose[:3, :3].T + pose[:3, 3])
        normals.append(views[v].normals[which] @ pose[:3, :3].T)
    p, n = np.concatenate(points), np.concatenate(normals)
    middle = p.mean(axis=0)
    radius = float(np.linalg.norm(p - middle, axis=1).mean())
    a = rows((p - middle) / radius, n)
    size, motions = np.linalg.eigh(a.T @ a / len(a))
    found = [motions[:, k] for k in range(3) if size[k] < FLAT]
    found = [m for m in found if _slides(views, poses, m, middle, radius, scale)]
    return Free(np.array(found).reshape(-1, 6), middle, radius, _named(found, middle, radius))


def _slides(
    views: list[ViewSamples],
    poses: dict[int, FloatArray],
    motion: FloatArray,
    middle: FloatArray,
    radius: float,
    scale: Scale,
) -> bool:
    """Whether views moved a long way by ``motion`` (6,) contradict the others no more than they do now."""
    turning = float(np.linalg.norm(motion[:3])) > 0.3
    steps = TRIALS if turning else (SLID * scale.size / radius, -SLID * scale.size / radius)
    for step in steps:
        if not turning:
            move = twist(np.concatenate([np.zeros(3), step * radius * motion[3:] / np.linalg.norm(motion[3:])]))
        else:
            pivot = middle + radius * np.cross(motion[:3], motion[3:]) / float(motion[:3] @ motion[:3])
            move = twist(np.concatenate([step * motion[:3] / np.linalg.norm(motion[:3]), np.zeros(3)]))
            move[:3, 3] = pivot - move[:3, :3] @ pivot
        if not _as_good(views, poses, move, scale):
            return False
    return True


def _as_good(views: list[ViewSamples], poses: dict[int, FloatArray], move: FloatArray, scale: Scale) -> bool:
    numbers = sorted(poses)
    matched, against = 0, 0
    for v in numbers:
        for u in numbers:
            if u != v:
                found = fit(
                    views[u], views[v], inverse(poses[u]) @ move @ poses[v], 2.0 * scale.tolerance, scale.reach, 4
                )
                matched, against = matched + found.matched, against + found.against + found.through
    return matched > 0 and against < 0.01 * matched


def _named(motions: list[FloatArray], middle: FloatArray, radius: float) -> str | None:
    if not motions:
        return None
    turns = [m for m in motions if float(np.linalg.norm(m[:3])) > 0.3]
    if len(turns) >= 3:
        place = _place(_pivot(np.array(motions), middle, radius))
        return f"views can turn freely about any axis through {place} (a ball)"
    said = []
    for m in motions:
        if any(m is t for t in turns):
            along = m[:3] / np.linalg.norm(m[:3])
            through = middle + radius * np.cross(m[:3], m[3:]) / float(m[:3] @ m[:3])
            said.append(f"turn freely about an axis through {_place(through)} along {_way(along)}")
        else:
            said.append(f"slide freely along {_way(m[3:] / np.linalg.norm(m[3:]))}")
    return "views can " + " and ".join(said)


def _pivot(motions: FloatArray, middle: FloatArray, radius: float) -> FloatArray:
    """The point that stays where it is under all turns: t + w x c = 0."""
    left = np.concatenate([np.cross(m[:3], np.eye(3)).T for m in motions])
    c, *_ = np.linalg.lstsq(left, -np.concatenate([m[3:] for m in motions]), rcond=None)
    pivot: FloatArray = middle + radius * c
    return pivot


def _place(point: FloatArray) -> str:
    return f"({', '.join(f'{1000 * x:.1f}' for x in point)}) mm"


def _way(direction: FloatArray) -> str:
    turned = direction * np.sign(direction[np.argmax(np.abs(direction))])
    return f"({', '.join(f'{x + 0.0:.3f}' for x in turned)})"


def looseness(equations: Equations, free: Free) -> tuple[float, FloatArray]:
    """Standard deviation, in metres, of the joint motion that is held least, and that motion (6v,), free ones aside."""
    n = len(equations.matrix) // 6
    matrix = equations.matrix.copy()
    stiff = float(np.trace(matrix)) / len(matrix)
    for motion in free.motions:
        # From the middle and radius of the body to those of the equations.
        turn = motion[:3] / free.radius
        shift = motion[3:] + np.cross(turn, equations.middle - free.middle)
        moved = np.concatenate([turn * equations.radius, shift])
        moved /= np.linalg.norm(moved)
        for v in range(n):
            i = slice(6 * v, 6 * v + 6)
            matrix[i, i] += stiff * np.outer(moved, moved)
    values, vectors = np.linalg.eigh(matrix[6:, 6:])
    least = max(float(values[0]), 1e-12 * stiff)
    return equations.scale * float(np.sqrt(TOGETHER / least)), np.concatenate([np.zeros(6), vectors[:, 0]])
