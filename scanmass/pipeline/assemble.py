"""All the blocks of the document put together."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.density.fill import DensityMap
from scanmass.errors import Note
from scanmass.mass.routes import RoutesDifference
from scanmass.pipeline import document
from scanmass.pipeline.models import Pipeline
from scanmass.pipeline.places import height, offsets
from scanmass.pipeline.shape import Shape
from scanmass.scans.scan import Scan
from scanmass.uncertainty.advice import more_scans, next_measurement
from scanmass.uncertainty.bounds import Bounds
from scanmass.uncertainty.document import advice_block, as_document
from scanmass.uncertainty.measurements import standing
from scanmass.uncertainty.reading import Reading

FloatArray = npt.NDArray[np.float64]


def assemble(
    scans: Sequence[Scan],
    settings: Pipeline,
    seed: int,
    shape: Shape,
    filled: DensityMap,
    difference: RoutesDifference,
    bounds: Bounds,
    notes: tuple[Note, ...],
    reading: Reading,
) -> dict[str, Any]:
    """``result.json`` as a dict, in the contract's order."""
    found = as_document(bounds)
    scale = reading.declared.scale
    points = _scaled_places(settings, shape)
    center = document.moved_center(found["center_of_mass_m"], shape.origin)
    center["offsets"] = offsets(bounds, points, scale)
    center["height_above_base_m"] = None
    if shape.up is not None and shape.base_height is not None:
        center["height_above_base_m"] = height(bounds, shape.up, shape.base_height, scale)
    now = standing(bounds, shape.surface.underside)
    total = sum(document.returns(scan) for scan in scans)
    said = [n for scan in scans for n in scan.assumptions]
    warned = [n for scan in scans for n in scan.warnings]
    return {
        "schema": document.SCHEMA,
        "scanmass": document.origin_block(settings, seed),
        "object": {"name": settings.object.name, "id": settings.object.id},
        "level": bounds.level,
        "frame": {
            "of": "first scan",
            "up": None if shape.up is None else shape.up.tolist(),
            "up_from": shape.up_from,
        },
        "scans": document.scan_rows(scans, shape.cloud),
        "removed": document.removed_rows(shape.removed, total),
        "surface": document.surface_block(shape.surface),
        "views": document.views_block(shape.views),
        "noise": found["noise"]
        | {"declared_in": _declared_in(bounds, reading), "more_scans": advice_block(more_scans(now))},
        "volume_m3": found["volume_m3"],
        "mass_kg": found["mass_kg"],
        "center_of_mass_m": center,
        "inertia_kg_m2": found["inertia_kg_m2"],
        "principal": found["principal"],
        "density": document.density_block(filled),
        "checks": document.checks_block(difference) | found["checks"],
        "budget": found["budget"],
        "next_measurement": advice_block(next_measurement(now)),
        "assumptions": document.note_rows(
            [*settings.assumptions, *said, *shape.assumptions, *notes, *reading.assumptions, *bounds.assumptions]
        ),
        "warnings": document.note_rows([*warned, *shape.warnings, *reading.warnings, *bounds.warnings]),
    }


def _declared_in(bounds: Bounds, reading: Reading) -> str | None:
    """Where a declared noise was read, None where the noise is not declared."""
    if bounds.noise.basis != "declared":
        return None
    return "certificate" if reading.declared.noise_from_certificate else "scan.noise_std"


def _scaled_places(settings: Pipeline, shape: Shape) -> dict[str, FloatArray]:
    """The named points (3,) in the working frame, where the declared scale has taken them.

    The surface was scaled about the mean of its vertices, which stays where it was.
    """
    middle = shape.surface.vertices.mean(axis=0)
    scale = 1.0 if settings.scan.scale is None else float(settings.scan.scale.value)
    return {name: middle + scale * (np.array(place) - shape.origin - middle) for name, place in settings.points.items()}
