"""Views that are said to be in one frame: is it so?"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

import numpy as np
import numpy.typing as npt

from scanmass.cloud.align import Pair, measured, scale_of
from scanmass.cloud.align_fit import Fit, fit, inverse
from scanmass.cloud.align_match import Scale
from scanmass.cloud.align_samples import ViewSamples
from scanmass.errors import Declined, Note

FloatArray = npt.NDArray[np.float64]

ROUGH = 0.006
"""Heights within this share of the size are of one surface: poses of real scans are off by a tenth of it."""
WRONG, TELLING = 0.15, 300
"""Share of contradicting samples above which two views are not in one frame, where at least so many tell."""
TOUCH = 0.03
APART = 1.0
"""Sizes between two views above which they cannot be of one object in one frame."""


def check_given(
    views: list[ViewSamples], given: Sequence[Sequence[float]] | None
) -> tuple[tuple[Pair, ...], tuple[Note, ...]]:
    """The pairs that overlap, and notes, of views in one frame; ``given``: the numbers of the poses as written.

    Raises
    ------
    Declined
        If two views cannot be in one frame; the message names them, and how the poses may have been meant.
    """
    if len(views) < 2:
        return (), ()
    scale = scale_of(views)
    rough = Scale(scale.size, max(scale.tolerance, ROUGH * scale.size))
    wrong = failing(views, [np.eye(4)] * len(views), rough)
    if wrong is not None:
        raise _refusal(views, wrong, given, rough)
    still = {v: np.eye(4) for v in range(len(views))}
    pairs = measured(views, still, rough)
    return pairs, _unchecked(views, pairs)


def failing(views: list[ViewSamples], poses: Sequence[FloatArray], scale: Scale) -> tuple[int, int, str] | None:
    """The two views that contradict each other most, and how; None where none do."""
    worst, found = 0.0, None
    for i, j in combinations(range(len(views)), 2):
        pose = inverse(poses[i]) @ poses[j]
        met = fit(views[i], views[j], pose, scale.tolerance, scale.reach, 2)
        share = met.contradiction
        if met.matched + met.against + met.through >= TELLING / 2 and share > max(WRONG, worst):
            worst, found = share, (i, j, _against(met))
        gap = _gap(views[i], views[j], pose)
        if gap > APART * scale.size and worst < 1.0:
            worst, found = 1.0, (i, j, f"lie {1000 * gap:.4g} mm apart, and the object is {1000 * scale.size:.4g} mm")
    return found


def _against(met: Fit) -> str:
    return (
        f"share {100 * met.overlap:.0f} % of their points, and {100 * met.contradiction:.0f} % of those that tell "
        "contradict: the other view saw its surface elsewhere or saw through"
    )


def _gap(one: ViewSamples, other: ViewSamples, pose: FloatArray) -> float:
    """Least distance between two views, from some of their samples."""
    asked = other.points[other.asked[::20]]
    if len(asked) == 0:
        return 0.0
    distance, _ = one.tree.query(asked @ pose[:3, :3].T + pose[:3, 3])
    return float(distance.min())


def _refusal(
    views: list[ViewSamples], wrong: tuple[int, int, str], given: Sequence[Sequence[float]] | None, scale: Scale
) -> Declined:
    i, j, how = wrong
    seen = f"the views {views[i].name} and {views[j].name} are not in one frame: they {how}"
    if given is None:
        return Declined(
            seen, allowed="if each view is in a frame of its own, set scan.frames to own, or give scan.poses"
        )
    meant = meant_poses(views, given, scale)
    if meant is not None:
        return Declined(f"with the poses given, {seen}", allowed=f"they fit {meant}: correct scan.poses")
    return Declined(
        f"with the poses given, {seen}",
        allowed="poses go from the view to the object, p_object = R p_view + t; correct scan.poses, or leave it out "
        "and set scan.frames to own",
    )


def meant_poses(views: list[ViewSamples], given: Sequence[Sequence[float]], scale: Scale) -> str | None:
    """How else the poses may have been meant, by which the views fit; None where no way does.

    ``views`` have the poses as written applied, relative to the first.
    """
    as_read = [_matrix(numbers, "as written") for numbers in given]
    root = inverse(as_read[0])
    ways: dict[str, str | float] = {
        "taken the other way round, from the object to the view (the inverse)": "inverse",
        "with their quaternions read as x y z w": "xyzw",
        "with their rotations transposed": "transposed",
        **{f"with their translations {f:g} times as long (another unit)": f for f in _FACTORS},
    }
    best: tuple[int, str] | None = None
    for words, way in ways.items():
        try:
            poses = [_matrix(numbers, way) for numbers in given]
        except ValueError:
            continue
        first = inverse(poses[0])
        # Undo what was applied, then apply the other reading.
        tried = [first @ p @ inverse(root @ a) for p, a in zip(poses, as_read, strict=True)]
        if failing(views, tried, scale) is not None:
            continue
        matched = sum(
            fit(views[i], views[j], inverse(tried[i]) @ tried[j], scale.tolerance, scale.reach, 4).matched
            for i, j in combinations(range(len(views)), 2)
        )
        if matched > 100 and (best is None or matched > best[0]):
            best = (matched, words)
    return None if best is None else best[1]


_FACTORS = (1000.0, 0.001, 10.0, 0.1, 25.4, 1.0 / 25.4)


def _matrix(numbers: Sequence[float], way: str | float) -> FloatArray:
    """A pose (4, 4) of its 16 or 7 numbers, read in another way."""
    pose = np.eye(4)
    values = np.asarray(numbers, np.float64)
    if len(values) == 16:
        if way == "xyzw":
            raise ValueError("a matrix has no quaternion")
        pose = values.reshape(4, 4).copy()
    else:
        q = values[[3, 0, 1, 2]] if way == "xyzw" else values[:4]
        w, x, y, z = q / np.linalg.norm(q)
        cross = np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])
        pose[:3, :3] = np.eye(3) + 2.0 * w * cross + 2.0 * cross @ cross
        pose[:3, 3] = values[4:]
    if way == "inverse":
        return inverse(pose)
    if way == "transposed":
        pose[:3, :3] = pose[:3, :3].T.copy()
    elif isinstance(way, float):
        pose[:3, 3] *= way
    return pose


def _unchecked(views: list[ViewSamples], pairs: tuple[Pair, ...]) -> tuple[Note, ...]:
    """A note where the overlap of views does not show that all are in one frame."""
    together = {0}
    for _ in views:
        for pair in pairs:
            if pair.overlap >= TOUCH and (pair.first in together) != (pair.second in together):
                together |= {pair.first, pair.second}
    if len(together) == len(views):
        return ()
    apart = next(v for v in range(len(views)) if v not in together)
    text = (
        f"{views[apart].name} overlaps too little with {views[0].name} and what goes with it to show that they are in "
        "one frame; that is taken from the files."
    )
    return (Note("views-unchecked", text),)
