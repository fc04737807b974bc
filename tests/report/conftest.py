"""A result made by hand from the contract: a 0.1 m cube of cast iron, one face of it never seen."""

from __future__ import annotations

import copy
from typing import Any

import numpy as np
import pytest

from scanmass.cloud.cloud import REASONS, Removed
from scanmass.density.cells import cut_solid
from scanmass.pipeline.record import MassResult, Products
from scanmass.surface.surface import Surface

CORNERS = np.array([[x, y, z] for x in (0, 1) for y in (0, 1) for z in (0, 1)], float)
SIDES = np.array(
    [
        *([0, 1, 3], [0, 3, 2], [4, 6, 7], [4, 7, 5], [0, 4, 5], [0, 5, 1]),
        *([2, 3, 7], [2, 7, 6], [0, 2, 6], [0, 6, 4], [1, 5, 7], [1, 7, 3]),
    ]
)
SPREAD = np.diag([4e-8, 4e-8, 9e-8]).tolist()
PIPELINE = "scan:\n  unit: mm\ninside:\n  body:\n    material: grey cast iron\n"


def _figure(value: float, half: float) -> dict[str, Any]:
    return {"value": value, "std": half / 1.96, "low": value - half, "high": value + half}


def _vector(value: list[float], half: list[float]) -> dict[str, Any]:
    low, high = np.subtract(value, half).tolist(), np.add(value, half).tolist()
    return {"value": value, "std": (np.array(half) / 1.96).tolist(), "low": low, "high": high}


def _document() -> dict[str, Any]:
    centre = [0.05, 0.05, 0.0497]
    inertia = {"value": np.diag([0.0117] * 3).tolist()}
    inertia |= {"std": np.full((3, 3), 1e-4).tolist(), "low": np.diag([0.0115] * 3).tolist()}
    inertia |= {"high": np.diag([0.0119] * 3).tolist(), "about": "center_of_mass", "axes": "scan"}
    inertia |= {"sign": "I = integral (r.r E - r r^T) dm"}
    axes = np.eye(3).tolist()
    principal = [
        {"moment_kg_m2": _figure(0.0117, 0.0002), "axis": axes[k], "cone_deg": None, "determined": False}
        | {"plane_normal": None}
        for k in range(3)
    ]
    scan = {"file": "cube.ply", "sha256": "a" * 64, "format": "ply", "unit": "mm", "unit_from": "declared"}
    scan |= {"points": 120000, "points_used": 110000, "views": 1}
    budget = [
        {"source": "density of grey cast iron", "kind": "declared", "mass_std_kg": 0.2, "com_std_m": [0.0, 0.0, 0.0]}
        | {"mass_half_range_kg": None, "com_half_range_m": None, "share_mass": 0.9, "share_com": 0.0},
        {"source": "scan noise", "kind": "random", "mass_std_kg": 0.02, "com_std_m": [2e-4, 2e-4, 3e-4]}
        | {"mass_half_range_kg": None, "com_half_range_m": None, "share_mass": 0.1, "share_com": 1.0},
        {"source": "underside not seen", "kind": "bracket", "mass_std_kg": None, "com_std_m": None}
        | {"mass_half_range_kg": 0.3, "com_half_range_m": [0.0, 0.0, 1e-3], "share_mass": None, "share_com": None},
    ]
    measured = {"degrees_of_freedom": 12.0}
    return {
        "schema": "scanmass/result/1",
        "scanmass": {"version": "0.1.0", "seed": 0, "pipeline_sha256": "b" * 64, "packages": {"numpy": "2.4.6"}},
        "object": {"name": "test cube", "id": "T-1"},
        "level": 0.95,
        "frame": {"of": "first scan", "up": [0.0, 0.0, 1.0], "up_from": "declared"},
        "scans": [scan],
        "removed": [
            {"reason": "support plane", "points": 9000, "share": 0.075},
            {"reason": "outlier", "points": 1000, "share": 0.00833},
        ],
        "surface": {"source": "points", "triangles": 12, "area_m2": 0.06, "closed": True, "shells": 1}
        | {"observed_fraction": 0.8333, "resolution_m": 0.001, "underside": "unknown"},
        "noise": {"basis": "upper_bound", "std_m": 2e-4, "length_m": 0.01, "shape": "gaussian"}
        | {"shift_std_m": None, "rotation_std_rad": None, "views": 1},
        "volume_m3": _figure(1.0e-3, 2e-5)
        | {"random": {"low": 9.9e-4, "high": 1.01e-3}, "bracket": {"low": 9.85e-4, "high": 1.012e-3}}
        | measured,
        "mass_kg": _figure(7.0, 0.5)
        | {"random": {"low": 6.6, "high": 7.4}, "bracket": {"low": 6.9, "high": 7.1}}
        | measured,
        "center_of_mass_m": _vector(centre, [4e-4, 4e-4, 1.5e-3])
        | {"degrees_of_freedom": 12.0, "random": {"low": [0.0496, 0.0496, 0.0491], "high": [0.0504, 0.0504, 0.0503]}}
        | {"bracket": {"low": [0.05, 0.05, 0.0487], "high": [0.05, 0.05, 0.0507]}, "covariance": SPREAD}
        | {"region": {"center_m": centre, "radii_m": [6e-4, 6e-4, 9e-4], "axes": axes, "level": 0.95}}
        | {"offsets": [{"name": "near corner", "offset_m": _vector(centre, [4e-4, 4e-4, 1.5e-3])}]}
        | {"height_above_base_m": _figure(0.0497, 0.0015)},
        "inertia_kg_m2": inertia,
        "principal": principal,
        "density": {
            "mean_kg_m3": _figure(7000.0, 400.0),
            "parts": [{"name": "body", "density_kg_m3": _figure(7000.0, 400.0), "volume_m3": 1e-3, "mass_kg": 7.0}],
        },
        "checks": {"routes_relative_difference": {"mass": 1e-13, "com": 2e-14, "inertia": 3e-13}},
        "budget": budget,
        "evidence": None,
        "envelope": None,
        "decisions": [],
        "assumptions": [{"code": "nothing-recessed-above-rim", "text": "Taken as solid above the rim."}],
        "warnings": [{"code": "one-cloud", "text": "One cloud without views: the noise is an upper bound."}],
    }


@pytest.fixture
def document() -> dict[str, Any]:
    """A valid document, free to be broken."""
    return copy.deepcopy(_document())


@pytest.fixture
def result(document: dict[str, Any]) -> MassResult:
    """The document with products: the cube 400 km from the origin, cut into 11 x 11 x 11 cells."""
    vertices = 0.1 * CORNERS + np.array([4e5, 0.0, 0.0])
    surface = Surface(vertices, SIDES, np.arange(12) < 2, "points", 0.001, "unknown", 1)
    cells = cut_solid(vertices, SIDES, cells=9)
    density = np.where(cells.fraction > 0, 7000.0, 0.0).astype(np.float32)
    removed = Removed(
        vertices[:3] + 1.0,
        np.array([1, 5, 7], np.int32),
        np.array([REASONS.index(r) for r in ("outlier", "support plane", "clutter")], np.uint8),
    )
    rng = np.random.default_rng(1)
    replicates = {"volume_m3": rng.normal(1e-3, 1e-5, 50), "mass_kg": rng.normal(7, 0.2, 50)}
    state = {"patch_seeds": np.arange(6.0).reshape(2, 3), "patch_of_face": np.arange(12)}
    products = Products(surface, removed, cells, density, replicates, state)
    return MassResult(document, products, {"seconds": {"read": 0.5}, "host": "bench"}, PIPELINE)
