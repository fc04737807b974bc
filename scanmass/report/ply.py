"""The weighed surface and the points that were taken away, as binary PLY files for any 3D viewer."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.cloud.cloud import REASONS, Removed
from scanmass.surface.surface import Surface

SEEN = (176, 184, 192)
INFERRED = (230, 126, 34)
"""Grey where scan points lie near the surface, orange where its shape is an inference."""

REASON_COLOURS = ((120, 120, 120), (31, 119, 180), (148, 103, 189), (188, 189, 34), (214, 39, 40), (255, 127, 14))
"""One colour for each of ``REASONS``."""

_TYPES = {"<f8": "double", "<i4": "int", "|u1": "uchar"}
_PLACE = [("x", "<f8"), ("y", "<f8"), ("z", "<f8")]
_COLOUR = [("red", "u1"), ("green", "u1"), ("blue", "u1")]


def write_surface(path: Path, surface: Surface) -> None:
    """Write the surface in metres, in the scan's frame, outward faces counter-clockwise.

    Each face carries ``inferred`` (1: no scan point lies near it), each vertex a colour: orange where any of its
    faces is inferred. Coordinates are doubles, so a scan far from its origin loses nothing.
    """
    loose = np.zeros(len(surface.vertices), bool)
    loose[surface.faces[surface.inferred].ravel()] = True
    vertices = np.empty(len(surface.vertices), [*_PLACE, *_COLOUR])
    _fill(vertices, surface.vertices, np.where(loose[:, None], INFERRED, SEEN))
    faces = np.empty(len(surface.faces), [("corners", "u1"), ("index", "<i4", (3,)), ("inferred", "u1")])
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
    points = np.empty(len(removed.points), [*_PLACE, *_COLOUR, ("reason", "u1"), ("count", "<i4")])
    _fill(points, removed.points, np.array(REASON_COLOURS)[removed.reason])
    points["reason"] = removed.reason
    points["count"] = removed.count
    header = [
        "comment scanmass: what was taken away before weighing, in metres, in the frame of the first scan",
        *(f"comment reason {number}: {name}" for number, name in enumerate(REASONS)),
        *_element("vertex", points),
    ]
    _write(path, header, [points])


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
