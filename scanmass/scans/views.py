"""Points that carry the number of their view, parted view by view."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.errors import Note
from scanmass.scans.blocks import taken
from scanmass.scans.scan import Block, ViewHead

MOST_VIEWS = 4096
"""More different numbers than this are no views: a name like ``scan`` can hold something else."""


@dataclass(frozen=True)
class ViewTable:
    """The view numbers of a file, ascending (v,), in the order of ``Scan.views``."""

    ids: npt.NDArray[np.int64]

    @property
    def heads(self) -> tuple[ViewHead, ...]:
        """One head a view, named by its number."""
        return tuple(ViewHead(f"view {number}") for number in self.ids)

    def split(self, block: Block, ids: npt.NDArray[Any]) -> Iterator[Block]:
        """The block's points view by view, in their order within each."""
        which = np.searchsorted(self.ids, ids.astype(np.int64))
        order = np.argsort(which, kind="stable")
        present, starts = np.unique(which[order], return_index=True)
        for view, chosen in zip(present, np.split(order, starts[1:]), strict=True):
            yield replace(taken(block, chosen), view=int(view))


def view_table(blocks: Iterator[npt.NDArray[Any]], file: str) -> tuple[ViewTable | None, tuple[Note, ...]]:
    """The views of a file from all its view numbers, block by block; None with a warning where they are no views."""
    ids = np.empty(0, np.int64)
    for block in blocks:
        present = np.unique(block)
        if not np.isfinite(present).all() or (present != np.round(present)).any() or (np.abs(present) > 2**53).any():
            return None, (_unused(file, "holds something else than whole numbers"),)
        ids = np.union1d(ids, present.astype(np.int64))
        if len(ids) > MOST_VIEWS:
            return None, (_unused(file, f"holds more than {MOST_VIEWS} different numbers"),)
    return ViewTable(ids), ()


def _unused(file: str, why: str) -> Note:
    return Note("view-numbers-unused", f"{file}: the view number of the points {why}; all points count as one view.")
