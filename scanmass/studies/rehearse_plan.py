"""What a rehearsal needs of a finished result: its surface as the truth, its noise, its views, what was removed."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, replace
from importlib.metadata import version
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.cloud.cloud import REASONS
from scanmass.doubt import Figure
from scanmass.errors import Declined, UserFault
from scanmass.geometry.moments import centroid
from scanmass.geometry.neighbours import nearest
from scanmass.geometry.polyhedron import polyhedron_moments
from scanmass.geometry.tensors import central_inertia, principal
from scanmass.pipeline.file import effective_text, load
from scanmass.pipeline.models import Pipeline
from scanmass.report.ply import read_removed, read_surface
from scanmass.report.tables import read_state
from scanmass.studies.ray_casting import Scene, Skin
from scanmass.uncertainty.declared import ASSUMED_LENGTH, Declared
from scanmass.uncertainty.reading import read_certificate

FloatArray = npt.NDArray[np.float64]
IndexArray = npt.NDArray[np.int64]

READ = ("result.json", "surface.ply", "removed.ply", "state.npz", "pipeline.yaml")
_NOT_PLANTED = ("grid edge",)
"""Simulated scans have no range grid, so what was removed at grid edges would not be removed again."""
_SAME_VOLUME = 1e-6
"""surface.ply is the surface whose volume result.json states, to rounding; a file from elsewhere is not."""
_AROUND, _MAD = 16, 1.4826


@dataclass(frozen=True)
class Noise:
    """Noise to simulate, metres and radians. ``own``: a field of each view; else one field common to all.

    ``common_std``, ``common_length``: declared beside what the views tell, the same in all of them; ``offset_std``: of
    a shift of the whole surface along its normal.
    """

    basis: str
    own: bool
    std: float
    length: float
    exponential: bool
    shift_std: float
    rotation_std: float
    common_std: float = 0.0
    common_length: float = 0.0
    offset_std: float = 0.0


@dataclass(frozen=True)
class Truth:
    """The figures of the finished surface, SI, scan's frame; ``moments`` (3,) ascending, ``axes`` (3, 3) one a row."""

    volume: float
    center: FloatArray
    moments: FloatArray
    axes: FloatArray


@dataclass(frozen=True)
class Plan:
    """All that every simulated scan is made of. Places in metres about ``origin`` (3,), a place in the scan's frame.

    ``vertices`` (n, 3), ``faces`` (m, 3), ``inferred`` (m,): the finished surface; ``source``: points or mesh;
    ``samples`` (k, 3), ``view`` (k,), ``white`` (k,): where each view sampled it, and the standard deviation of each
    sample by itself; ``scanners`` (v, 3), NaN where unknown; ``strays`` (s, 3) removed as outliers; ``beside`` (b, 3)
    removed as support or clutter; ``pipeline``: the settings of the simulated scans, as the text of a file.
    ``key`` names the result by its contents.
    """

    key: str
    level: float
    source: str
    origin: FloatArray
    centre: FloatArray
    vertices: FloatArray
    faces: IndexArray
    inferred: npt.NDArray[np.bool_]
    samples: FloatArray
    view: IndexArray
    white: FloatArray
    scanners: FloatArray
    strays: FloatArray
    beside: FloatArray
    noise: Noise
    scale: Figure | None
    truth: Truth
    pipeline: str
    frames: str


def read_plan(directory: Path) -> Plan:
    """The plan of a result folder.

    Raises
    ------
    UserFault
        If the folder is no whole result of this version.
    Declined
        If the result states no bounds, or nothing in it is random.
    """
    document = _document(directory)
    noise_block = document["noise"]
    if noise_block["basis"] == "none":
        raise Declined(
            "the result states no bounds, because its noise is not known; there is nothing to rehearse",
            file=directory / "result.json",
            allowed="declare scan.noise_std, or give three views that overlap, and measure again",
        )
    settings = load(directory / "pipeline.yaml")
    surface, removed = read_surface(directory / "surface.ply"), read_removed(directory / "removed.ply")
    state = read_state(directory / "state.npz")
    origin = state["frame_origin_m"]
    vertices = surface.vertices - origin
    _require_same(polyhedron_moments(vertices, surface.faces)[0], document, directory)
    source = str(document["surface"]["source"])
    size = float(np.ptp(vertices, axis=0).max())
    declared = _declared(settings, size)
    noise = _noise(noise_block, declared, size)
    if source == "mesh" and noise.std == noise.offset_std == 0.0 and declared.scale is None:
        raise Declined(
            "the surface was declared exact (noise_std: 0), so every simulated scan would be the same",
            file=directory / "result.json",
            allowed="rehearse the result of a scan",
        )
    density = float(f"{document['density']['mean_kg_m3']['value']:.6g}")
    kind = np.array(REASONS)[removed.reason]
    samples, view = state["samples_m"].astype(np.float64), state["sample_views"].astype(np.int64)
    return Plan(
        key=_key(directory),
        level=float(document["level"]),
        source=source,
        origin=origin,
        centre=state["patch_centre_m"] - origin,
        vertices=vertices,
        faces=surface.faces,
        inferred=surface.inferred,
        samples=samples,
        view=view,
        white=_white(samples, view, replace(surface, vertices=vertices)),
        scanners=state["view_scanners_m"] - origin,
        strays=(removed.points - origin)[kind == "outlier"],
        beside=(removed.points - origin)[~np.isin(kind, ("outlier", *_NOT_PLANTED))],
        noise=noise,
        scale=declared.scale,
        truth=_truth(vertices, surface.faces, density, origin),
        pipeline=effective_text(_settings(settings, density)),
        frames=settings.scan.frames,
    )


