"""Scans of formats that are read whole."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import numpy.typing as npt

from scanmass.errors import Note, ScanFault
from scanmass.scans.blocks import BLOCK_POINTS
from scanmass.scans.scan import Block, FloatArray, Scan, ViewHead


def mesh_scan(
    path: Path,
    format_name: str,
    points: FloatArray,
    faces: npt.NDArray[np.int64],
    *,
    normals: FloatArray | None = None,
    colours: npt.NDArray[np.uint8] | None = None,
    unit: str | None = None,
    warnings: tuple[Note, ...] = (),
    assumptions: tuple[Note, ...] = (),
) -> Scan:
    """A scan of one view from points (n, 3) and faces (m, 3) in memory; a cloud where there is no face.

    Raises
    ------
    ScanFault
        If there is no point.
    """
    if len(points) == 0:
        raise ScanFault("the file holds no points", file=path, allowed="at least 500 are needed")
    if len(faces) == 0:
        text = (
            f"{path.name}: the file holds points and no faces; it is measured as a cloud. If it was a mesh, it is cut."
        )
        warnings = (*warnings, Note("no-faces", text))

    def blocks() -> list[Block]:
        parts = [slice(start, start + BLOCK_POINTS) for start in range(0, len(points), BLOCK_POINTS)]
        return [
            Block(0, points[p], None if normals is None else normals[p], None if colours is None else colours[p])
            for p in parts
        ]

    return Scan(
        file=path.name,
        sha256="",
        format=format_name,
        views=(ViewHead("view 0"),),
        blocks=lambda: iter(blocks()),
        total=len(points),
        faces=faces if len(faces) else None,
        unit=unit,
        warnings=warnings,
        assumptions=assumptions,
    )
