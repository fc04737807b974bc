"""The floor that was seen round and beneath an object: where it was seen, nothing stands on it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.ndimage import distance_transform_edt, uniform_filter

from scanmass.geometry.planes import plane_axes
from scanmass.surface.mesh import FloatArray
from scanmass.surface.sampling import median_pitch

CELL = 2.0
"""Side of a cell in pitches of the floor's samples: an even random sampling leaves one in 55 empty (e^-4)."""
MOSTLY = 0.5
"""A cell is lit where at least half of the nine round it hold a sample: single empty cells among lit ones do not count,
and the edge of what was seen stays where it is."""
MARGIN = 2.0
"""Cells by which the seen floor is taken smaller: half a diagonal that a place is off its cell's middle, as much at the
shadow's edge, and the half cell by which a majority of nine may go beyond it."""
ROUND = 8
"""Cells round the object's outline that are looked at."""
MOST_CELLS = 2000
"""... and at most so many along a side."""
FEWEST = 100


@dataclass(frozen=True)
class Ground:
    """Cells (r, c) of the contact plane with the distance in metres from each to floor that was not seen, 0 where it
    was not seen itself; ``flat`` (2, 3): the plane's axes; ``corner`` (2,): of the first cell; ``cell``: its side.
    """

    flat: FloatArray
    corner: FloatArray
    cell: float
    depth: FloatArray

    @classmethod
    def of(cls, floor: FloatArray, up: FloatArray, level: float, points: FloatArray) -> Ground | None:
        """From samples ``floor`` (k, 3) of the support round an object's ``points`` (n, 3); None where too few.

        Samples off the plane ``up . r = level`` by more than two of their pitches (a turntable's rim, a lower table)
        tell nothing of what stands on it and are left out.
        """
        flat = plane_axes(up)
        plan = points @ flat.T
        low, high = plan.min(axis=0), plan.max(axis=0)
        size = float((high - low).max())
        on = floor @ flat.T
        near = np.all((on > low - 0.5 * size) & (on < high + 0.5 * size), axis=1)
        if near.sum() < FEWEST:
            return None
        pitch = median_pitch(floor[near])
        near &= np.abs(floor @ up - level) < 2.0 * pitch
        cell = max(CELL * pitch, size / MOST_CELLS)
        corner = low - ROUND * cell
        shape = np.ceil((high - low) / cell).astype(np.int64) + 2 * ROUND
        index = np.floor((on[near] - corner) / cell).astype(np.int64)
        index = index[np.all((index >= 0) & (index < shape), axis=1)]
        if len(index) < FEWEST:
            return None
        held: npt.NDArray[np.float64] = np.zeros(shape)
        held[index[:, 0], index[:, 1]] = 1.0
        lit = uniform_filter(held, 3, mode="nearest") >= MOSTLY
        depth = distance_transform_edt(lit) - MARGIN if not lit.all() else np.full(shape, float(max(shape)))
        return cls(flat, corner, cell, cell * np.maximum(depth, 0.0))

    @property
    def margin(self) -> float:
        """How well in metres the edge of what was seen is known."""
        return MARGIN * self.cell

    def clear(self, places: FloatArray) -> FloatArray:
        """How far (n,) the floor under ``places`` (n, 3) lies inside what was seen of it; 0 where it was not seen."""
        index = np.floor((places @ self.flat.T - self.corner) / self.cell).astype(np.int64)
        index = np.clip(index, 0, np.array(self.depth.shape) - 1)
        result: FloatArray = self.depth[index[:, 0], index[:, 1]]
        return result
