"""Several views of one object, each in a frame of its own, brought into the frame of the first; or a refusal."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import combinations

import numpy as np
import numpy.typing as npt

from scanmass.cloud.align_fit import Fit, fit, inverse, refined
from scanmass.cloud.align_grow import Assembly, assemblies, same_way
from scanmass.cloud.align_hold import Free, free_motions, looseness
from scanmass.cloud.align_joint import joint_equations, settle
from scanmass.cloud.align_match import Candidate, Scale, candidates
from scanmass.cloud.align_rivals import rivals
from scanmass.cloud.align_samples import ViewSamples
from scanmass.errors import Declined, Note
from scanmass.progress import Progress, silent

FloatArray = npt.NDArray[np.float64]

LEAST_OVERLAP, LISTED = 0.1, 0.05
"""Share of the smaller view's samples on another's surface below which two views do not hold each other, and from which
they are listed."""
MOST_AGAINST, CHANCE = 0.04, 15
"""Contradicting samples, as a share and a number beyond it, above which a pair is refused."""
RIVAL, RIVAL_FLOOR = 1.4, 0.0006
"""Another way to bring the views together is as good where less than this many times as much, and this share of the
samples more, speaks against it."""
FARTHER = 1.12
"""Another way is not as good where samples that agree lie this many times as far apart, all pairs together."""
ANOTHER = 5.0
"""Slack within which ways are one and the same that was settled more or less well: 10 degrees, 6 % of the size."""
BETTER = 3
"""Times that a better way among the rivals is taken up."""
NOISES, LEAST_TOLERANCE = 5.0, 0.001
"""Tolerance of one surface: noises of a sample, but at least this share of the size."""
LOOSE, TOO_LOOSE = 0.001, 0.005
"""Doubt of the least held motion, in sizes, that is warned of, and that is refused."""
WORDS = "pairs of oriented points, then point to plane over all pairs at once"


@dataclass(frozen=True)
class Pair:
    """How two views lie on each other: numbers of views, share of the smaller on the other, metres, radians.

    ``shift``, ``rotation``: how far the pair by itself would still move from where all views together put it.
    """

    first: int
    second: int
    overlap: float
    rms: float
    shift: float
    rotation: float


@dataclass(frozen=True)
class Alignment:
    """``poses`` (v, 4, 4) that take each view into the frame of the first; the ``pairs`` that overlap.

    ``symmetric``: which motions of the views nothing can tell, None where none.
    """

    poses: FloatArray
    pairs: tuple[Pair, ...]
    symmetric: str | None
    warnings: tuple[Note, ...] = field(default=())


def scale_of(views: Sequence[ViewSamples]) -> Scale:
    """The lengths that belong to these views."""
    size = float(np.median([view.size for view in views]))
    noise = float(np.median([view.noise for view in views]))
    return Scale(size, max(NOISES * noise, LEAST_TOLERANCE * size))


def align(views: Sequence[ViewSamples], progress: Progress = silent) -> Alignment:
    """Views, each in its own frame, brought into the frame of the first.

    Raises
    ------
    Declined
        If any view cannot be placed so that the answer can be trusted; the message names the pair of views and why.
    """
    views = list(views)
    scale = scale_of(views)
    pairs = list(combinations(range(len(views)), 2))
    found: list[Candidate] = []
    for done, (i, j) in enumerate(pairs):
        found += candidates(views, i, j, scale)
        progress("align", done, len(pairs) + 1)
    ways = assemblies(views, found, scale)
    whole = [way for way in ways if len(way.poses) == len(views)]
    if not whole:
        raise _not_placed(views, found, ways, scale)
    settled = _distinct([settle(views, way.poses, scale, rounds=10, stride=3) for way in whole], views, scale)
    ranked = sorted(((speaks_against(views, poses, scale), k) for k, poses in enumerate(settled)))
    against, first = ranked[0]
    poses, others = settled[first], [settled[k] for _, k in ranked[1:]]
    for _ in range(BETTER):
        new = rivals(views, found, poses, scale)
        others.append(poses)
        others += new
        shares = [speaks_against(views, way, scale) for way in new]
        if not new or min(shares) >= against:
            break
        against, poses = min(shares), new[int(np.argmin(shares))]
    poses = settle(views, poses, scale, rounds=40)
    root = inverse(poses[0])
    poses = {v: root @ pose for v, pose in poses.items()}
    free = free_motions(views, poses, scale)
    if free.text is None:
        _refuse_rival(views, poses, others, scale)
    warnings = checked(views, poses, scale, free)
    progress("align", len(pairs) + 1, len(pairs) + 1)
    return Alignment(
        np.array([poses[v] for v in range(len(views))]),
        measured(views, poses, scale),
        free.text,
        warnings,
    )


def speaks_against(views: list[ViewSamples], poses: dict[int, FloatArray], scale: Scale) -> float:
    """Share of the samples that tell, over all pairs, that contradict ``poses``; every second one is asked."""
    return _told(views, poses, scale)[0]


def _told(views: list[ViewSamples], poses: dict[int, FloatArray], scale: Scale) -> tuple[float, float]:
    """The share of the samples that contradict, and the root mean square of the heights of the rest, in metres."""
    matched, against, squares = 0, 0, 0.0
    for i, j in combinations(sorted(poses), 2):
        met = fit(views[i], views[j], inverse(poses[i]) @ poses[j], scale.tolerance, scale.reach, 2)
        matched += met.matched
        against += met.against + met.through
        squares += met.matched * met.rms**2
    return against / max(matched, 1), float(np.sqrt(squares / max(matched, 1)))


def _distinct(ways: list[dict[int, FloatArray]], views: list[ViewSamples], scale: Scale) -> list[dict[int, FloatArray]]:
    kept: list[dict[int, FloatArray]] = []
    for poses in ways:
        if not any(same_way(poses, other, views, scale) for other in kept):
            kept.append(poses)
    return kept


def checked(views: list[ViewSamples], poses: dict[int, FloatArray], scale: Scale, free: Free) -> tuple[Note, ...]:
    """Warnings about poses that can be trusted.

    Raises
    ------
    Declined
        Where a pair contradicts itself, a view hangs on no other, or nothing holds the views against each other.
    """
    fits = {
        (i, j): fit(views[i], views[j], inverse(poses[i]) @ poses[j], scale.tolerance, scale.reach)
        for i, j in combinations(sorted(poses), 2)
    }
    for (i, j), found in fits.items():
        if found.against + found.through > MOST_AGAINST * (found.matched + found.against) + CHANCE:
            raise Declined(
                f"the views {views[i].name} and {views[j].name} contradict each other: where both looked, "
                f"{100 * found.contradiction:.0f} % of the points of one lie where the other saw its surface elsewhere "
                "or saw through",
                allowed=REMEDY,
            )
    _refuse_apart(views, fits)
    equations = joint_equations(views, poses, scale.tolerance, scale.reach)
    notes = []
    if equations is not None:
        doubt, motion = looseness(equations, free)
        pair = _least_held(views, motion, fits)
        if doubt > TOO_LOOSE * scale.size:
            raise Declined(
                f"the views {pair} can slide on each other: what they share (a plane, say) leaves "
                f"{1000 * doubt:.2g} mm open",
                allowed=REMEDY,
            )
        if doubt > LOOSE * scale.size:
            notes.append(
                Note(
                    "views-loosely-held",
                    f"In one direction the views hold each other only to about {1000 * doubt:.2g} mm (between {pair}). "
                    "Views that overlap more, or known poses, would hold them.",
                )
            )
    if free.text is not None:
        notes.append(
            Note(
                "views-slide",
                f"The body is symmetric: {free.text}. Their relative turn or place along it is not known; mass and "
                "centre of mass are hardly touched by it, the axes across it and any mark on the surface are.",
            )
        )
    return tuple(notes)


REMEDY = "scan more views with more overlap, or give the poses (scan.poses), or measure fewer views"


def _refuse_apart(views: list[ViewSamples], fits: dict[tuple[int, int], Fit]) -> None:
    """Refuse views that do not hang together by overlap."""
    together = {0}
    for _ in views:
        for (i, j), found in fits.items():
            if found.overlap >= LEAST_OVERLAP and (i in together) != (j in together):
                together |= {i, j}
    across = {k: found for k, found in fits.items() if (k[0] in together) != (k[1] in together)}
    if across:
        i, j = max(across, key=lambda k: across[k].overlap)
        raise Declined(
            f"the views {views[i].name} and {views[j].name} overlap in only {100 * across[i, j].overlap:.0f} % of "
            f"their points, and nothing else links {views[i].name} to {views[j].name}",
            allowed=REMEDY,
        )


def _least_held(views: list[ViewSamples], motion: FloatArray, fits: dict[tuple[int, int], Fit]) -> str:
    """The names of the overlapping pair that the least held motion parts most."""
    steps = motion.reshape(-1, 6)
    held = {k: float(np.linalg.norm(steps[k[0]] - steps[k[1]])) for k, f in fits.items() if f.matched}
    i, j = max(held, key=lambda k: held[k]) if held else (0, 1)
    return f"{views[i].name} and {views[j].name}"


def _refuse_rival(
    views: list[ViewSamples], poses: dict[int, FloatArray], others: list[dict[int, FloatArray]], scale: Scale
) -> None:
    """Refuse where the views come together in another way about as well."""
    against, rms = _told(views, poses, scale)
    for other in others:
        if same_way(poses, other, views, scale, ANOTHER):
            continue
        theirs, their_rms = _told(views, other, scale)
        if theirs > RIVAL * against + RIVAL_FLOOR or their_rms > FARTHER * rms:
            continue
        turns = {}
        for i, j in combinations(sorted(poses), 2):
            a, b = inverse(poses[i]) @ poses[j], inverse(other[i]) @ other[j]
            cosine = 0.5 * (np.trace((inverse(a) @ b)[:3, :3]) - 1.0)
            turns[i, j] = float(np.degrees(np.arccos(np.clip(cosine, -1.0, 1.0))))
        i, j = max(turns, key=lambda pair: turns[pair])
        how = f", {turns[i, j]:.0f} degrees apart," if turns[i, j] > 1.0 else ", shifted on each other,"
        raise Declined(
            f"the views {views[i].name} and {views[j].name} fit in two ways{how} and nothing tells which is right",
            allowed="give the poses (scan.poses), or scan more of what makes the object's sides differ",
        )


def _not_placed(views: list[ViewSamples], found: list[Candidate], ways: list[Assembly], scale: Scale) -> Declined:
    """The refusal for a view that fits nowhere: with which view it came nearest, and why that is not enough."""
    placed = set(ways[0].poses) if ways else {0}
    view = next(v for v in range(len(views)) if v not in placed)
    tried = [c for c in found if (c.one in placed) != (c.other in placed)]
    if not tried:
        other = 0 if view else 1
        return Declined(
            f"the views {views[other].name} and {views[view].name} do not overlap, nor does {views[view].name} overlap "
            "any other view",
            allowed=REMEDY,
        )
    best = max(tried, key=lambda c: c.score)
    return Declined(
        f"the views {views[best.one].name} and {views[best.other].name} do not fit together: in the best pose found "
        f"they share {100 * best.fit.overlap:.0f} % of their points, and "
        f"{100 * best.fit.contradiction:.0f} % contradict",
        allowed=REMEDY,
    )


def measured(views: list[ViewSamples], poses: dict[int, FloatArray], scale: Scale) -> tuple[Pair, ...]:
    """The pairs of views that overlap, and how well they lie on each other."""
    result = []
    for i, j in combinations(sorted(poses), 2):
        pose = inverse(poses[i]) @ poses[j]
        found = fit(views[i], views[j], pose, scale.tolerance, scale.reach)
        if found.overlap < LISTED:
            continue
        alone = refined(views[i], views[j], pose, np.full(6, 2.0 * scale.tolerance), views[j].asked)
        between = inverse(pose) @ alone
        middle = views[j].points.mean(axis=0)
        shift = float(np.linalg.norm(between[:3, :3] @ middle + between[:3, 3] - middle))
        turn = float(np.arccos(np.clip(0.5 * (np.trace(between[:3, :3]) - 1.0), -1.0, 1.0)))
        result.append(Pair(i, j, found.overlap, found.rms, shift, turn))
    return tuple(result)
