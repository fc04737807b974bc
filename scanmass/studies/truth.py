"""What a sample scan's object really weighs, in the field names of ``result.json``."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import asdict
from pathlib import Path
from typing import Any

from scanmass.geometry.moments import centroid
from scanmass.geometry.polyhedron import face_areas
from scanmass.geometry.tensors import central_inertia, principal
from scanmass.studies.bodies import Body
from scanmass.studies.scanner import Sensor

UNITS = {"m": 1.0, "mm": 0.001, "inch": 0.0254}


def file_entry(name: str, file_format: str, unit: str, kind: str, points: int, views: int) -> dict[str, Any]:
    """One file of a sample: ``kind`` is "points" or "mesh"; ``points`` and ``views`` as written."""
    return {"file": name, "format": file_format, "unit": unit, "kind": kind, "points": points, "views": views}


def errors_entry(sensor: Sensor) -> dict[str, Any]:
    """The errors planted by a sensor, in metres and radians."""
    return asdict(sensor.errors)


def truth(
    name: str,
    body: Body,
    density: float,
    *,
    scenario: str,
    material: str,
    files: Sequence[dict[str, Any]],
    stands: bool = False,
) -> dict[str, Any]:
    """The exact figures of a homogeneous body of ``density`` kg/m3, in the scan's frame.

    ``stands``: the object stands upright, so that up is z; else up is not known.

    >>> from scanmass.studies.bodies import box
    >>> crate = truth("crate", box("crate", (1.0, 1.0, 1.0)), 1000.0, scenario="", material="water", files=[])
    >>> round(crate["mass_kg"]["value"], 9), round(crate["principal"][0]["moment_kg_m2"]["value"], 9)
    (1000.0, 166.666666667)
    """
    moments = body.moments()
    inertia = density * central_inertia(moments)
    least_first, axes = principal(inertia)
    return {
        "schema": "scanmass/truth/1",
        "object": {"name": name},
        "scenario": scenario,
        "scans": list(files),
        "frame": {"of": "first scan", "up": [0.0, 0.0, 1.0] if stands else None},
        "surface": {"area_m2": float(face_areas(body.vertices, body.faces)[0].sum())},
        "density": {"material": material, "mean_kg_m3": {"value": density}},
        "volume_m3": {"value": float(moments[0])},
        "mass_kg": {"value": float(density * moments[0])},
        "center_of_mass_m": {"value": centroid(moments).tolist()},
        "inertia_kg_m2": {
            "value": inertia.tolist(),
            "about": "center_of_mass",
            "axes": "scan",
            "sign": "I = integral (r.r E - r r^T) dm",
        },
        "principal": [
            {"moment_kg_m2": {"value": float(moment)}, "axis": axis.tolist()}
            for moment, axis in zip(least_first, axes, strict=True)
        ],
    }


def write_truth(path: Path, figures: dict[str, Any]) -> None:
    """Write ``figures`` as JSON, in their own order."""
    path.write_bytes((json.dumps(figures, indent=1, allow_nan=False, ensure_ascii=False) + "\n").encode())
