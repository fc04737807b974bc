"""glTF and GLB: the meshes of the scene, each where its nodes put it, in metres by the standard."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.errors import Note, ScanFault
from scanmass.geometry.edges import welded
from scanmass.scans.blocks import eight_bit
from scanmass.scans.corners import shared
from scanmass.scans.gltf_document import Document, open_document
from scanmass.scans.memory import mesh_scan
from scanmass.scans.polygons import check_range
from scanmass.scans.rotation import rotation_from_quaternion
from scanmass.scans.scan import Scan

FloatArray = npt.NDArray[np.float64]
FaceArray = npt.NDArray[np.int64]
POINTS, TRIANGLES, STRIP, FAN = 0, 4, 5, 6


def read_gltf(path: Path) -> Scan:
    """The scene of a glTF 2.0 file: its triangles, or its points where it holds no triangle.

    Corners with the very same coordinates become one point: the format parts them wherever colours or normals
    differ. A node that mirrors turns its triangles, as the standard says, and is listed as a warning.

    Raises
    ------
    ScanFault
        If the file is cut, does not fit together, or stores its arrays in a way that is not read.
    """
    document = open_document(path)
    try:
        parts = [part for mesh, matrix in _placed(document) for part in _parts(document, mesh, matrix)]
    except (KeyError, IndexError, TypeError, ValueError, AttributeError, OverflowError) as error:
        seen = f"its description does not fit together ({type(error).__name__}: {str(error)[:60]})"
        raise ScanFault(seen, file=path, allowed="the file is corrupt: export it again") from None
    solid = [part for part in parts if part.faces is not None]
    return _mesh(path, solid, len(parts)) if solid else _cloud(path, parts)


@dataclass(frozen=True)
class _Part:
    """One primitive in the frame of the scene."""

    points: FloatArray
    faces: FaceArray | None
    normals: FloatArray | None
    colours: npt.NDArray[np.uint8] | None
    mirrored: bool


def _mesh(path: Path, parts: list[_Part], total: int) -> Scan:
    offsets = np.cumsum([0] + [len(part.points) for part in parts])
    points = np.concatenate([part.points for part in parts])
    faces = np.concatenate(
        [part.faces + at for part, at in zip(parts, offsets, strict=False) if part.faces is not None]
    )
    warnings: tuple[Note, ...] = ()
    mirrored = sum(part.mirrored for part in parts)
    if mirrored:
        text = f"{path.name}: {mirrored} of {len(parts)} meshes are placed by a transform that mirrors them."
        warnings += (Note("mirrored-transform", text),)
    if total > len(parts):
        text = f"{path.name}: {total - len(parts)} sets of loose points beside the meshes were not read."
        warnings += (Note("loose-points-unread", text),)
    if np.isfinite(points).all():
        places, which = shared(points)
        points, faces = welded(places, which[faces])
    return mesh_scan(path, "gltf", points, faces, unit="m", warnings=warnings)


def _cloud(path: Path, parts: list[_Part]) -> Scan:
    if not parts:
        raise ScanFault("the scene holds neither triangles nor points", file=path, allowed="export the mesh or cloud")
    normals = [part.normals for part in parts if part.normals is not None]
    colours = [part.colours for part in parts if part.colours is not None]
    return mesh_scan(
        path,
        "gltf",
        np.concatenate([part.points for part in parts]),
        np.empty((0, 3), np.int64),
        normals=np.concatenate(normals) if len(normals) == len(parts) else None,
        colours=np.concatenate(colours) if len(colours) == len(parts) else None,
        unit="m",
    )


def _placed(document: Document) -> Iterator[tuple[dict[str, Any], FloatArray]]:
    """Every mesh of the scene with the matrix (4, 4) that places it."""
    tree = document.tree
    if "nodes" not in tree:
        yield from ((mesh, np.eye(4)) for mesh in tree.get("meshes", []))
        return
    children = {child for node in tree["nodes"] for child in node.get("children", [])}
    roots: list[Any] = [k for k in range(len(tree["nodes"])) if k not in children]
    if "scenes" in tree:
        roots = document.item("scenes", tree.get("scene", 0)).get("nodes", [])
    waiting = [(root, np.eye(4)) for root in roots]
    seen: set[int] = set()
    while waiting:
        index, above = waiting.pop(0)
        node = document.item("nodes", index)
        if index in seen:
            raise ScanFault(f"node {index} is placed twice", file=document.path, allowed="nodes must form a tree")
        seen.add(index)
        matrix = above @ _matrix(node)
        waiting += [(child, matrix) for child in node.get("children", [])]
        if "mesh" in node:
            yield document.item("meshes", node["mesh"]), matrix


def _matrix(node: dict[str, Any]) -> FloatArray:
    """The node's own transform (4, 4): its matrix, or translation x rotation x scale."""
    if "matrix" in node:
        return np.array(node["matrix"], np.float64).reshape(4, 4).T
    x, y, z, w = (float(c) for c in node.get("rotation", (0, 0, 0, 1)))
    matrix = np.eye(4)
    matrix[:3, :3] = rotation_from_quaternion(w, x, y, z) * np.array(node.get("scale", (1, 1, 1)), np.float64)
    matrix[:3, 3] = node.get("translation", (0, 0, 0))
    return matrix


