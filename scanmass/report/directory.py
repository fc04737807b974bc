"""A result as a folder of files: written whole or not at all."""

from __future__ import annotations

import json
import os
import shutil
from collections.abc import Callable
from pathlib import Path

from scanmass.errors import UserFault
from scanmass.pipeline.record import MassResult
from scanmass.report.ply import write_removed, write_surface
from scanmass.report.schema import validate
from scanmass.report.tables import write_replicates, write_state
from scanmass.report.voxels import write_cells

FILES = (
    "result.json",
    "run.json",
    "pipeline.yaml",
    "surface.ply",
    "removed.ply",
    "cells.vti",
    "replicates.parquet",
    "state.npz",
    "report.html",
    "rehearsal.json",
    "rehearsal.jsonl",
)
"""All that a result folder may hold."""

_REMEDY = "name a new or empty folder, or one that holds an earlier scanmass result"


def write(result: MassResult, out_dir: str | Path, *, cells: bool = True) -> None:
    """Write the files of a result into ``out_dir``; without ``cells`` the voxel file is left out.

    They are written beside the place and moved there when complete, so no half result is ever seen. An earlier
    result there is replaced.

    Raises
    ------
    UserFault
        If the folder holds something foreign, or cannot be written.
    InvalidResult
        If the document breaks the contract; nothing is written then.
    """
    validate(result.document)
    target = Path(out_dir).resolve()
    refuse_foreign(target)
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        _in_place(target, lambda folder: _write_files(result, folder, cells))
    except OSError as fault:
        reason = fault.strerror or str(fault)
        raise UserFault(f"cannot write results: {reason}", file=target, allowed="choose another folder") from fault


def refuse_foreign(out_dir: str | Path) -> None:
    """Check that a result may be put at ``out_dir``: nothing there, an empty folder, or an earlier result.

    Asked before measuring too, so that a long run does not end at a folder that cannot be written.

    Raises
    ------
    UserFault
        Naming what is in the way.
    """
    target = Path(out_dir)
    _refuse_closed(target.absolute())
    if not target.exists() and not target.is_symlink():
        return
    if not target.is_dir():
        raise UserFault("is a file, not a folder to write results into", file=target, allowed=_REMEDY)
    inside = sorted(target.iterdir())
    foreign = [entry.name for entry in inside if entry.name not in FILES or entry.is_symlink() or not entry.is_file()]
    if foreign:
        others = f" and {len(foreign) - 1} more" if len(foreign) > 1 else ""
        raise UserFault(f"holds {foreign[0]!r}{others}, not written by scanmass", file=target, allowed=_REMEDY)
    if inside and not _is_ours(target / "result.json"):
        raise UserFault("holds files, but no result.json of scanmass among them", file=target, allowed=_REMEDY)


def _refuse_closed(target: Path) -> None:
    """Refuse a place under a file, or in a folder that may not be written; results are made beside their place."""
    nearest = next(parent for parent in target.parents if parent.exists())
    if not nearest.is_dir():
        seen = f"cannot write results: {nearest.name} is a file, not a folder"
        raise UserFault(seen, file=target, allowed="choose another folder")
    for folder in (nearest, target):
        if folder.is_dir() and not os.access(folder, os.W_OK | os.X_OK):
            seen = f"cannot write results: the folder {folder} may not be written to"
            raise UserFault(seen, file=target, allowed="choose another folder")


def _is_ours(path: Path) -> bool:
    try:
        document = json.loads(path.read_text("utf-8"))
    except (OSError, ValueError):
        return False
    return isinstance(document, dict) and str(document.get("schema", "")).startswith("scanmass/")


def _write_files(result: MassResult, folder: Path, cells: bool) -> None:
    products = result.products
    _write_text(folder / "result.json", result.to_json())
    _write_text(
        folder / "run.json",
        json.dumps(dict(result.run), indent=1, ensure_ascii=False, allow_nan=False, default=str) + "\n",
    )
    _write_text(folder / "pipeline.yaml", result.pipeline_text)
    write_surface(folder / "surface.ply", products.surface)
    write_removed(folder / "removed.ply", products.removed)
    if cells:
        write_cells(folder / "cells.vti", products.cells, products.density_kg_m3)
    write_replicates(folder / "replicates.parquet", products.replicates)
    write_state(folder / "state.npz", products.state)


def _write_text(path: Path, text: str) -> None:
    path.write_text(text, encoding="utf-8", newline="\n")


def _in_place(target: Path, fill: Callable[[Path], None]) -> None:
    """Fill a folder beside ``target`` and move it there; whatever happens, nothing of it stays behind."""
    partial = target.with_name(f".{target.name}.partial-{os.getpid()}")
    earlier = target.with_name(f".{target.name}.earlier-{os.getpid()}")
    partial.mkdir()
    try:
        fill(partial)
        if target.exists():
            target.rename(earlier)
        try:
            partial.rename(target)
        except OSError:
            if earlier.exists():
                earlier.rename(target)
            raise
        shutil.rmtree(earlier, ignore_errors=True)
    finally:
        shutil.rmtree(partial, ignore_errors=True)
