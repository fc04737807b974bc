"""Unit outward normals for every sample, or a refusal where outside cannot be told from inside."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Literal

import numpy as np
import numpy.typing as npt

from scanmass.cloud.cloud import Cloud
from scanmass.cloud.normals import RawNormals, raw_normals
from scanmass.cloud.sides import Floor, ray_evidence, scanner_evidence, vote
from scanmass.errors import Declined, Note
from scanmass.progress import Progress, silent

FloatArray = npt.NDArray[np.float64]
Method = Literal["scanner", "file", "escape rays", "mixed"]

VOTERS = 12
MOST_RAYED = 40_000
"""Samples that rays are cast from; the rest hear from their neighbours."""
UNSURE = 0.05
"""A sample with less evidence than this after the votes is undecided."""
MOST_UNDECIDED = 0.04
"""Share of undecided samples above which orientation is refused."""
MOST_SILENT = 0.25
"""Share of rayed samples without any evidence of their own above which the votes are not believed."""
AGREE = 0.93
"""Normals of the file are taken when they agree with the rays, or oppose them, at this share of samples or more."""
DOUBT = 0.15
"""Share of samples where scanner positions contradict the rays above which they are not believed."""

SHEET = 3.0
"""Spread across, over the noise off local planes, below which points are one flat sheet: 1.5 for normal noise."""
SLENDER = 0.005
"""Spread across over spread along below which what cannot be oriented is called a line."""


@dataclass(frozen=True)
class Oriented:
    """``cloud`` with unit outward normals; what told the sides; ``undecided``: share of samples left without evidence.

    ``noise``: median deviation of samples off the plane of their neighbours, in metres.
    """

    cloud: Cloud
    method: Method
    undecided: float
    noise: float
    assumptions: tuple[Note, ...] = field(default=())
    warnings: tuple[Note, ...] = field(default=())


def orient(cloud: Cloud, *, floor: Floor | None = None, progress: Progress = silent) -> Oriented:
    """The cloud with unit outward normals.

    Normals come from the neighbours of each sample; their side from the scanner's position where it is known, else
    from the file's own normals where the escape rays bear them out, else from the rays; then ten rounds of votes
    among 12 neighbours. Samples, their order and their views stay as they are.

    ``floor`` (up, height): the plane the object stood on, {x: x.up = height}, where one is known. It keeps rays inside
    the object from leaving through an underside that was not seen; a flat body with bores needs it.

    Raises
    ------
    Declined
        More than 4 % of the samples have no side after the votes, or the cloud holds fewer than 10 samples.
    """
    if len(cloud.points) < 10:
        raise Declined(f"{len(cloud.points)} points are too few to tell a surface's sides", allowed="scan more of it")
    progress("normals", 0, 3)
    raw = raw_normals(cloud.points)
    progress("normals", 1, 3)
    rays = _rays(cloud.points, raw, floor)
    progress("normals", 2, 3)
    seen = scanner_evidence(cloud.points, raw.normals, cloud.scanners[cloud.view])
    known = np.isfinite(cloud.scanners).all(axis=1).reshape(-1)[cloud.view]
    evidence, method, notes = _weighed(cloud, raw, rays, seen, known)
    belief = vote(cloud.points, raw.normals, raw.index[:, :VOTERS], evidence)
    undecided = float(np.mean(np.abs(belief) < UNSURE))
    if method == "escape rays":
        # Votes must not turn the word of a few into a verdict on the many that have none.
        silent_share = float(np.mean(evidence[:: _stride(cloud.points)] == 0))
        undecided = silent_share if silent_share > MOST_SILENT else undecided
    if undecided > MOST_UNDECIDED:
        _refuse_sheet(cloud.points, raw.noise)
        raise Declined(
            f"for {100 * undecided:.0f} % of the points outside cannot be told from inside",
            allowed="give a scan with scanner positions or outward normals, scan more of the object, "
            "or (walls thinner than a few point spacings) scan it more densely",
        )
    normals = raw.normals * np.where(belief < 0, -1.0, 1.0)[:, None]
    progress("normals", 3, 3)
    return Oriented(replace(cloud, normals=normals), method, undecided, raw.noise, warnings=tuple(notes))


def _refuse_sheet(points: FloatArray, noise: float) -> None:
    """Say so where the points have no inside because they are one flat sheet, or a line, with noise."""
    middle = points - points.mean(axis=0)
    across, wide, along = np.sqrt(np.maximum(np.linalg.eigvalsh(middle.T @ middle / len(points)), 0.0))
    if wide <= SLENDER * along:
        shape = "on a line"
    elif across <= SHEET * noise:
        shape = "in one plane"
    else:
        return
    raise Declined(
        f"but for noise all points lie {shape}, so there is no inside to weigh",
        allowed="scan the other sides of the object too, or crop less of it",
    )


def _rays(points: FloatArray, raw: RawNormals, floor: Floor | None) -> FloatArray:
    asked = np.arange(0, len(points), _stride(points))
    evidence = np.zeros(len(points))
    evidence[asked] = ray_evidence(points, raw, asked, floor)
    return evidence


def _stride(points: FloatArray) -> int:
    return -(-len(points) // MOST_RAYED)


def _weighed(
    cloud: Cloud, raw: RawNormals, rays: FloatArray, seen: FloatArray, known: npt.NDArray[np.bool_]
) -> tuple[FloatArray, Method, list[Note]]:
    """The evidence to vote on, by the ladder scanner, file, rays; with what had to be said about it."""
    notes: list[Note] = []
    if known.any():
        both = known & (rays != 0) & (seen != 0)
        against = float(np.mean((rays * seen)[both] < 0)) if both.any() else 0.0
        if against <= DOUBT:
            if known.mean() > 0.95:
                return seen, "scanner", notes
            return np.where(known, seen, rays), "mixed", notes
        notes.append(
            Note(
                "scanner-positions-doubtful",
                f"At {100 * against:.0f} % of the points the scanner would have looked through the object; the scanner "
                "positions of the file were not used to tell outside from inside.",
            )
        )
    if cloud.file_normals is None:
        return rays, "escape rays", notes
    own, trusted, said = _from_file(cloud, raw, rays)
    return (own, "file", notes + said) if trusted else (rays, "escape rays", notes + said)


def _from_file(cloud: Cloud, raw: RawNormals, rays: FloatArray) -> tuple[FloatArray, bool, list[Note]]:
    """Evidence (n,) of the file's normals, whether it can be used, and what is odd about it."""
    assert cloud.file_normals is not None
    length = np.linalg.norm(np.nan_to_num(cloud.file_normals), axis=1)
    cosine = np.einsum("ij,ij->i", np.nan_to_num(cloud.file_normals), raw.normals) / np.where(length > 0, length, 1.0)
    own = np.clip(cosine / 0.3, -1.0, 1.0)
    told = vote(cloud.points, raw.normals, raw.index[:, :VOTERS], rays)
    both = (np.abs(told) > UNSURE) & (np.abs(own) > 0.5)
    lying = float(np.mean(np.abs(own) < 0.5))
    if lying > 0.3 or both.mean() < 0.02:
        # Nothing to check them by, or they do not stand on the surface at all.
        steady = lying < 0.1 and _steadiness(raw, own) > AGREE
        code, rest = ("file-normals-unchecked", "could not be checked against the shape and were taken as they are")
        if not steady:
            code, rest = ("file-normals-ignored", "do not stand on the surface and were not used")
        return own, steady, [Note(code, f"The normals in the file {rest}.")]
    agree = float(np.mean((told * own)[both] > 0))
    if agree >= AGREE:
        return own, True, []
    if agree <= 1.0 - AGREE:
        text = "The normals in the file point inward; all were turned round."
        return -own, True, [Note("file-normals-inverted", text)]
    text = f"The normals in the file point outward at only {100 * agree:.0f} % of the points and were not used."
    return own, False, [Note("file-normals-ignored", text)]


def _steadiness(raw: RawNormals, own: FloatArray) -> float:
    """Share of neighbouring pairs whose sides agree."""
    first, other = raw.normals[:, None, :], raw.normals[raw.index[:, :4]]
    turn = np.einsum("ijk,ijk->ij", np.broadcast_to(first, other.shape), other)
    agree = turn * own[:, None] * own[raw.index[:, :4]]
    clear = np.abs(turn) > 0.7
    return float(np.mean(agree[clear] > 0)) if clear.any() else 0.0
