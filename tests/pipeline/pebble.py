"""A pebble known exactly, clouds of it as a scanner would give them, and files to hold them."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import ConvexHull

FloatArray = NDArray[np.float64]
IndexArray = NDArray[np.int64]

VIEWS = np.array([[1, 1, 1], [-1, -1, 1], [-1, 1, -1], [1, -1, -1]]) / np.sqrt(3.0)
"""Directions to the scanner: the corners of a tetrahedron. Every place of the pebble is seen by one to three."""
DENSITY = 2000.0


@dataclass(frozen=True)
class Exact:
    """Metres and kilograms, at DENSITY, about the centre of mass; ``principal`` ascending."""

    volume: float
    centre: FloatArray
    inertia: FloatArray
    principal: FloatArray


def directions(n: int) -> FloatArray:
    """Unit vectors (n, 3) spread evenly: a spiral that turns by the golden angle."""
    z = 1.0 - (2.0 * np.arange(n) + 1.0) / n
    turn = np.arange(n) * np.pi * (3.0 - np.sqrt(5.0))
    ring = np.sqrt(1.0 - z * z)
    return np.stack([ring * np.cos(turn), ring * np.sin(turn), z], axis=1)


def radius(u: FloatArray) -> FloatArray:
    """Distance (n,) of the surface from the origin along unit vectors, metres: 0.2 m of a body with no symmetry."""
    x, y, z = u.T
    return 0.1 * (1.0 + 0.25 * x + 0.1 * y + 0.12 * y * z + 0.2 * x * x - 0.18 * z * z)


def exact() -> Exact:
    """Integrals of r^3/3, r^4/4, r^5/5 over all directions, by a product rule exact for polynomials to degree 79."""
    z, weight = np.polynomial.legendre.leggauss(40)
    turn = 2.0 * np.pi * np.arange(80) / 80
    flat = np.sqrt(1.0 - z * z)
    u = np.stack([np.outer(flat, np.cos(turn)), np.outer(flat, np.sin(turn)), np.outer(z, np.ones(80))], axis=-1)
    u, w = u.reshape(-1, 3), np.repeat(weight * 2.0 * np.pi / 80, 80)
    r = radius(u)
    volume = float(w @ r**3) / 3.0
    centre = (w * r**4) @ u / 4.0 / volume
    second = (u * (w * r**5)[:, None]).T @ u / 5.0 - volume * np.outer(centre, centre)
    inertia = DENSITY * (np.trace(second) * np.eye(3) - second)
    return Exact(volume, centre, inertia, np.linalg.eigvalsh(inertia))


def cloud(n: int = 5000, noise: float = 1e-4, seed: int = 0) -> FloatArray:
    """Points (n, 3) all round, each with white noise of ``noise`` metres a coordinate."""
    u = directions(n)
    return u * radius(u)[:, None] + np.random.default_rng(seed).normal(0.0, noise, (n, 3))


def views(n: int = 4000, noise: float = 1e-4, seed: int = 0) -> list[FloatArray]:
    """Points of each view (k, 3), of places of its own, each view moved by 0.1 mm as a registration would."""
    rng = np.random.default_rng(seed)
    found = []
    for towards in VIEWS:
        turn, _ = np.linalg.qr(rng.normal(size=(3, 3)))
        u = directions(n) @ turn
        u = u[u @ towards > 0.0]
        found.append(u * radius(u)[:, None] + rng.normal(0.0, noise, u.shape) + rng.normal(0.0, 1e-4, 3))
    return found


def mesh(n: int = 6000) -> tuple[FloatArray, IndexArray]:
    """A closed mesh with its ``n`` vertices on the surface, faces outward."""
    u = directions(n)
    faces = ConvexHull(u).simplices.astype(np.int64)
    a, b, c = u[faces].transpose(1, 0, 2)
    inward = np.einsum("ij,ij->i", np.cross(b - a, c - a), a) < 0
    faces[inward] = faces[inward][:, ::-1]
    return u * radius(u)[:, None], faces


def write_ply(path: Path, points: FloatArray, view: IndexArray | None = None) -> Path:
    """Little-endian PLY of doubles, in the unit the points come in; ``view`` numbers the view of every point."""
    fields = [("x", "<f8"), ("y", "<f8"), ("z", "<f8")] + ([] if view is None else [("view", "u1")])
    names = {"<f8": "double", "u1": "uchar"}
    table = np.empty(len(points), fields)
    table["x"], table["y"], table["z"] = points.T
    if view is not None:
        table["view"] = view
    header = ["ply", "format binary_little_endian 1.0", f"element vertex {len(points)}"]
    header += [f"property {names[kind]} {name}" for name, kind in fields]
    path.write_bytes(("\n".join([*header, "end_header\n"])).encode("ascii") + table.tobytes())
    return path


def write_off(path: Path, vertices: FloatArray, faces: IndexArray) -> Path:
    """Text OFF with all digits."""
    lines = ["OFF", f"{len(vertices)} {len(faces)} 0"]
    lines += [" ".join(repr(float(x)) for x in vertex) for vertex in vertices]
    lines += ["3 " + " ".join(str(int(k)) for k in face) for face in faces]
    path.write_text("\n".join(lines) + "\n", encoding="ascii")
    return path


def settings(**scan: Any) -> dict[str, Any]:
    """A pipeline for the pebble in millimetres, all of it seen; ``scan`` adds to its block."""
    return {
        "scan": {"unit": "mm", **scan},
        "clean": {"support": "none"},
        "surface": {"underside": "seen"},
        "inside": {"body": {"density": f"{DENSITY:g} ± 40 kg/m3"}},
        "bounds": {"replicates": 400},
    }
