"""Mesh files: STL, OBJ and PLY."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import numpy.typing as npt

from scanmass.geometry.polyhedron import face_areas
from scanmass.studies.bodies import Body


def write_stl(path: Path, body: Body, metres_per_unit: float, title: str) -> None:
    """Binary STL in the given unit, single precision as the format has it."""
    record = np.dtype([("normal", "<f4", 3), ("corners", "<f4", (3, 3)), ("attribute", "<u2")])
    table = np.zeros(len(body.faces), record)
    vertices = body.vertices / metres_per_unit
    table["normal"] = face_areas(vertices, body.faces)[1]
    table["corners"] = vertices[body.faces]
    head = title.encode("ascii")[:80].ljust(80, b" ")
    path.write_bytes(head + len(body.faces).to_bytes(4, "little") + table.tobytes())


def write_obj(path: Path, body: Body, metres_per_unit: float, title: str, decimals: int = 9) -> None:
    """OBJ in the given unit, with ``decimals`` places."""
    vertices = (body.vertices / metres_per_unit).tolist()
    lines = [f"# {title}"]
    lines += [f"v {x:.{decimals}f} {y:.{decimals}f} {z:.{decimals}f}" for x, y, z in vertices]
    lines += [f"f {a} {b} {c}" for a, b, c in (body.faces + 1).tolist()]
    path.write_bytes(("\n".join(lines) + "\n").encode("ascii"))


def write_mesh_ply(path: Path, vertices: npt.NDArray[np.float64], faces: npt.NDArray[np.int64]) -> None:
    """Little-endian PLY of ``vertices`` (n, 3), as doubles, and ``faces`` (m, 3)."""
    table = np.empty(len(faces), [("corners", "u1"), ("index", "<i4", (3,))])
    table["corners"], table["index"] = 3, faces
    header = [
        *("ply", "format binary_little_endian 1.0", f"element vertex {len(vertices)}"),
        *("property double x", "property double y", "property double z", f"element face {len(faces)}"),
        "property list uchar int vertex_indices\nend_header\n",
    ]
    path.write_bytes("\n".join(header).encode("ascii") + vertices.astype("<f8").tobytes() + table.tobytes())
