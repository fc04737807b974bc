"""The closed surface that is weighed, what of it was seen, and the other shapes the unseen part could have."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Literal

import numpy as np
import numpy.typing as npt

from scanmass.errors import Note
from scanmass.geometry.moments import translated
from scanmass.geometry.polyhedron import face_areas

FloatArray = npt.NDArray[np.float64]
Underside = Literal["seen", "flat", "hollow", "unknown"]


@dataclass(frozen=True)
class Closure:
    """One shape that what was not seen could have: its ten moments at unit density about the scan's origin."""

    name: str
    moments: FloatArray

    def __post_init__(self) -> None:
        if self.moments.shape != (10,) or not np.isfinite(self.moments).all():
            raise ValueError(f"moments must be ten finite numbers, got {self.moments}")


@dataclass(frozen=True)
class Surface:
    """A closed triangle mesh in metres, in the scan's frame, faces counter-clockwise seen from outside.

    ``vertices`` (n, 3); ``faces`` (m, 3) int64: every edge has exactly two faces, cavities point inward;
    ``inferred`` (m,) bool: no scan point lies near this face, the shape there is an inference;
    ``source``: "points" (reconstructed) or "mesh" (the scan's own faces);
    ``resolution``: edge length of the reconstruction, or the median edge of a mesh, in metres;
    ``closures``: shapes that bracket what was not seen, empty where everything was;
    ``settling_moments`` (10,): of the surface before it was refined, or None; how far it settled is the
    reconstruction's own doubt.
    """

    vertices: FloatArray
    faces: npt.NDArray[np.int64]
    inferred: npt.NDArray[np.bool_]
    source: Literal["points", "mesh"]
    resolution: float
    underside: Underside
    shells: int
    closures: tuple[Closure, ...] = ()
    settling_moments: FloatArray | None = None
    assumptions: tuple[Note, ...] = field(default=())
    warnings: tuple[Note, ...] = field(default=())

    def __post_init__(self) -> None:
        if self.vertices.ndim != 2 or self.vertices.shape[1] != 3 or not np.isfinite(self.vertices).all():
            raise ValueError(f"vertices must be finite and (n, 3), got {self.vertices.shape}")
        if self.faces.ndim != 2 or self.faces.shape[1] != 3:
            raise ValueError(f"faces must be (m, 3), got {self.faces.shape}")
        if self.inferred.shape != (len(self.faces),):
            raise ValueError(f"inferred must be ({len(self.faces)},), got {self.inferred.shape}")

    @property
    def observed_fraction(self) -> float:
        """Share of the area that lies on scan points, 0 to 1."""
        area, _ = face_areas(self.vertices, self.faces)
        return float(area[~self.inferred].sum() / area.sum())

    def moved(self, shift: FloatArray) -> Surface:
        """The same surface moved by ``shift`` (3,), closures and all."""
        return replace(
            self,
            vertices=self.vertices + shift,
            closures=tuple(Closure(c.name, translated(c.moments, shift)) for c in self.closures),
            settling_moments=None if self.settling_moments is None else translated(self.settling_moments, shift),
        )

    def noted(self, *, assumptions: tuple[Note, ...] = (), warnings: tuple[Note, ...] = ()) -> Surface:
        """The same surface with more notes, put before its own."""
        return replace(self, assumptions=(*assumptions, *self.assumptions), warnings=(*warnings, *self.warnings))
