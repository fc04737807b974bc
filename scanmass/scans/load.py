"""Scan files to scans in metres: the door every scan comes in by."""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import Executor
from dataclasses import replace
from pathlib import Path

from scanmass.errors import Note, ScanFault, UserFault
from scanmass.progress import Progress, silent
from scanmass.scans.admit import admit, as_units
from scanmass.scans.scan import Scan
from scanmass.scans.survey import Survey, survey
from scanmass.scans.table import read
from scanmass.units import metres_per

_ASKED = (("mm", 1e-3), ("m", 1.0), ("inch", 0.0254))


def load(
    paths: Sequence[str | Path],
    unit: str | None = None,
    pipeline_unit: str | None = None,
    *,
    executor: Executor | None = None,
    progress: Progress = silent,
) -> tuple[Scan, ...]:
    """The scans of ``paths``, views of one object, in metres and fit to be measured.

    ``unit`` is the one given at the command line, ``pipeline_unit`` the pipeline file's; either will do. With an
    ``executor`` the files are looked through side by side.

    Raises
    ------
    UserFault
        If the two units differ, or are no lengths.
    ScanFault
        If a file cannot be read or measured, does not say its unit and none is declared, or comes twice.
    """
    if not paths:
        raise ScanFault("no scan is named", allowed="name at least one scan file")
    declared = _agreed(unit, pipeline_unit)
    scans: list[Scan] = []
    for path in paths:
        scan = read(path)
        _refuse_twin(scan, scans)
        scans.append(scan)
    surveys: list[Survey] = []
    for seen in map(survey, scans) if executor is None else executor.map(_survey_file, paths):
        progress("read", len(surveys), len(paths))
        surveys.append(seen)
    progress("read", len(paths), len(paths))
    if len(scans) > 1:
        scans = [_as_points(scan) for scan in scans]
    known = [_with_unit(scan, seen, declared) for scan, seen in zip(scans, surveys, strict=True)]
    metres = [1.0 if scan.file_unit is None else metres_per(scan.file_unit) for scan in known]
    return tuple(
        scan.in_metres(str(scan.file_unit), factor, str(scan.unit_from))
        for scan, factor in zip(admit(known, surveys, metres), metres, strict=True)
    )


def _survey_file(path: str | Path) -> Survey:
    return survey(read(path))


def _agreed(unit: str | None, pipeline_unit: str | None) -> str | None:
    """The declared unit, if any; both are read, so that a misspelt one is refused."""
    lengths = [metres_per(name) for name in (unit, pipeline_unit) if name is not None]
    if len(lengths) == 2 and lengths[0] != lengths[1]:
        raise UserFault(
            f"the unit was given as {unit}, and the pipeline file says scan.unit: {pipeline_unit}",
            allowed="they must agree: correct one, or leave it out",
        )
    return unit if unit is not None else pipeline_unit


def _refuse_twin(scan: Scan, before: Sequence[Scan]) -> None:
    for other in before:
        if other.sha256 == scan.sha256:
            seen = "this is the same file twice" if other.file == scan.file else f"this holds the same as {other.file}"
            raise ScanFault(seen, file=scan.file, allowed="name each view once: twice would make it look more certain")


def _as_points(scan: Scan) -> Scan:
    """A warning where a mesh is one of several views: only its corners are measured."""
    if scan.faces is None:
        return scan
    text = f"{scan.file}: a mesh among several scans: its corners are used as points, its faces are not."
    return replace(scan, warnings=(*scan.warnings, Note("mesh-as-points", text)))


def _with_unit(scan: Scan, seen: Survey, declared: str | None) -> Scan:
    """The scan with ``file_unit`` and ``unit_from``; a declared unit wins over the standard's, with a warning."""
    if declared is None and scan.unit is None:
        raise ScanFault(
            f"the file does not say its unit; its largest side is {as_units(seen.size, _ASKED)}",
            file=scan.file,
            allowed="give --unit, or scan.unit in the pipeline file",
        )
    if declared is None:
        return replace(scan, file_unit=scan.unit, unit_from="file")
    if scan.unit is not None and metres_per(declared) != metres_per(scan.unit):
        text = (
            f"{scan.file}: the format is in {scan.unit} by its standard, but {declared} was declared and is used: "
            f"the largest side is {as_units(seen.size, ((declared, metres_per(declared)), (scan.unit, 1.0)))}."
        )
        scan = replace(scan, warnings=(*scan.warnings, Note("declared-unit-wins", text)))
    return replace(scan, file_unit=declared, unit_from="declared")
