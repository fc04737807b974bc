"""One measurement, start to finish."""

from __future__ import annotations

import platform
import time
from collections.abc import Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import replace
from datetime import UTC, datetime
from functools import partial
from pathlib import Path
from typing import Any

import numba
import numpy as np
import numpy.typing as npt
from threadpoolctl import threadpool_limits

from scanmass.density.fill import DensityMap, fill_uniform
from scanmass.errors import Note
from scanmass.mass.routes import compare_routes, mass_moments_by_integrals
from scanmass.materials.table import find
from scanmass.pipeline.assemble import assemble
from scanmass.pipeline.file import effective_text, load, with_options
from scanmass.pipeline.models import Pipeline
from scanmass.pipeline.record import MassResult, Products
from scanmass.pipeline.shape import Shape, coarse_surface, shape_of
from scanmass.progress import Progress, silent
from scanmass.scans.load import load as load_scans
from scanmass.scans.scan import Scan
from scanmass.uncertainty.bounds import Bounds, bound
from scanmass.uncertainty.declared import Declared
from scanmass.uncertainty.reading import Reading, read_certificate

FloatArray = npt.NDArray[np.float64]


def measure(
    scan_paths: str | Path | Sequence[str | Path],
    pipeline: str | Path | Mapping[str, Any] | Pipeline,
    *,
    unit: str | None = None,
    seed: int = 0,
    replicates: int | None = None,
    workers: int = 1,
    executor: Executor | None = None,
    progress: Progress | None = None,
) -> MassResult:
    """Mass, centre of mass, inertia and principal axes of one scanned object, with bounds.

    Parameters
    ----------
    scan_paths : one scan file, or several that are views of one object in one frame
    pipeline : path of a pipeline file, the same blocks as a dict, or settings already loaded
    unit : length unit of the scan's coordinates, where the pipeline does not say it
    seed : of every random draw; same input and seed, same result
    replicates : draws behind the bounds, else as the pipeline says
    workers : threads of the kernels; the result does not depend on it
    executor : where several files are first looked through; in turn where None
    progress : called with stage, done and total; silent where None

    Returns
    -------
    MassResult
        Its ``document`` is ``result.json``: SI units, the frame of the first scan.

    Raises
    ------
    PipelineFault
        With every fault of the pipeline.
    ScanFault
        If a scan cannot be read, or holds something that cannot be measured.
    Declined
        If no honest figure can be given; the message says what would settle it.
    """
    started, clock = datetime.now(UTC), time.perf_counter()
    settings = with_options(load(pipeline), unit=unit, replicates=replicates)
    paths = [scan_paths] if isinstance(scan_paths, str | Path) else list(scan_paths)
    say = silent if progress is None else progress
    threads = numba.get_num_threads()
    numba.set_num_threads(max(1, min(workers, threads)))
    try:
        # One thread in linear algebra: its sums depend on how many share them.
        with threadpool_limits(1):
            scans = load_scans(paths, settings.scan.unit, executor=executor, progress=say)
            result = _measured(scans, settings, seed, say)
    finally:
        numba.set_num_threads(threads)
    run = {
        "started": started.isoformat(timespec="seconds"),
        "seconds": round(time.perf_counter() - clock, 3),
        "host": platform.node(),
        "system": platform.platform(),
        "python": platform.python_version(),
        "workers": workers,
        "scans": [str(Path(path).resolve()) for path in paths],
    }
    return MassResult(result[0], result[1], run, effective_text(settings))


def _measured(
    scans: Sequence[Scan], settings: Pipeline, seed: int, progress: Progress
) -> tuple[dict[str, Any], Products]:
    shape = shape_of(scans, settings, seed, progress)
    progress("weigh", 0, 2)
    filled, notes = _filled(shape, settings)
    by_integrals = mass_moments_by_integrals(filled)
    difference = compare_routes(by_integrals, filled.mass_moments())
    progress("weigh", 1, 2)
    reading = _declared(shape, settings)
    bounds = bound(
        shape.surface,
        shape.cloud,
        densities=[part.density for part in filled.parts],
        part_moments=np.array([part.moments() for part in filled.parts]),
        declared=reading.declared,
        materials=[part.material for part in filled.parts],
        coarse=partial(coarse_surface, shape),
        level=settings.bounds.level,
        replicate_count=settings.bounds.replicates,
        seed=seed,
    )
    progress("weigh", 2, 2)
    words = assemble(scans, settings, seed, shape, filled, difference, bounds, notes, reading)
    return words, _products(shape, filled, bounds)


