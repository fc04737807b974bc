"""What a reader hands on: views with their points, and faces where the file is a mesh."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace

import numpy as np
import numpy.typing as npt

from scanmass.errors import Note

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Block:
    """Some points of one view. Coordinates in the unit of the file, or in metres once a Scan is scaled.

    ``points`` (n, 3); ``normals`` (n, 3) or None, as the file has them, not trusted to be unit or outward;
    ``colours`` (n, 3) uint8 or None; ``rows``, ``columns`` (n,) int32 or None, the place in the view's range grid.
    """

    view: int
    points: FloatArray
    normals: FloatArray | None = None
    colours: npt.NDArray[np.uint8] | None = None
    rows: npt.NDArray[np.int32] | None = None
    columns: npt.NDArray[np.int32] | None = None

    def __post_init__(self) -> None:
        n = len(self.points)
        if self.points.shape != (n, 3):
            raise ValueError(f"points must be (n, 3), got {self.points.shape}")
        for name in ("normals", "colours"):
            array = getattr(self, name)
            if array is not None and array.shape != (n, 3):
                raise ValueError(f"{name} must be ({n}, 3), got {array.shape}")


@dataclass(frozen=True)
class ViewHead:
    """One view (one scanner position): its name, the scanner's place (3,) if known, its range grid (rows, columns)."""

    name: str
    scanner: FloatArray | None = None
    grid_shape: tuple[int, int] | None = None


@dataclass(frozen=True)
class Scan:
    """One scan file. ``blocks`` can be called again and again; each call reads from the start.

    ``unit`` is the name of the unit the coordinates of ``blocks()`` are in ("m" once scaled), or None where the
    format carries none. ``file_unit`` and ``unit_from`` ("declared", "file") record what the file was read in.
    ``faces`` (m, 3) indexes the points in order for a mesh; None for a cloud.
    ``no_return`` counts points a scanner recorded as holding no measurement.
    ``total`` is the number of points of the file, no-returns included.
    """

    file: str
    sha256: str
    format: str
    views: tuple[ViewHead, ...]
    blocks: Callable[[], Iterator[Block]]
    total: int
    faces: npt.NDArray[np.int64] | None = None
    unit: str | None = None
    file_unit: str | None = None
    unit_from: str | None = None
    no_return: int = 0
    warnings: tuple[Note, ...] = field(default=())
    assumptions: tuple[Note, ...] = field(default=())

    def points(self) -> FloatArray:
        """All points (n, 3) in the order of the file."""
        return np.concatenate([block.points for block in self.blocks()] or [np.empty((0, 3))])

    def in_metres(self, unit: str, metres_per_unit: float, unit_from: str) -> Scan:
        """The same scan with every block and scanner position in metres."""

        def scaled() -> Iterator[Block]:
            for block in self.blocks():
                yield replace(block, points=block.points * metres_per_unit)

        views = tuple(
            replace(v, scanner=None if v.scanner is None else v.scanner * metres_per_unit) for v in self.views
        )
        return replace(self, views=views, blocks=scaled, unit="m", file_unit=unit, unit_from=unit_from)
