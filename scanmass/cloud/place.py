"""Scans and samples moved view by view, and what is known of how the views lie."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
import numpy.typing as npt

from scanmass.cloud.align import Pair
from scanmass.cloud.cloud import Cloud
from scanmass.scans.scan import Block, Scan

FloatArray = npt.NDArray[np.float64]
Frames = Literal["shared", "own", "poses"]


@dataclass(frozen=True)
class ViewsPlaced:
    """How several views came to lie in one frame: ``names`` by number, the ``pairs`` that overlap.

    ``poses`` (v, 4, 4) into the frame of the first view, None where the files shared one; ``aligned_by`` in words;
    ``symmetric``: which motions of views nothing can tell.
    """

    frames: Frames
    names: tuple[str, ...]
    pairs: tuple[Pair, ...]
    poses: FloatArray | None = None
    aligned_by: str | None = None
    symmetric: str | None = None


def view_names(scans: Sequence[Scan]) -> tuple[str, ...]:
    """What people call each view: the file's name, with the view's where a file holds several."""
    return tuple(
        scan.file if len(scan.views) == 1 else f"{scan.file}: {head.name}" for scan in scans for head in scan.views
    )


def moved_scans(scans: Sequence[Scan], poses: FloatArray) -> tuple[Scan, ...]:
    """The scans with ``poses`` (v, 4, 4), p' = R p + t, applied to the views in their order over all scans."""
    moved, first = [], 0
    for scan in scans:
        moved.append(_moved_scan(scan, poses[first : first + len(scan.views)]))
        first += len(scan.views)
    return tuple(moved)


def _moved_scan(scan: Scan, poses: FloatArray) -> Scan:
    def blocks() -> Iterator[Block]:
        for block in scan.blocks():
            turn, shift = poses[block.view, :3, :3], poses[block.view, :3, 3]
            normals = None if block.normals is None else block.normals @ turn.T
            yield replace(block, points=block.points @ turn.T + shift, normals=normals)

    views = tuple(
        replace(v, scanner=None if v.scanner is None else pose[:3, :3] @ v.scanner + pose[:3, 3])
        for v, pose in zip(scan.views, poses, strict=True)
    )
    return replace(scan, blocks=blocks, views=views)


def moved_cloud(cloud: Cloud, poses: FloatArray) -> Cloud:
    """The samples of every view moved by its pose (v, 4, 4)."""
    turn, shift = poses[cloud.view, :3, :3], poses[cloud.view, :3, 3]

    def turned(vectors: FloatArray | None) -> FloatArray | None:
        return None if vectors is None else np.einsum("nij,nj->ni", turn, vectors)

    points = np.einsum("nij,nj->ni", turn, cloud.points) + shift
    scanners = np.einsum("vij,vj->vi", poses[:, :3, :3], cloud.scanners) + poses[:, :3, 3]
    return replace(
        cloud,
        points=points,
        scanners=scanners,
        normals=turned(cloud.normals),
        file_normals=turned(cloud.file_normals),
    )
