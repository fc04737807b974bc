"""One simulated scan of a finished surface: where the views saw it, with the errors that were fitted to them.

It shares no formula with the fit: places come from rays and nearest places, fields from splines on a lattice.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import numpy.typing as npt
from scipy.special import ndtri

from scanmass import seeds
from scanmass.geometry.neighbours import nearest
from scanmass.studies.ray_casting import Scene
from scanmass.studies.rehearse_plan import Noise, Plan
from scanmass.studies.sensor_errors import lattice_field, small_rotation
from scanmass.studies.write_meshes import write_mesh_ply
from scanmass.studies.write_points import write_view_pcd
from scanmass.surface.refine import vertex_normals

FloatArray = npt.NDArray[np.float64]

_HALF_WAY = 0.5
"""A sample is moved up to so far towards or away from a neighbour of its view: other places of the same cover. Towards
alone would draw every rim in, and widen the gaps that the bounds hang on."""
_NEIGHBOURS, _FARTHEST = 4, 2.0
"""Neighbours farther apart than so many median spacings lie across a gap: no sample is moved towards them."""
_ASTRAY = 3.0
"""A ray that meets the surface so many spacings off its place meets something else first: it is left out."""
_STEEPEST = 0.3
"""Below this cosine of incidence an error along the ray grows no more."""
_SCALES = 6
"""Bells that an exponential field is made of."""


def simulate(plan: Plan, seed: int, index: int, folder: Path) -> list[Path]:
    """Write scan number ``index`` of the plan into ``folder`` and give its files; the same for the same seed."""
    if plan.source == "mesh":
        return [_mesh(plan, seed, index, folder)]
    scene = Scene([plan])
    views = np.unique(plan.view)
    common = seeds.stream(seed, "rehearsal common field", index)
    seen = [_look(plan, scene, int(v), seed, index) for v in views]
    places, sights = (np.concatenate([part[k] for part in seen]) for k in (0, 1))
    shared = common_error(plan.noise, places, common)
    ends = np.cumsum([len(part[0]) for part in seen])[:-1]
    strays = _strays(plan, scene, seed, index)
    rng = seeds.stream(seed, "rehearsal views of what was removed", index)
    whose = [rng.choice(views, len(removed)) for removed in (strays, plan.beside)]
    paths = []
    pieces = zip(views, np.split(places + shared[:, None] * sights, ends), seen, strict=True)
    for v, moved, (_, sight, error) in pieces:
        points = moved + error[:, None] * sight
        points = np.concatenate([points, strays[whose[0] == v], plan.beside[whose[1] == v]])
        points = _as_scanned(_misplaced(points, plan, seed, index, int(v)), plan, seed, index)
        place = plan.scanners[v]
        scanner = None if np.isnan(place).any() else _as_scanned(place[None], plan, seed, index)[0] + plan.origin
        paths.append(folder / f"view_{v:04d}.pcd")
        write_view_pcd(paths[-1], points + plan.origin, scanner)
    return paths


def field(std: float, length: float, exponential: bool, places: FloatArray, rng: np.random.Generator) -> FloatArray:
    """An error (n,) of ``std`` at ``places`` (n, 3) that goes together over ``length``, as a bell or as exp(-d/l).

    exp(-d/l) is a mixture of bells of length l |Z|, Z standard normal; six of them, evenly likely, stand for it.
    """
    if std == 0.0 or len(places) == 0:
        return np.zeros(len(places))
    if length == 0.0:
        return std * rng.standard_normal(len(places))
    if not exponential:
        return std * lattice_field(places, length, rng)
    scales = ndtri(0.5 + (np.arange(_SCALES) + 0.5) / (2 * _SCALES))
    total = np.sum([lattice_field(places, length * float(scale), rng) for scale in scales], axis=0)
    result: FloatArray = std / np.sqrt(_SCALES) * total
    return result


def common_error(noise: Noise, places: FloatArray, rng: np.random.Generator) -> FloatArray:
    """The error (n,) that all views have in common: declared beside theirs, or all of it where views tell none."""
    total = noise.offset_std * rng.standard_normal() + field(noise.common_std, noise.common_length, False, places, rng)
    if not noise.own:
        total = total + field(noise.std, noise.length, noise.exponential, places, rng)
    return total


def _look(plan: Plan, scene: Scene, v: int, seed: int, index: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Places a view sees (n, 3), the way an error moves each outward by its size (n, 3), and its own errors (n,)."""
    mine = np.flatnonzero(plan.view == v)
    rng = seeds.stream(seed, f"rehearsal view {v}", index)
    towards, spacing = _shifted(plan.samples[mine], rng)
    white = plan.white[mine] * rng.standard_normal(len(mine))
    scanner = plan.scanners[v]
    if np.isnan(scanner).any():
        places, sights = scene.nearest(towards)
    else:
        rays = towards - scanner
        rays /= np.linalg.norm(rays, axis=1, keepdims=True)
        hits = scene.first_hits(np.broadcast_to(scanner, rays.shape), rays)
        places = scanner + np.where(hits.found, hits.distance, 0.0)[:, None] * rays
        sights = -rays / np.maximum(hits.cosine, _STEEPEST)[:, None]
        met = hits.found & (np.linalg.norm(places - towards, axis=1) <= _ASTRAY * spacing)
        places, sights, white = places[met], sights[met], white[met]
    noise = plan.noise
    if noise.own:
        white = white + field(noise.std, noise.length, noise.exponential, places, rng)
    return places, sights, white


