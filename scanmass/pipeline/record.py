"""What a measurement hands back: the document of the contract, and the arrays that go to files beside it."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.cloud.cloud import Removed
from scanmass.density.cells import Cells
from scanmass.surface.surface import Surface


@dataclass(frozen=True)
class Products:
    """The arrays of a measurement: surface, removed points, cells with their density, replicates and state.

    ``density_kg_m3`` (nx, ny, nz) float32 on the grid of ``cells``; ``replicates``: column name to (n,);
    ``state``: name to array, what ``state.npz`` holds.
    """

    surface: Surface
    removed: Removed
    cells: Cells
    density_kg_m3: npt.NDArray[np.float32]
    replicates: Mapping[str, npt.NDArray[np.float64]]
    state: Mapping[str, npt.NDArray[Any]]


@dataclass(frozen=True)
class MassResult:
    """One measured object. ``document`` is ``result.json``: SI units, the scan's frame, None for what is not known.

    Read it by key, ``result["mass_kg"]["value"]``, in the field names of the contract. ``run`` holds times, host
    and paths (all that may differ between two runs), ``pipeline_text`` the effective pipeline file.
    """

    document: Mapping[str, Any]
    products: Products = field(repr=False)
    run: Mapping[str, Any] = field(repr=False)
    pipeline_text: str = field(repr=False)

    def __getitem__(self, key: str) -> Any:
        """A field of the document."""
        return self.document[key]

    def to_json(self) -> str:
        """The document as JSON text; the same bytes for the same input and seed."""
        return json.dumps(self.document, indent=1, allow_nan=False, ensure_ascii=False) + "\n"