def _document(directory: Path) -> Mapping[str, Any]:
    allowed = "name the folder that 'scanmass measure' wrote with --out"
    if not directory.is_dir():
        raise UserFault("there is no such folder", file=directory, allowed=allowed)
    missing = [name for name in READ if not (directory / name).is_file()]
    if missing:
        raise UserFault(
            f"this folder is no result of scanmass: {missing[0]} is not there", file=directory, allowed=allowed
        )
    try:
        document = json.loads((directory / "result.json").read_text("utf-8"))
    except ValueError:
        document = None
    if not isinstance(document, dict) or document.get("schema") != "scanmass/result/1":
        raise UserFault("this is not a result of scanmass", file=directory / "result.json", allowed=allowed)
    return document


def _require_same(volume: float, document: Mapping[str, Any], directory: Path) -> None:
    stated = float(document["volume_m3"]["value"])
    if abs(volume - stated) > _SAME_VOLUME * stated:
        seen = f"it encloses {1000 * volume:.6g} L where result.json says {1000 * stated:.6g} L"
        raise UserFault(seen, file=directory / "surface.ply", allowed="the files are of two results: measure again")


def _key(directory: Path) -> str:
    digest = hashlib.sha256(version("scanmass").encode())
    for name in READ:
        digest.update(hashlib.sha256((directory / name).read_bytes()).digest())
    return digest.hexdigest()


def _declared(settings: Pipeline, size: float) -> Declared:
    """What was declared of the scanner, by itself and by its certificate, for an object of longest side ``size``."""
    scan = settings.scan
    declared = Declared(scan.noise_std, scan.noise_length, scan.scale)
    certificate = scan.certificate.certificate
    return declared if certificate is None else read_certificate(certificate, declared, size).declared


def _noise(block: Mapping[str, Any], declared: Declared, size: float) -> Noise:
    own = block["basis"] == "views"
    shared = declared.noise_std if own and not declared.noise_from_certificate else None
    length = declared.noise_length
    return Noise(
        basis=str(block["basis"]),
        own=own,
        std=float(block["std_m"] or 0.0),
        length=float(block["length_m"] or 0.0),
        exponential=block["shape"] == "exponential",
        shift_std=float(block["shift_std_m"] or 0.0),
        rotation_std=float(block["rotation_std_rad"] or 0.0),
        common_std=shared or 0.0,
        common_length=ASSUMED_LENGTH * size if length is None else length,
        offset_std=declared.offset_std,
    )


def _white(samples: FloatArray, view: IndexArray, surface: Skin) -> FloatArray:
    """Standard deviation (k,) of each sample by itself, from how far neighbours of one view differ.

    What a field of the view and the shape of the surface do is alike in neighbours. The median of 16 differences
    round each sample is taken, so that steps at edges do not count.
    """
    white = np.zeros(len(samples))
    if len(samples) == 0:
        return white
    foot, normal = Scene([surface]).nearest(samples)
    residual = np.einsum("ij,ij->i", samples - foot, normal)
    for v in np.unique(view):
        mine = np.flatnonzero(view == v)
        _, index = nearest(samples[mine], _AROUND)
        if index.shape[1] < _AROUND:
            continue
        step = np.abs(residual[mine] - residual[mine][index[:, 0]])
        white[mine] = _MAD * np.median(step[index], axis=1) / np.sqrt(2.0)
    return white


def _truth(vertices: FloatArray, faces: IndexArray, density: float, origin: FloatArray) -> Truth:
    moments = polyhedron_moments(vertices, faces)
    least_first, axes = principal(density * central_inertia(moments))
    return Truth(float(moments[0]), centroid(moments) + origin, least_first, axes)


def _settings(settings: Pipeline, density: float) -> Pipeline:
    """The user's own settings, in metres, in one frame, with a density that is known: only the shape is rehearsed."""
    # Views are simulated in the frame they were brought to; a place given for each file would move them again.
    placed = {name: f.get_default() for name, f in type(settings.scan).model_fields.items() if name == "poses"}
    scan = settings.scan.model_copy(update={"unit": "m", "frames": "shared", **placed})
    body = settings.inside.body.model_copy(update={"material": None, "density": Figure.exact(density)})
    inside = settings.inside.model_copy(update={"body": body})
    return settings.model_copy(update={"scan": scan, "inside": inside})