def _shifted(samples: FloatArray, rng: np.random.Generator) -> tuple[FloatArray, float]:
    """Other places (n, 3) of the same cover, and the median spacing."""
    if len(samples) <= _NEIGHBOURS:
        return samples, float("inf")
    distance, index = nearest(samples, _NEIGHBOURS)
    spacing = float(np.median(distance[:, 0]))
    row = np.arange(len(samples))
    which = rng.integers(distance.shape[1], size=len(samples))
    share = _HALF_WAY * rng.uniform(-1.0, 1.0, len(samples))
    share[distance[row, which] > _FARTHEST * spacing] = 0.0
    moved: FloatArray = samples + share[:, None] * (samples[index[row, which]] - samples)
    return moved, spacing


def _strays(plan: Plan, scene: Scene, seed: int, index: int) -> FloatArray:
    """What was removed as outliers, each half to one and a half times as far from the surface as it was."""
    if len(plan.strays) == 0:
        return plan.strays
    foot, _ = scene.nearest(plan.strays)
    rng = seeds.stream(seed, "rehearsal strays", index)
    result: FloatArray = foot + rng.uniform(0.5, 1.5, len(foot))[:, None] * (plan.strays - foot)
    return result


def _misplaced(points: FloatArray, plan: Plan, seed: int, index: int, v: int) -> FloatArray:
    """The points as a view that was registered a little wrong gives them."""
    rng = seeds.stream(seed, f"rehearsal pose {v}", index)
    turn = small_rotation(plan.noise.rotation_std, rng)
    shift = plan.noise.shift_std * rng.standard_normal(3)
    moved: FloatArray = (points - plan.centre) @ turn.T + plan.centre + shift
    return moved


def _as_scanned(points: FloatArray, plan: Plan, seed: int, index: int) -> FloatArray:
    """True places as a scan has them: smaller by the scale, whose error is drawn and acts about the object's centre."""
    if plan.scale is None:
        return points
    stated = float(plan.scale.value)
    error = stated / float(plan.scale.draw(seeds.stream(seed, "rehearsal scale", index), 1)[0])
    # The chain scales about the mean of the vertices; that is undone exactly, so only the error is left.
    middle = plan.centre + error * (plan.vertices.mean(axis=0) - plan.centre)
    scanned: FloatArray = middle + (plan.centre + error * (points - plan.centre) - middle) / stated
    return scanned


def _mesh(plan: Plan, seed: int, index: int, folder: Path) -> Path:
    """The seen part of the surface as a mesh, its vertices moved along their normals."""
    kept = plan.faces[~plan.inferred]
    normals = vertex_normals(plan.vertices, plan.faces)
    error = common_error(plan.noise, plan.vertices, seeds.stream(seed, "rehearsal common field", index))
    used, compact = np.unique(kept, return_inverse=True)
    points = (plan.vertices + error[:, None] * normals)[used]
    path = folder / "mesh.ply"
    write_mesh_ply(path, _as_scanned(points, plan, seed, index) + plan.origin, compact.reshape(-1, 3))
    return path
