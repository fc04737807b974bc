"""Several views brought into one frame before they are measured: by alignment, by given poses, or as they are."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy.spatial import cKDTree

from scanmass.cloud.align import WORDS, align
from scanmass.cloud.align_copies import refuse_copies
from scanmass.cloud.align_given import check_given
from scanmass.cloud.align_samples import ViewSamples, principal_size, view_samples
from scanmass.cloud.align_why import explained
from scanmass.cloud.cloud import Cloud, Removed
from scanmass.cloud.place import ViewsPlaced, moved_cloud, moved_scans, view_names
from scanmass.cloud.separate import Separated, separate
from scanmass.cloud.thin import Thinned, thin
from scanmass.errors import Declined, Note, ScanFault
from scanmass.geometry.neighbours import median_spacing
from scanmass.pipeline.models import Pipeline
from scanmass.progress import Progress
from scanmass.scans.scan import Scan

FloatArray = npt.NDArray[np.float64]

_NEAR = 3.0
"""Spacings of a view round its kept samples within which, thinned again, its samples are the object's."""


@dataclass(frozen=True)
class Placed:
    """``thinned``: samples of the object in the frame of the first view, parted already from what lay about it in
    each; ``up``, ``contact``: of the first view's support; ``removed``: in the first view's frame.
    """

    thinned: Thinned
    views: ViewsPlaced
    removed: Removed
    up: FloatArray | None
    contact: float | None
    assumptions: tuple[Note, ...] = ()
    warnings: tuple[Note, ...] = ()


def place_own(scans: Sequence[Scan], settings: Pipeline, seed: int, progress: Progress) -> Placed:
    """Views each in a frame of its own, each freed of its own support and clutter, then aligned to the first.

    Raises
    ------
    ScanFault
        If two views are copies of each other.
    Declined
        If the views cannot be aligned so that the answer can be trusted.
    """
    names = view_names(scans)
    first = thin(scans, progress=progress)
    refuse_copies(first, names)
    parts = [_object_of(first.cloud, v, settings, seed, names[v]) for v in range(len(names))]
    samples = samples_of([part.cloud for part in parts], names)
    try:
        found = align(samples, progress)
    except Declined as fault:
        raise explained(fault, samples) from None
    kept = moved_cloud(_joined(first.cloud, [part.cloud for part in parts]), found.poses)
    removed = Removed.nothing()
    for part, pose in zip(parts, found.poses, strict=True):
        points = part.removed.points @ pose[:3, :3].T + pose[:3, 3]
        removed = removed.joined(replace(part.removed, points=points))
    thinned = replace(first, cloud=kept, covariance=None)
    if first.cell is not None:
        thinned = _again(moved_scans(scans, found.poses), kept, progress)
    views = ViewsPlaced("own", names, found.pairs, found.poses, WORDS, found.symmetric)
    said = tuple(Note(n.code, n.text) for part in parts for n in part.assumptions)
    warned = tuple(n for part in parts for n in part.warnings)
    return Placed(thinned, views, removed, parts[0].up, parts[0].contact_height, said, warned + found.warnings)


def place_given(scans: Sequence[Scan], settings: Pipeline) -> tuple[tuple[Scan, ...], FloatArray]:
    """The scans moved by the poses of the pipeline file into the frame of the first view, and those poses (v, 4, 4).

    Raises
    ------
    ScanFault
        If a view has no pose, or a pose no view.
    """
    names = view_names(scans)
    given = settings.scan.poses
    for name in names:
        if name not in given:
            raise ScanFault(f"no pose is given for the view {name}", allowed=f"scan.poses holds {', '.join(given)}")
    for name in given:
        if name not in names:
            raise ScanFault(f"scan.poses holds {name}, which is no view", allowed=f"the views are {', '.join(names)}")
    poses = np.array([given[name].matrix() for name in names])
    relative = np.linalg.inv(poses[0]) @ poses
    return moved_scans(scans, relative), relative


