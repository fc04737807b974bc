"""What fills the cells: the parts of an object, each a closed surface with a density, and the map they make."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.density.cells import Cells, cut_solid
from scanmass.doubt import Figure
from scanmass.geometry.polyhedron import FaceArray, polyhedron_moments

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Part:
    """One part of one density: its name, its closed surface in metres, and its density in kg/m3.

    ``material`` is the name under which densities are drawn: parts of one material go together.
    """

    name: str
    material: str
    density: Figure
    vertices: FloatArray
    faces: FaceArray

    def moments(self) -> FloatArray:
        """Ten volume moments (10,) about the scan's origin, exact for the closed surface."""
        return polyhedron_moments(self.vertices, self.faces)


@dataclass(frozen=True)
class DensityMap:
    """The parts and the cells they are cut into.

    ``cells`` holds the fill of every cell, ``density_kg_m3`` (nx, ny, nz) the density of what fills it, zero where
    nothing does. Each part has cells of its own in ``part_cells``, so an interface through a cell stays exact.
    """

    parts: tuple[Part, ...]
    part_cells: tuple[Cells, ...]
    cells: Cells
    density_kg_m3: npt.NDArray[np.float32]

    def mass_moments(self) -> FloatArray:
        """Ten mass moments (10,) about the scan's origin, summed over the cells."""
        pairs = zip(self.parts, self.part_cells, strict=True)
        total: FloatArray = sum(
            (float(part.density.value) * cells.moments() for part, cells in pairs), start=np.zeros(10)
        )
        return total


def fill_uniform(name: str, material: str, density: Figure, vertices: FloatArray, faces: FaceArray) -> DensityMap:
    """One body of one density all through.

    Parameters
    ----------
    name, material : what the part and what its density are called in the result
    density : kg/m3
    vertices, faces : the closed surface, (n, 3) metres and (m, 3)

    >>> corner = np.array([[0, 0, 0], [6, 0, 0], [0, 3, 0], [0, 0, 2]], dtype=float)
    >>> sides = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
    >>> water = fill_uniform("body", "water", Figure.exact(1000.0), corner, sides)
    >>> water.mass_moments()[:2].round(6).tolist()
    [6000.0, 9000.0]
    """
    part = Part(name, material, density, vertices, faces)
    cells = cut_solid(vertices, faces)
    density_map = np.where(cells.fraction != 0, np.float32(density.value), np.float32(0))
    return DensityMap((part,), (cells,), cells, density_map)
