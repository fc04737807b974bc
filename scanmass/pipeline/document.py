"""The document of a result, in the order and the field names of the contract."""

from __future__ import annotations

import platform
from collections.abc import Mapping, Sequence
from importlib.metadata import version
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.cloud.cloud import REASONS, Cloud, Removed
from scanmass.cloud.place import ViewsPlaced
from scanmass.density.fill import DensityMap
from scanmass.doubt import Figure
from scanmass.errors import Note
from scanmass.geometry.edges import count_edges
from scanmass.geometry.polyhedron import face_areas
from scanmass.mass.routes import RoutesDifference
from scanmass.pipeline.file import sha256
from scanmass.pipeline.models import Pipeline
from scanmass.scans.scan import Scan
from scanmass.surface.surface import Surface

FloatArray = npt.NDArray[np.float64]
SCHEMA = "scanmass/result/1"
_PACKAGES = ("numpy", "scipy", "numba", "scikit-learn")


def origin_block(pipeline: Pipeline, seed: int) -> dict[str, Any]:
    """Which program, with which settings and packages, made the result."""
    packages = {name: version(name) for name in _PACKAGES}
    open3d = "open3d-cpu" if platform.system() == "Linux" and platform.machine() == "x86_64" else "open3d"
    packages[open3d] = version(open3d)
    return {
        "version": version("scanmass"),
        "seed": seed,
        "pipeline_sha256": sha256(pipeline),
        "packages": packages,
    }


def scan_rows(scans: Sequence[Scan], used: Cloud | None) -> list[dict[str, Any]]:
    """One row a file: what it held and how many of its points were used (all vertices of a mesh are)."""
    rows, first = [], 0
    for scan in scans:
        last = first + len(scan.views)
        here = None if used is None else (used.view >= first) & (used.view < last)
        measured = returns(scan)
        rows.append(
            {
                "file": scan.file,
                "sha256": scan.sha256,
                "format": scan.format,
                "unit": scan.file_unit,
                "unit_from": scan.unit_from,
                "points": measured,
                "points_used": measured if here is None or used is None else int(used.count[here].sum()),
                "views": len(scan.views),
            }
        )
        first = last
    return rows


def returns(scan: Scan) -> int:
    """Points that were measured: what a scanner recorded as no return is no point."""
    return scan.total - scan.no_return


def removed_rows(removed: Removed, total: int) -> list[dict[str, Any]]:
    """One row a reason: scan points taken away, and their share of all."""
    points = np.bincount(removed.reason, removed.count, len(REASONS)).astype(np.int64)
    return [
        {"reason": reason, "points": int(n), "share": float(n / total)}
        for reason, n in zip(REASONS, points, strict=True)
        if n
    ]


def surface_block(surface: Surface) -> dict[str, Any]:
    """Where the surface came from, and how much of it was seen."""
    area, _ = face_areas(surface.vertices, surface.faces)
    return {
        "source": surface.source,
        "triangles": len(surface.faces),
        "area_m2": float(area.sum()),
        "closed": count_edges(surface.faces).balanced,
        "shells": surface.shells,
        "observed_fraction": float(area[~surface.inferred].sum() / area.sum()),
        "resolution_m": surface.resolution,
        "underside": surface.underside,
    }


def views_block(views: ViewsPlaced | None) -> dict[str, Any] | None:
    """How several views lie in one frame: every overlapping pair, and what nothing can tell; None for a single view."""
    if views is None:
        return None
    pairs = [
        {
            "first": views.names[pair.first],
            "second": views.names[pair.second],
            "overlap": pair.overlap,
            "rms_m": pair.rms,
            "shift_m": pair.shift,
            "rotation_rad": pair.rotation,
        }
        for pair in views.pairs
    ]
    return {
        "frames": views.frames,
        "aligned_by": views.aligned_by,
        "pairs": pairs,
        "poses": None if views.poses is None else views.poses.tolist(),
        "symmetric": None if views.symmetric is None else {"text": views.symmetric},
    }


def density_block(filled: DensityMap) -> dict[str, Any]:
    """Mean density, and each part with its own."""
    parts = []
    for part in filled.parts:
        volume = float(part.moments()[0])
        parts.append(
            {
                "name": part.name,
                "material": part.material,
                "density_kg_m3": figure_block(part.density),
                "volume_m3": volume,
                "mass_kg": volume * float(part.density.value),
            }
        )
    # One uniform body: its mean density is its density, doubt included.
    return {"mean_kg_m3": figure_block(filled.parts[0].density), "parts": parts}


def figure_block(figure: Figure) -> dict[str, Any]:
    """A scalar figure as value, std, low, high."""
    return {
        name: None if (number := getattr(figure, name)) is None else float(number)
        for name in ("value", "std", "low", "high")
    }


def checks_block(difference: RoutesDifference) -> dict[str, Any]:
    """How far the two routes differ."""
    return {
        "routes_relative_difference": {
            "mass": difference.mass,
            "com": difference.center_of_mass,
            "inertia": difference.inertia,
        }
    }


def moved_center(center: Mapping[str, Any], origin: FloatArray) -> dict[str, Any]:
    """The block of the centre of mass moved by ``origin`` (3,), from the working frame to the scan's."""
    moved = dict(center)
    for key in ("value", "low", "high"):
        moved[key] = _moved(moved[key], origin)
    for name in ("random", "bracket"):
        if moved.get(name) is not None:
            moved[name] = {key: _moved(place, origin) for key, place in moved[name].items()}
    if moved.get("region") is not None:
        moved["region"] = {**moved["region"], "center_m": _moved(moved["region"]["center_m"], origin)}
    return moved


def _moved(place: Sequence[float] | None, origin: FloatArray) -> list[float] | None:
    return None if place is None else (np.asarray(place) + origin).tolist()


def note_rows(notes: Sequence[Note]) -> list[dict[str, str]]:
    """Assumptions or warnings, each once, in the order they arose."""
    return [{"code": note.code, "text": note.text} for note in dict.fromkeys(notes)]
