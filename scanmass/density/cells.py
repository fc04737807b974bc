"""A solid cut exactly into cubic cells: how full each is, and the moments of those the surface passes through."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.geometry.cut_cells import cut_cells
from scanmass.geometry.moments import translated
from scanmass.geometry.polyhedron import FaceArray

FloatArray = npt.NDArray[np.float64]

LONGEST_SIDE_CELLS = 128
"""Cells along the longest side unless told otherwise. Exactness does not depend on it; pictures do."""


@dataclass(frozen=True)
class Cells:
    """A regular grid over a solid, in metres, in the scan's frame.

    ``origin`` (3,): lower corner of cell (0, 0, 0); ``cell``: edge length; ``fraction`` (nx, ny, nz) float32:
    share of each cell that is inside (for overlapping shells it counts them, a cavity counts minus);
    ``cut`` (k,): flat C-order numbers of the cells the surface passes through, ascending; ``cut_moments`` (k, 10):
    their ten moments about each cell's own centre. Every other cell is wholly in or wholly out.
    """

    origin: FloatArray
    cell: float
    fraction: npt.NDArray[np.float32]
    cut: npt.NDArray[np.int64]
    cut_moments: FloatArray

    def __post_init__(self) -> None:
        if self.fraction.ndim != 3:
            raise ValueError(f"fraction must be (nx, ny, nz), got {self.fraction.shape}")
        if self.cut_moments.shape != (len(self.cut), 10):
            raise ValueError(f"cut_moments must be ({len(self.cut)}, 10), got {self.cut_moments.shape}")

    def centres(self, flat: npt.NDArray[np.int64]) -> FloatArray:
        """Centres (k, 3) of the cells with flat numbers (k,)."""
        index = np.stack(np.unravel_index(flat, self.fraction.shape), axis=1)
        centres: FloatArray = self.origin + self.cell * (index + 0.5)
        return centres

    def moments(self, density: FloatArray | None = None) -> FloatArray:
        """Ten moments (10,) about the scan's origin: of the volume, or of the mass at ``density`` (nx, ny, nz).

        The density is constant within a cell. Summed about the middle of the grid, so that a far origin costs
        nothing until the last step.

        Raises
        ------
        ValueError
            If ``density`` has another shape than the grid.
        """
        if density is not None and density.shape != self.fraction.shape:
            raise ValueError(f"density must be {self.fraction.shape}, got {density.shape}")
        middle = self.origin + 0.5 * self.cell * np.array(self.fraction.shape)
        total = self._whole_cells(density) + self._cut_cells(density, middle)
        return translated(total, middle)

    def _cut_cells(self, density: FloatArray | None, middle: FloatArray) -> FloatArray:
        weight = 1.0 if density is None else density.ravel()[self.cut][:, None]
        total: FloatArray = (weight * translated(self.cut_moments, self.centres(self.cut) - middle)).sum(axis=0)
        return total

    def _whole_cells(self, density: FloatArray | None) -> FloatArray:
        # Of a product grid only the sums over one and two axes are needed, not ten numbers a cell.
        filled = self.fraction.astype(np.float64)
        filled.ravel()[self.cut] = 0.0
        if density is not None:
            filled *= density
        x, y, z = (self.cell * (np.arange(n) + 0.5 - 0.5 * n) for n in filled.shape)
        xy, yz, zx = filled.sum(axis=2), filled.sum(axis=0), filled.sum(axis=1).T
        along_x, along_y, along_z = xy.sum(axis=1), xy.sum(axis=0), yz.sum(axis=0)
        total = along_x.sum()
        own = total * self.cell**2 / 12.0
        sums = [total, along_x @ x, along_y @ y, along_z @ z]
        sums += [along_x @ (x * x) + own, along_y @ (y * y) + own, along_z @ (z * z) + own]
        sums += [x @ xy @ y, y @ yz @ z, z @ zx @ x]
        return self.cell**3 * np.array(sums)


def cut_solid(vertices: FloatArray, faces: FaceArray, *, cells: int = LONGEST_SIDE_CELLS) -> Cells:
    """Cut a closed mesh into cells, ``cells`` of them along its longest side, with one empty cell all round.

    Parameters
    ----------
    vertices : (n, 3), metres
    faces : (m, 3), closed, counter-clockwise seen from outside

    Raises
    ------
    ValueError
        If ``cells`` is below 1 or the mesh has no extent.

    >>> corner = np.array([[0, 0, 0], [6, 0, 0], [0, 3, 0], [0, 0, 2]], dtype=float)
    >>> sides = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
    >>> cut_solid(corner, sides, cells=8).moments()[:2].round(9).tolist()
    [6.0, 9.0]
    """
    low, high = vertices.min(axis=0), vertices.max(axis=0)
    longest = float((high - low).max())
    if cells < 1 or longest <= 0:
        raise ValueError(f"need at least one cell and a solid with extent, got {cells} cells over {longest} m")
    cell = longest / cells
    shape = np.ceil((high - low) / cell - 1e-9).astype(np.int64).clip(1) + 2
    origin = 0.5 * (low + high) - 0.5 * cell * shape
    fraction, cut, moments = cut_cells(vertices - origin, faces, cell, (int(shape[0]), int(shape[1]), int(shape[2])))
    return Cells(origin, cell, fraction, cut, moments)
