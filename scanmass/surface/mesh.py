"""A triangle mesh on its way to becoming a measured surface."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
import numpy.typing as npt

from scanmass.errors import Note
from scanmass.geometry.polyhedron import polyhedron_moments

FloatArray = npt.NDArray[np.float64]
FaceArray = npt.NDArray[np.int64]


@dataclass(frozen=True)
class Mesh:
    """``vertices`` (n, 3) in metres, scan's frame; ``faces`` (m, 3) counter-clockwise seen from outside.

    ``resolution``: edge length of the grid it was made on, in metres; ``notes``: warnings of its making.
    """

    vertices: FloatArray
    faces: FaceArray
    resolution: float
    notes: tuple[Note, ...] = field(default=())

    def __post_init__(self) -> None:
        if self.vertices.ndim != 2 or self.vertices.shape[1] != 3 or not np.isfinite(self.vertices).all():
            raise ValueError(f"vertices must be finite and (n, 3), got {self.vertices.shape}")
        if self.faces.ndim != 2 or self.faces.shape[1] != 3:
            raise ValueError(f"faces must be (m, 3), got {self.faces.shape}")

    @property
    def moments(self) -> FloatArray:
        """Ten volume moments (10,) about the scan's origin."""
        return polyhedron_moments(self.vertices, self.faces)

    def moved(self, vertices: FloatArray) -> Mesh:
        """The same triangles on other vertices."""
        return replace(self, vertices=vertices)

    def keep(self, mask: npt.NDArray[np.bool_]) -> Mesh:
        """The faces where ``mask`` (m,) is true, without the vertices that no face uses any more."""
        used, compact = np.unique(self.faces[mask], return_inverse=True)
        return replace(self, vertices=self.vertices[used], faces=compact.reshape(-1, 3).astype(np.int64))
