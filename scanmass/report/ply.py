"""The weighed surface and the points that were taken away, as binary PLY files for any 3D viewer."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.cloud.cloud import REASONS, Removed
from scanmass.errors import UserFault
from scanmass.surface.surface import Surface

SEEN = (176, 184, 192)
INFERRED = (230, 126, 34)
"""Grey where scan points lie near the surface, orange where its shape is an inference."""

REASON_COLOURS = ((120, 120, 120), (31, 119, 180), (148, 103, 189), (188, 189, 34), (214, 39, 40), (255, 127, 14))
"""One colour for each of ``REASONS``."""

_TYPES = {"<f8": "double", "<i4": "int", "|u1": "uchar"}
_PLACE = [("x", "<f8"), ("y", "<f8"), ("z", "<f8")]
_COLOUR = [("red", "u1"), ("green", "u1"), ("blue", "u1")]
_FACE = [("corners", "u1"), ("index", "<i4", (3,)), ("inferred", "u1")]
_WHY = [("reason", "u1"), ("count", "<i4")]


def write_surface(path: Path, surface: Surface) -> None:
    """Write the surface in metres, in the scan's frame, outward faces counter-clockwise.

    Each face carries ``inferred`` (1: no scan point lies near it), each vertex a colour: orange where any of its
    faces is inferred. Coordinates are doubles, so a scan far from its origin loses nothing.
    """
    loose = np.zeros(len(surface.vertices), bool)
    loose[surface.faces[surface.inferred].ravel()] = True
    vertices = np.empty(len(surface.vertices), [*_PLACE, *_COLOUR])
    _fill(vertices, surface.vertices, np.where(loose[:, None], INFERRED, SEEN))
    faces = np.empty(len(surface.faces), _FACE)
    faces["corners"] = 3
    faces["index"] = surface.faces
    faces["inferred"] = surface.inferred
    header = [
        "comment scanmass: the surface that was weighed, in metres, in the frame of the first scan",
        "comment face property inferred: 1 where no scan point lies near (vertices orange there)",
        *_element("vertex", vertices),
        f"element face {len(faces)}",
        "property list uchar int vertex_indices",
        "property uchar inferred",
    ]
    _write(path, header, [vertices, faces])


def write_removed(path: Path, removed: Removed) -> None:
    """Write the samples that were taken away, each with ``reason`` and ``count``, the scan points behind it.

    The header names the reasons: ``comment reason 4: outlier``.
    """
    points = np.empty(len(removed.points), [*_PLACE, *_COLOUR, *_WHY])
    _fill(points, removed.points, np.array(REASON_COLOURS)[removed.reason])
    points["reason"] = removed.reason
    points["count"] = removed.count
    header = [
        "comment scanmass: what was taken away before weighing, in metres, in the frame of the first scan",
        *(f"comment reason {number}: {name}" for number, name in enumerate(REASONS)),
        *_element("vertex", points),
    ]
    _write(path, header, [points])


@dataclass(frozen=True)
class Drawn:
    """A surface as ``write_surface`` wrote it: ``vertices`` (n, 3) metres, ``faces`` (m, 3), ``inferred`` (m,)."""

    vertices: npt.NDArray[np.float64]
    faces: npt.NDArray[np.int64]
    inferred: npt.NDArray[np.bool_]


def read_surface(path: Path) -> Drawn:
    """The surface in a file of :func:`write_surface`.

    Raises
    ------
    UserFault
        If the file was written by something else, or changed since.
    """
    (n, m), at, data = _opened(path, "vertex", "face")
    try:
        vertices = np.frombuffer(data, [*_PLACE, *_COLOUR], n, at)
        faces = np.frombuffer(data, _FACE, m, at + vertices.nbytes)
    except ValueError as fault:
        raise _foreign(path) from fault
    if (faces["corners"] != 3).any() or (faces["index"] < 0).any() or (faces["index"] >= n).any():
        raise _foreign(path)
    places = np.stack([vertices[axis] for axis in "xyz"], axis=1)
    return Drawn(places, faces["index"].astype(np.int64), faces["inferred"] != 0)


def read_removed(path: Path) -> Removed:
    """The samples in a file of :func:`write_removed`.

    Raises
    ------
    UserFault
        If the file was written by something else, or changed since.
    """
    (n,), at, data = _opened(path, "vertex")
    try:
        points = np.frombuffer(data, [*_PLACE, *_COLOUR, *_WHY], n, at)
    except ValueError as fault:
        raise _foreign(path) from fault
    if (points["reason"] >= len(REASONS)).any():
        raise _foreign(path)
    places = np.stack([points[axis] for axis in "xyz"], axis=1)
    return Removed(places, points["count"].astype(np.int32), points["reason"].copy())


def _opened(path: Path, *elements: str) -> tuple[tuple[int, ...], int, bytes]:
    """How many of each element, where the data begin, and all bytes of a file that this module wrote."""
    data = path.read_bytes()
    head, mark, _ = data[:4096].partition(b"end_header\n")
    lines = head.decode("latin-1").splitlines()
    counts = [line.split()[1:] for line in lines if line.startswith("element ")]
    if not mark or lines[2:3] == [] or not lines[2].startswith("comment scanmass:"):
        raise _foreign(path)
    if tuple(name for name, _ in counts) != elements:
        raise _foreign(path)
    return tuple(int(count) for _, count in counts), len(head) + len(mark), data


def _foreign(path: Path) -> UserFault:
    return UserFault("this was not written by scanmass, or was changed", file=path, allowed="measure the scan again")


def _fill(table: npt.NDArray[Any], places: npt.NDArray[np.float64], colours: npt.NDArray[Any]) -> None:
    for column, name in enumerate("xyz"):
        table[name] = places[:, column]
    for column, name in enumerate(("red", "green", "blue")):
        table[name] = colours[:, column]


def _element(name: str, table: npt.NDArray[Any]) -> list[str]:
    properties = [f"property {_TYPES[table.dtype[field].str]} {field}" for field in table.dtype.names or ()]
    return [f"element {name} {len(table)}", *properties]


def _write(path: Path, header: Sequence[str], tables: Sequence[npt.NDArray[Any]]) -> None:
    lines = ["ply", "format binary_little_endian 1.0", *header, "end_header", ""]
    with path.open("wb") as file:
        file.write("\n".join(lines).encode("ascii"))
        for table in tables:
            file.write(table.tobytes())