def check_shared(
    cloud: Cloud, scans: Sequence[Scan], settings: Pipeline, poses: FloatArray | None
) -> tuple[ViewsPlaced | None, tuple[Note, ...]]:
    """How well views that are in one frame already go together, and notes; None for a single view.

    Raises
    ------
    Declined
        If two views contradict each other, so that they cannot be in one frame.
    """
    names = view_names(scans)
    present = [v for v in range(len(names)) if int((cloud.view == v).sum()) >= 200]
    if len(names) < 2:
        return None, ()
    samples = samples_of([cloud.keep(cloud.view == v) for v in present], [names[v] for v in present])
    # A place told from the samples is good enough to look for poses, not to throw out a scan by.
    known = np.isfinite(cloud.scanners).all(axis=1).reshape(-1)
    samples = [one if known[v] else replace(one, sight=None) for one, v in zip(samples, present, strict=True)]
    given = None if poses is None else [settings.scan.poses[names[v]].numbers for v in present]
    pairs, notes = check_given(samples, given)
    numbered = tuple(replace(p, first=present[p.first], second=present[p.second]) for p in pairs)
    if poses is None:
        return ViewsPlaced("shared", names, numbered), notes
    return ViewsPlaced("poses", names, numbered, poses, "poses of the pipeline file"), notes


def samples_of(clouds: Sequence[Cloud], names: Sequence[str]) -> list[ViewSamples]:
    """What alignment looks at in each view."""
    size = float(np.median([principal_size(cloud.points) for cloud in clouds if len(cloud.points) > 3] or [1.0]))
    result = []
    for cloud, name in zip(clouds, names, strict=True):
        sharp = cloud if cloud.at_edge is None else cloud.keep(~cloud.at_edge)
        scanner = None if len(sharp.points) == 0 else sharp.scanners[sharp.view[0]]
        known = scanner is not None and bool(np.isfinite(scanner).all())
        result.append(
            view_samples(
                name,
                sharp.points,
                sharp.count,
                size,
                scanner=scanner if known else None,
                file_normals=sharp.file_normals,
            )
        )
    return result


def _object_of(cloud: Cloud, view: int, settings: Pipeline, seed: int, name: str) -> Separated:
    """The object in one view, in that view's frame. Up is declared for the first view only."""
    up = settings.scan.up
    try:
        return separate(
            cloud.keep(cloud.view == view),
            support=settings.clean.support,
            clutter=settings.clean.outliers,
            up=np.array(up) if up is not None and view == 0 else None,
            seed=seed,
        )
    except ScanFault as fault:
        raise ScanFault(f"{name}: {fault.seen}", allowed=fault.allowed) from None


def _joined(whole: Cloud, parts: Sequence[Cloud]) -> Cloud:
    """The samples of all parts as one cloud."""

    def all_of(name: str) -> npt.NDArray[np.generic] | None:
        arrays = [getattr(part, name) for part in parts]
        return None if arrays[0] is None else np.concatenate(arrays)

    fields = {n: all_of(n) for n in ("points", "view", "count", "normals", "file_normals", "colours", "at_edge")}
    return replace(whole, **fields)  # type: ignore[arg-type]


def _again(scans: Sequence[Scan], kept: Cloud, progress: Progress) -> Thinned:
    """Thinned anew in the common frame, and of that what lies near the samples of the object in the same view."""
    reach = {v: _NEAR * median_spacing(kept.points[kept.view == v]) for v in np.unique(kept.view)}
    margin = max(reach.values())
    box = (kept.points.min(axis=0) - margin, kept.points.max(axis=0) + margin)
    again = thin(scans, within=box, progress=progress)
    near = np.zeros(len(again.cloud.points), np.bool_)
    for v, far in reach.items():
        own = np.flatnonzero(again.cloud.view == v)
        distance, _ = cKDTree(kept.points[kept.view == v]).query(again.cloud.points[own], distance_upper_bound=far)
        near[own] = np.isfinite(distance)
    covariance = None if again.covariance is None else again.covariance[near]
    return replace(again, cloud=again.cloud.keep(near), covariance=covariance)
