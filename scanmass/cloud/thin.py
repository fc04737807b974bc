"""Thin scans to a number of samples that fits, view by view, in one pass over the points."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.cloud.cells import Cells
from scanmass.cloud.cloud import Cloud
from scanmass.cloud.grid_edges import grid_edges
from scanmass.errors import Note, ScanFault
from scanmass.geometry.neighbours import median_spacing
from scanmass.progress import Progress, silent
from scanmass.scans.scan import Block, Scan, ViewHead

FloatArray = npt.NDArray[np.float64]
Box = tuple[FloatArray, FloatArray]

LARGEST_GRID = 20_000_000
"""Cells of the largest range grid whose edges are marked: a view is held whole for it (some 1.5 GB)."""
FINEST = 2048
"""The first cells are this fraction of the extent of the first points; they double as needed."""


@dataclass(frozen=True)
class Thinned:
    """``cloud``: the samples; ``cell``: edge of the cells in metres, or None where every point is a sample of its own.

    ``covariance`` (n, 6): of the points behind each sample, xx yy zz xy yz zx in m2, NaN for single points; None
    without cells. ``points``: how many points came in.
    """

    cloud: Cloud
    cell: float | None
    points: int
    covariance: FloatArray | None = None
    warnings: tuple[Note, ...] = field(default=())


@dataclass(frozen=True)
class _Piece:
    view: int
    points: FloatArray
    normals: FloatArray | None
    colours: npt.NDArray[np.uint8] | None
    marked: npt.NDArray[np.bool_] | None

    def part(self, which: slice | npt.NDArray[np.bool_]) -> _Piece:
        def cut(a: npt.NDArray[Any] | None) -> Any:
            return None if a is None else a[which]

        return _Piece(self.view, self.points[which], cut(self.normals), cut(self.colours), cut(self.marked))

    def extras(self) -> FloatArray | None:
        """Normals and colours side by side (n, 6), zeros for what is missing."""
        if self.normals is None and self.colours is None:
            return None
        both = np.zeros((len(self.points), 6))
        if self.normals is not None:
            both[:, :3] = _unit(self.normals)
        if self.colours is not None:
            both[:, 3:] = self.colours
        return both


def thin(
    scans: Sequence[Scan], *, limit: int = 400_000, within: Box | None = None, progress: Progress = silent
) -> Thinned:
    """Samples of the scans' points, at most ``limit`` of them (or 16 a view, if that is more).

    While no more than ``limit`` points have come, each is a sample of its own; points of one view at the very same
    place are one. Beyond that, points of each view are gathered into cubic cells, and a sample is the mean of a
    cell: its cells double in size whenever there would be more than ``limit``, so memory does not grow with the
    points. Views are never mixed, and are numbered over all scans in order.

    ``limit`` is for everything in the scans, floor and walls included. Where the object turns out to be a small part
    of that, thin again ``within`` the box (lowest corner, highest corner) round it: the scans are read once more.

    Parameters
    ----------
    scans : in metres, finite points only. The result does not depend on how they are cut into blocks.

    Raises
    ------
    ScanFault
        No point came.
    """
    views = [(scan, head) for scan in scans for head in scan.views]
    limit = max(limit, 16 * len(views))
    notes: dict[str, Note] = {}
    first: list[_Piece] = []
    cells: Cells | None = None
    came, total = 0, sum(scan.total for scan in scans)
    flags = {"normals": False, "colours": False, "marked": False}
    for piece in _pieces(scans, within, notes):
        flags = {name: seen or getattr(piece, name) is not None for name, seen in flags.items()}
        came += len(piece.points)
        if cells is None:
            first.append(piece)
            if came > limit:
                cells = _started(first, limit)
                first = []
        else:
            cells.add(piece.points, piece.view, piece.extras(), piece.marked)
        progress("points", min(came, total), total)
    if came == 0:
        where = ", ".join(scan.file for scan in scans)
        raise ScanFault(f"no usable point in {where or 'no scan at all'}", allowed="at least 500 points are needed")
    names, scanners = _heads(views)
    if cells is None:
        cloud = _as_they_are(first, names, scanners, flags, notes)
        return Thinned(cloud, None, came, None, tuple(notes.values()))
    got = cells.gathered()
    cloud = Cloud(
        points=got.mean,
        view=got.view,
        count=got.count,
        view_names=names,
        scanners=scanners,
        spacing=median_spacing(got.mean),
        file_normals=_unit(got.normal) if flags["normals"] else None,
        colours=np.round(got.colour).astype(np.uint8) if flags["colours"] else None,
        at_edge=2 * got.marked > got.count if flags["marked"] else None,
    )
    return Thinned(cloud, got.cell, came, got.covariance, tuple(notes.values()))


def _started(pieces: list[_Piece], limit: int) -> Cells:
    """A table with the first pieces in it, its cells sized by the first ``limit`` + 1 points, however they came."""
    ahead = np.concatenate([p.points for p in pieces])[: limit + 1]
    extent = float(np.ptp(ahead, axis=0).max())
    cells = Cells(ahead[0], extent / FINEST if extent > 0 else 1e-6, limit)
    for p in pieces:
        cells.add(p.points, p.view, p.extras(), p.marked)
    return cells


def _pieces(scans: Sequence[Scan], within: Box | None, notes: dict[str, Note]) -> Iterator[_Piece]:
    """Points of all scans, views numbered over all of them, edges marked where a view has a range grid."""
    before = 0
    for scan in scans:
        held: list[Block] = []
        for block in scan.blocks():
            if held and held[0].view != block.view:
                yield from _boxed(_with_edges(scan, held, before, notes), within)
                held = []
            shape = scan.views[block.view].grid_shape
            gridded = shape is not None and block.rows is not None and block.columns is not None
            if gridded and shape is not None and shape[0] * shape[1] > LARGEST_GRID:
                text = "A range grid is too large to look for its edges in memory; its mixed pixels were left in."
                notes["grid-too-large"] = Note("grid-too-large", text)
                gridded = False
            if gridded:
                held.append(block)
            else:
                piece = _Piece(before + block.view, block.points, block.normals, block.colours, None)
                yield from _boxed([piece], within)
        if held:
            yield from _boxed(_with_edges(scan, held, before, notes), within)
        before += len(scan.views)


def _with_edges(scan: Scan, held: list[Block], before: int, notes: dict[str, Note]) -> Iterator[_Piece]:
    head = scan.views[held[0].view]
    assert head.grid_shape is not None
    rows = np.concatenate([b.rows for b in held if b.rows is not None])
    columns = np.concatenate([b.columns for b in held if b.columns is not None])
    points = np.concatenate([b.points for b in held])
    marked = grid_edges(points, rows, columns, head.grid_shape, head.scanner)
    if marked is None:
        text = "A range grid is too sparse to tell its edges; its mixed pixels were left in."
        notes["grid-too-sparse"] = Note("grid-too-sparse", text)
    at = 0
    for b in held:
        own = None if marked is None else marked[at : at + len(b.points)]
        at += len(b.points)
        yield _Piece(before + b.view, b.points, b.normals, b.colours, own)


def _boxed(pieces: Iterator[_Piece] | list[_Piece], within: Box | None) -> Iterator[_Piece]:
    for piece in pieces:
        if within is not None:
            piece = piece.part(np.all((piece.points >= within[0]) & (piece.points <= within[1]), axis=1).reshape(-1))
        if len(piece.points):
            yield piece


def _heads(views: list[tuple[Scan, ViewHead]]) -> tuple[tuple[str, ...], FloatArray]:
    heads = [head for _, head in views]
    plain = [head.name for head in heads]
    names = plain
    if len(set(plain)) < len(plain):
        names = [f"{scan.file}: {name}" for (scan, _), name in zip(views, plain, strict=True)]
    scanners = np.array([np.full(3, np.nan) if h.scanner is None else h.scanner for h in heads], np.float64)
    return tuple(names), scanners.reshape(-1, 3)


def _as_they_are(
    pieces: list[_Piece],
    names: tuple[str, ...],
    scanners: FloatArray,
    flags: dict[str, bool],
    notes: dict[str, Note],
) -> Cloud:
    points = np.concatenate([p.points for p in pieces])
    view = np.concatenate([np.full(len(p.points), p.view, np.int32) for p in pieces])
    extras = np.concatenate([_or_zeros(p) for p in pieces])
    marked = np.concatenate([np.zeros(len(p.points), np.bool_) if p.marked is None else p.marked for p in pieces])
    kept, count = _distinct(points, view)
    if (again := len(points) - len(kept)) > 0:
        text = f"{again} points lie at exactly the place of another of their view; each place counts once."
        notes["duplicate-points"] = Note("duplicate-points", text)
    return Cloud(
        points=points[kept],
        view=view[kept],
        count=count,
        view_names=names,
        scanners=scanners,
        spacing=median_spacing(points[kept]),
        file_normals=extras[kept, :3] if flags["normals"] else None,
        colours=extras[kept, 3:].astype(np.uint8) if flags["colours"] else None,
        at_edge=marked[kept] if flags["marked"] else None,
    )


def _or_zeros(piece: _Piece) -> FloatArray:
    extras = piece.extras()
    return np.zeros((len(piece.points), 6)) if extras is None else extras


def _distinct(points: FloatArray, view: npt.NDArray[np.int32]) -> tuple[npt.NDArray[np.int64], npt.NDArray[np.int32]]:
    """First of the points at each place and view, in order, and how many there are."""
    order = np.lexsort((points[:, 2], points[:, 1], points[:, 0], view))
    p, v = points[order], view[order]
    new = np.ones(len(points), np.bool_)
    new[1:] = (p[1:] != p[:-1]).any(axis=1) | (v[1:] != v[:-1])
    starts = np.flatnonzero(new)
    first = order[starts]  # lexsort is stable, so this is the first that came
    count = np.diff(np.append(starts, len(points))).astype(np.int32)
    turn = np.argsort(first)
    return first[turn], count[turn]


def _unit(normals: FloatArray) -> FloatArray:
    safe = np.nan_to_num(np.asarray(normals, np.float64), posinf=0.0, neginf=0.0)
    length = np.linalg.norm(safe, axis=1, keepdims=True)
    unit: FloatArray = safe / np.where(length > 0, length, 1.0)
    return unit