def _declared(shape: Shape, settings: Pipeline) -> Reading:
    """What the pipeline file says of the scanner, completed from its certificate."""
    scan = settings.scan
    declared = Declared(scan.noise_std, scan.noise_length, scan.scale)
    certificate = scan.certificate.certificate
    if certificate is None:
        return Reading(declared)
    return read_certificate(certificate, declared, float(np.ptp(shape.surface.vertices, axis=0).max()))


def _filled(shape: Shape, settings: Pipeline) -> tuple[DensityMap, tuple[Note, ...]]:
    """The body filled with what the pipeline says, and what that assumes."""
    body = settings.inside.body
    notes: tuple[Note, ...] = ()
    if body.material is not None:
        material = find(body.material)
        name, density, notes = material.name, material.density(), material.assumptions()
    else:
        assert body.density is not None
        name, density = "one density", body.density
    solid = Note(
        "solid-throughout",
        f"The object is taken to be {name} all through, but for cavities that were scanned: no scan shows hollows, "
        "cores, voids or fillings inside.",
    )
    surface = shape.surface
    return fill_uniform("body", name, density, surface.vertices, surface.faces), (solid, *notes)


def _products(shape: Shape, filled: DensityMap, bounds: Bounds) -> Products:
    """The arrays beside the document, moved from the working frame to the scan's."""
    surface = replace(shape.surface, vertices=shape.surface.vertices + shape.origin)
    removed = replace(shape.removed, points=shape.removed.points + shape.origin)
    cells = replace(filled.cells, origin=filled.cells.origin + shape.origin)
    patches = bounds.patches
    state = {
        "frame_origin_m": shape.origin,
        "patch_centre_m": patches.centre + shape.origin,
        "patch_moments": patches.moments,
        "patch_centres_m": patches.centres,
        "patch_normals": patches.normals,
        "patch_areas_m2": patches.areas,
        "patch_inferred": patches.inferred,
        "residuals_m": patches.residuals,
        "residual_counts": patches.counts,
        "residual_variances_m2": patches.within,
        "view_cosines": patches.towards,
        "part_moments": bounds.parts.moments,
        **_samples(shape),
    }
    for term in bounds.terms:
        state[f"rows of {term.source}"] = term.rows
    return Products(surface, removed, cells, filled.density_kg_m3, _columns(bounds, shape.origin), state)


def _samples(shape: Shape) -> dict[str, npt.NDArray[Any]]:
    """Where each view sampled the object, about ``frame_origin_m``, and where its scanner stood in the scan's frame."""
    cloud = shape.cloud
    return {
        "samples_m": np.empty((0, 3), np.float32) if cloud is None else cloud.points.astype(np.float32),
        "sample_views": np.empty(0, np.int32) if cloud is None else cloud.view,
        "sample_counts": np.empty(0, np.int32) if cloud is None else cloud.count,
        "view_scanners_m": np.empty((0, 3)) if cloud is None else cloud.scanners + shape.origin,
    }


def _columns(bounds: Bounds, origin: FloatArray) -> dict[str, FloatArray]:
    """Replicates as columns by the names of the figures; none where no claim is possible."""
    drawn = bounds.replicates
    if drawn is None:
        return {}
    columns = {"volume_m3": drawn.volume, "mass_kg": drawn.mass}
    for k, axis in enumerate("xyz"):
        columns[f"center_of_mass_{axis}_m"] = drawn.com[:, k] + origin[k]
    for i, j in ((0, 0), (1, 1), (2, 2), (0, 1), (1, 2), (2, 0)):
        columns[f"inertia_{'xyz'[i]}{'xyz'[j]}_kg_m2"] = drawn.inertia[:, i, j]
    for k in range(3):
        columns[f"principal_{k + 1}_kg_m2"] = drawn.principal[:, k]
    return columns