def _parts(document: Document, mesh: dict[str, Any], matrix: FloatArray) -> Iterator[_Part]:
    linear = matrix[:3, :3]
    determinant = float(np.linalg.det(linear))
    if not np.isfinite(matrix).all() or determinant == 0:
        raise ScanFault(
            "a node flattens its mesh: its matrix has no inverse", file=document.path, allowed="export it again"
        )
    for primitive in mesh["primitives"]:
        mode = primitive.get("mode", TRIANGLES)
        if mode not in (POINTS, TRIANGLES, STRIP, FAN):
            continue
        attributes = primitive["attributes"]
        points = _triples(document, attributes["POSITION"]) @ linear.T + matrix[:3, 3]
        faces = None if mode == POINTS else _faces(document, primitive, mode, len(points))
        if faces is not None and determinant < 0:
            faces = faces[:, ::-1]
        normals = _triples(document, attributes["NORMAL"]) @ np.linalg.inv(linear) if "NORMAL" in attributes else None
        colours = _colours(document, attributes["COLOR_0"]) if "COLOR_0" in attributes else None
        if any(array is not None and len(array) != len(points) for array in (normals, colours)):
            raise ScanFault("a mesh has more or fewer normals or colours than points", file=document.path)
        yield _Part(points, faces, normals, colours, determinant < 0)


def _triples(document: Document, accessor: Any) -> FloatArray:
    array = document.array(accessor)
    if array.shape[1] != 3:
        raise ScanFault("positions or normals are not three numbers each", file=document.path)
    return array.astype(np.float64)


def _colours(document: Document, accessor: Any) -> npt.NDArray[np.uint8]:
    array = document.array(accessor)[:, :3]
    if array.shape[1] != 3:
        raise ScanFault("colours are not three numbers each", file=document.path)
    return eight_bit(array.astype(np.float64), 1.0)


def _faces(document: Document, primitive: dict[str, Any], mode: int, points: int) -> FaceArray:
    """Triangles (m, 3) of a primitive's list, strip or fan of corners."""
    corners = np.arange(points)
    if "indices" in primitive:
        array = document.array(primitive["indices"])
        if array.dtype.kind != "u" or array.shape[1] != 1:
            raise ScanFault("a mesh numbers its corners by something else than whole numbers", file=document.path)
        corners = array[:, 0].astype(np.int64)
        check_range(int(corners.min()), int(corners.max()), points, document.path.name)
    if mode == TRIANGLES:
        if len(corners) % 3:
            seen = f"a mesh of triangles has {len(corners)} corners"
            raise ScanFault(seen, file=document.path, allowed="a multiple of three: the file is cut or corrupt")
        return corners.reshape(-1, 3)
    if mode == FAN:
        return np.stack([np.full(max(len(corners) - 2, 0), corners[0]), corners[1:-1], corners[2:]], axis=1)
    faces = np.stack([corners[:-2], corners[1:-1], corners[2:]], axis=1)
    faces[1::2] = faces[1::2][:, [1, 0, 2]]
    return faces
