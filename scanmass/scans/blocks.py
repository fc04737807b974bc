"""Blocks made and parted: what every reader does with a block of points."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.scans.names import AXES, COLOURS, NORMALS
from scanmass.scans.scan import Block

FloatArray = npt.NDArray[np.float64]
BLOCK_POINTS = 1 << 20
"""Points are read this many at a time."""


def taken(block: Block, which: npt.NDArray[Any]) -> Block:
    """The points of a block that ``which`` chooses: a mask (n,) or indices."""

    def part(array: npt.NDArray[Any] | None) -> Any:
        return None if array is None else array[which]

    return replace(
        block,
        points=block.points[which],
        normals=part(block.normals),
        colours=part(block.colours),
        rows=part(block.rows),
        columns=part(block.columns),
    )


def triple(column: Callable[[str], npt.NDArray[Any]], names: tuple[str, str, str], n: int) -> FloatArray:
    """Three columns of n numbers side by side, (n, 3) float64."""
    out = np.empty((n, 3))
    # A signalling NaN in single precision is still only a NaN.
    with np.errstate(invalid="ignore"):
        for k, name in enumerate(names):
            out[:, k] = column(name)
    return out


def block_of(columns: Mapping[str, npt.NDArray[Any]], colour_top: float, view: int = 0) -> Block:
    """A block from columns (n,) under the names of :mod:`.names`; colours run from 0 to ``colour_top``."""
    n = len(columns["x"])
    normals = triple(columns.__getitem__, NORMALS, n) if "nx" in columns else None
    return Block(view, triple(columns.__getitem__, AXES, n), normals, _colours(columns, colour_top))


def _colours(columns: Mapping[str, npt.NDArray[Any]], top: float) -> npt.NDArray[np.uint8] | None:
    if "red" not in columns:
        return None
    parts = [columns[name] for name in COLOURS]
    if top == 255.0 and all(part.dtype == np.uint8 for part in parts):
        return np.stack(parts, axis=1)
    return eight_bit(triple(columns.__getitem__, COLOURS, len(parts[0])), top)


def at_zero(points: FloatArray) -> npt.NDArray[np.bool_]:
    """Which points (n, 3) lie exactly at the origin: where a scanner writes a point it did not measure."""
    mask: npt.NDArray[np.bool_] = (points[:, 0] == 0) & (points[:, 1] == 0) & (points[:, 2] == 0)
    return mask


def eight_bit(colours: FloatArray, top: float) -> npt.NDArray[np.uint8]:
    """Colours (n, 3) of 0 to ``top`` as 0 to 255; what is not finite becomes 0.

    >>> eight_bit(np.array([[0.0, 0.5, 1.0]]), 1.0).tolist()
    [[0, 128, 255]]
    """
    scaled = np.nan_to_num(colours * (255.0 / top), nan=0.0)
    return np.clip(np.round(scaled), 0, 255).astype(np.uint8)
