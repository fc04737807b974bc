"""E57 files: every view with its pose, its rows and columns, and pixels without return marked invalid."""

from __future__ import annotations

import uuid
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.spatial.transform import Rotation

from scanmass.studies.scanner import View

_NO_RETURN = 2
"""cartesianInvalidState of a pixel whose coordinates mean nothing."""


def write_e57(path: Path, views: Sequence[View], title: str) -> None:
    """Write ``views`` in metres. Identifiers come from the title and no time is recorded: the bytes never change."""
    import pye57

    class Quiet(pye57.E57):  # type: ignore[misc]
        """Writes the head of the file with an identifier that is the same each time."""

        def write_default_header(self) -> None:
            _write_head(self, title)

    path.unlink(missing_ok=True)
    file = Quiet(str(path), mode="w")
    for number, view in enumerate(views):
        _write_view(file, view, f"{title} {number + 1}")
    file.close()


def _identifier(text: str) -> str:
    return f"{{{uuid.uuid5(uuid.NAMESPACE_OID, text)}}}"


def _structure(image: Any, **entries: Any) -> Any:
    """An E57 structure of texts, whole numbers, numbers and other nodes."""
    from pye57 import libe57

    node = libe57.StructureNode(image)
    for name, value in entries.items():
        if isinstance(value, str):
            value = libe57.StringNode(image, value)
        elif isinstance(value, int):
            value = libe57.IntegerNode(image, value)
        elif isinstance(value, float):
            value = libe57.FloatNode(image, value)
        node.set(name, value)
    return node


def _write_head(file: Any, title: str) -> None:
    from pye57 import libe57

    image, root = file.image_file, file.root
    image.extensionsAdd("", libe57.E57_V1_0_URI)
    for name, text in (
        ("formatName", "ASTM E57 3D Imaging Data File"),
        ("guid", _identifier(title)),
        ("coordinateMetadata", ""),
    ):
        root.set(name, libe57.StringNode(image, text))
    root.set("versionMajor", libe57.IntegerNode(image, libe57.E57_FORMAT_MAJOR))
    root.set("versionMinor", libe57.IntegerNode(image, libe57.E57_FORMAT_MINOR))
    root.set("creationDateTime", _structure(image, dateTimeValue=0.0, isAtomicClockReferenced=0))
    root.set("data3D", libe57.VectorNode(image, True))
    root.set("images2D", libe57.VectorNode(image, True))


def _write_view(file: Any, view: View, name: str) -> None:
    from pye57 import libe57

    image = file.image_file
    rows, columns = view.grid_shape
    local = view.in_sensor_frame()
    x, y, z, w = (float(part) for part in Rotation.from_matrix(view.pose.rotation_scene_from_sensor()).as_quat())
    tx, ty, tz = (float(part) for part in view.pose.position)
    bounds = {
        f"{axis}{end}": float(value)
        for end, values in (("Minimum", local.min(axis=0)), ("Maximum", local.max(axis=0)))
        for axis, value in zip("xyz", values, strict=True)
    }
    index_bounds = {"rowMinimum": 0, "rowMaximum": rows - 1, "columnMinimum": 0, "columnMaximum": columns - 1}
    prototype = libe57.StructureNode(image)
    for axis in "XYZ":
        prototype.set(f"cartesian{axis}", libe57.FloatNode(image, 0.0, libe57.E57_SINGLE))
    prototype.set("rowIndex", libe57.IntegerNode(image, 0, 0, rows - 1))
    prototype.set("columnIndex", libe57.IntegerNode(image, 0, 0, columns - 1))
    prototype.set("cartesianInvalidState", libe57.IntegerNode(image, 0, 0, _NO_RETURN))
    points = libe57.CompressedVectorNode(image, prototype, libe57.VectorNode(image, True))
    node = _structure(
        image,
        guid=_identifier(name),
        name=name,
        indexBounds=_structure(image, **index_bounds),
        cartesianBounds=_structure(image, **bounds),
        pose=_structure(
            image, rotation=_structure(image, w=w, x=x, y=y, z=z), translation=_structure(image, x=tx, y=ty, z=tz)
        ),
        points=points,
    )
    file.data3d.append(node)
    _write_records(file, points, _records(view, local))


def _records(view: View, local: npt.NDArray[np.float64]) -> dict[str, npt.NDArray[Any]]:
    rows, columns = view.grid_shape
    pixel = view.rows.astype(np.int64) * columns + view.columns
    place = np.zeros((rows * columns, 3))
    place[pixel] = local
    invalid = np.full(rows * columns, _NO_RETURN, np.int8)
    invalid[pixel] = 0
    row, column = np.divmod(np.arange(rows * columns), columns)
    fields: dict[str, npt.NDArray[Any]] = {f"cartesian{axis}": place[:, k] for k, axis in enumerate("XYZ")}
    return fields | {"rowIndex": row, "columnIndex": column, "cartesianInvalidState": invalid}


def _write_records(file: Any, points: Any, fields: dict[str, npt.NDArray[Any]]) -> None:
    n = len(next(iter(fields.values())))
    arrays, buffers = file.make_buffers(list(fields), n)
    writer = points.writer(buffers)
    for name, values in fields.items():
        arrays[name][:] = values
    writer.write(n)
    writer.close()
