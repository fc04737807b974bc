"""One scan of the coverage study: simulated, measured as a user would, and what was stated beside what is true."""

from __future__ import annotations

import tempfile
import time
import zlib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

import scanmass
from scanmass.errors import PipelineFault, ScanmassError
from scanmass.geometry.moments import centroid
from scanmass.geometry.tensors import central_inertia, principal
from scanmass.studies.write_points import write_ply, write_range_ply
from tests.benchmarks.coverage_bodies import body
from tests.benchmarks.coverage_cells import Cell
from tests.benchmarks.coverage_generators import Simulated, merged_into_one, simulate

FloatArray = npt.NDArray[np.float64]
Line = dict[str, Any]
DENSITY = 1000.0


def seed_of(cell: Cell, number: int) -> int:
    """The seed of one scan: of the cell's name and the scan's number, whatever else runs."""
    return zlib.crc32(f"{cell.name} {number}".encode())


def run(cell: Cell, number: int, points: int | None = None) -> Line:
    """The ledger's line for scan ``number`` of ``cell``; ``points`` a view instead of the cell's own."""
    seed = seed_of(cell, number)
    start = time.perf_counter()
    scan = simulate(
        body(cell.body),
        cell.planted,
        views=cell.views,
        stations=cell.stations,
        points=cell.points if points is None else points,
        seed=seed,
        standing=cell.standing,
        floor=cell.floor,
    )
    line: Line = {"cell": cell.name, "scan": number, "seed": seed, "truth": truth(scan.body.moments())}
    line["facing"] = round(scan.facing, 4)
    ready = time.perf_counter()
    try:
        with tempfile.TemporaryDirectory(dir=_memory()) as folder:
            paths = write(scan if cell.group != "one cloud" else merged_into_one(scan), Path(folder), cell)
            found = scanmass.measure(paths, cell.pipeline(scan.size), seed=seed).document
        line |= stated(found)
    except PipelineFault as fault:
        line["unavailable"] = str(fault)
    except ScanmassError as fault:
        line["declined"] = str(fault)
    return line | {"seconds": [round(ready - start, 2), round(time.perf_counter() - ready, 2)]}


def truth(moments: FloatArray) -> Line:
    """Exact figures of a homogeneous body with ten ``moments``."""
    least_first, axes = principal(DENSITY * central_inertia(moments))
    return {
        "volume": float(moments[0]),
        "com": centroid(moments).tolist(),
        "principal": least_first.tolist(),
        "axes": axes.tolist(),
    }


def write(scan: Simulated, folder: Path, cell: Cell) -> list[Path]:
    """The scan's files, in mm: a range image a view where one station made it, else one file with view numbers."""
    if cell.group == "one cloud" or cell.stations > 1:
        many = [np.full(len(view.points), k) for k, view in enumerate(scan.views)]
        if cell.kind != "own":
            path = folder / "scan.ply"
            write_ply(path, 1000.0 * np.concatenate([v.points for v in scan.views]), np.concatenate(many), "mm")
            return [path]
        paths = [folder / f"view_{k}.ply" for k in range(len(many))]
        for path, view, none in zip(paths, scan.views, many, strict=True):
            write_ply(path, 1000.0 * view.points, 0 * none, "mm")
        return paths
    paths = [folder / f"view_{k}.ply" for k in range(len(scan.views))]
    for path, view in zip(paths, scan.views, strict=True):
        write_range_ply(path, view, 0.001, "mm")
    return paths


def stated(found: Mapping[str, Any]) -> Line:
    """What of a result the tally needs."""
    center = found["center_of_mass_m"]
    keep = ("value", "std", "low", "high", "degrees_of_freedom", "random", "bracket")
    return {
        "level": found["level"],
        "volume": {key: found["volume_m3"][key] for key in keep},
        "com": {key: center[key] for key in (*keep, "covariance", "region")},
        "principal": found["principal"],
        "noise": found["noise"],
        "budget": [
            [row["source"], row["kind"], row["mass_std_kg"], row["mass_half_range_kg"]] for row in found["budget"]
        ],
        "checks": found["checks"],
        "observed": found["surface"]["observed_fraction"],
        "points": [row["points_used"] for row in found["scans"]],
        "codes": [note["code"] for note in found["warnings"]],
    }


def _memory() -> str | None:
    """A folder kept in memory, if the system has one."""
    return "/dev/shm" if Path("/dev/shm").is_dir() else None
