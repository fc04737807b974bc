"""What can be measured is let in; what cannot is refused with its reason, and what is odd is listed."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from scanmass.errors import Note, ScanFault
from scanmass.scans.scan import Scan
from scanmass.scans.survey import COARSE, TOO_COARSE, Survey, is_closed

LEAST_POINTS = 500
LEAST_SIZE, GREATEST_SIZE = 1e-3, 1e3
"""Metres: 1 mm to 1 km."""
MOST_DROPPED = 0.01
"""A file with a larger share of points that are not finite is not trusted."""
FLAT = 1e-5
"""Spread across over spread along below which points lie in a plane: far under scanner noise, over float rounding."""
ALTERNATIVES = (("mm", 1e-3), ("cm", 1e-2), ("m", 1.0), ("inch", 0.0254))


def admit(scans: Sequence[Scan], surveys: Sequence[Survey], metres_per_unit: Sequence[float]) -> tuple[Scan, ...]:
    """The scans, in their own units, with points that are no return counted and dropped points listed.

    The files are views of one object, so points are counted, and flatness judged, over all of them.

    Raises
    ------
    ScanFault
        If too few points are usable, too many are not finite, all lie in one plane, line or place, or the size is
        under 1 mm or over 1 km.
    """
    counted = tuple(_counted(scan, seen) for scan, seen in zip(scans, surveys, strict=True))
    for scan, seen, metres in zip(counted, surveys, metres_per_unit, strict=True):
        _check_steps(scan, seen, metres)
    _check_number(counted, surveys)
    for scan, seen, metres in zip(counted, surveys, metres_per_unit, strict=True):
        _check_size(scan, seen, metres)
    _check_flat(counted, surveys)
    return tuple(
        replace(scan, warnings=scan.warnings + _coarse(scan, seen, metres) + _at_origin(scan, seen) + _loose(scan))
        for scan, seen, metres in zip(counted, surveys, metres_per_unit, strict=True)
    )


def _counted(scan: Scan, seen: Survey) -> Scan:
    """Points that the file holds and the blocks do not: no return where a scanner wrote them, else dropped."""
    lost = scan.total - seen.usable
    if lost == 0:
        return scan
    if scan.format == "e57" or all(head.grid_shape is not None for head in scan.views):
        return replace(scan, no_return=lost)
    share = lost / scan.total
    if share > MOST_DROPPED:
        seen_words = f"{lost} of {scan.total} points ({100 * share:.1f} %) have coordinates that are not finite"
        allowed = f"up to {100 * MOST_DROPPED:.0f} % are dropped with a warning: export the scan again"
        raise ScanFault(seen_words, file=scan.file, allowed=allowed)
    text = f"{scan.file}: {lost} of {scan.total} points have coordinates that are not finite and were dropped."
    return replace(scan, warnings=(*scan.warnings, Note("not-finite-dropped", text)))


def _check_number(scans: Sequence[Scan], surveys: Sequence[Survey]) -> None:
    usable = sum(seen.usable for seen in surveys)
    if usable >= LEAST_POINTS or any(is_closed(scan) for scan in scans):
        return
    files = scans[0].file if len(scans) == 1 else None
    allowed = f"at least {LEAST_POINTS} are needed, unless it is a closed mesh"
    where = " in an open mesh" if any(scan.faces is not None for scan in scans) else ""
    raise ScanFault(f"the scan holds {usable} usable points{where}", file=files, allowed=allowed)


def _check_size(scan: Scan, seen: Survey, metres: float) -> None:
    if seen.usable == 0:
        raise ScanFault("the scan holds 0 usable points", file=scan.file, allowed=f"at least {LEAST_POINTS} are needed")
    if seen.size == 0:
        raise ScanFault(f"all {seen.usable} points lie in one place", file=scan.file, allowed="the file holds no shape")
    size = seen.size * metres
    if not LEAST_SIZE <= size <= GREATEST_SIZE:
        side = "under 1 mm" if size < LEAST_SIZE else "over 1 km"
        if any(LEAST_SIZE <= seen.size * unit <= GREATEST_SIZE for _, unit in ALTERNATIVES):
            cause, allowed = "the unit is probably wrong", f"the same numbers are {as_units(seen.size)}"
        else:
            cause = "the file is probably corrupt, or a point of it lies far astray"
            allowed = "export it again; no unit that is read here makes sense of it"
        raise ScanFault(f"the largest side is {length(size)}, {side}, so {cause}", file=scan.file, allowed=allowed)


def as_units(size: float, units: Sequence[tuple[str, float]] = ALTERNATIVES) -> str:
    """How large a side of ``size`` is in other units, in words.

    >>> as_units(412.3, (("mm", 1e-3), ("m", 1.0), ("inch", 0.0254)))
    '412.3 mm if in mm, 412.3 m if in m, 10.47 m if in inch'
    """
    return ", ".join(f"{length(size * metres)} if in {name}" for name, metres in units)


def length(metres: float) -> str:
    """A length in the unit that suits it, four digits."""
    for name, unit in (("km", 1e3), ("m", 1.0), ("mm", 1e-3)):
        if abs(metres) >= unit:
            return f"{metres / unit:.4g} {name}"
    return f"{metres / 1e-6:.4g} um"


def _check_flat(scans: Sequence[Scan], surveys: Sequence[Survey]) -> None:
    """Refuse points in one plane or line. Files flat each by itself may still be views of several sides."""
    flat = [bool(seen.spreads[0] <= FLAT * seen.spreads[2]) for seen in surveys]
    if not all(flat) or (len(scans) > 1 and not _together_flat(scans)):
        return
    thin = all(bool(seen.spreads[1] <= FLAT * seen.spreads[2]) for seen in surveys)
    files = scans[0].file if len(scans) == 1 else None
    allowed = "a body has extent in three directions: scan more of it, or export the whole scan"
    raise ScanFault(f"all points lie {'on a line' if thin else 'in a plane'}", file=files, allowed=allowed)


def _together_flat(scans: Sequence[Scan]) -> bool:
    points = np.concatenate([scan.points() for scan in scans])
    points = points - points.mean(axis=0)
    spreads = np.sqrt(np.maximum(np.linalg.eigvalsh(points.T @ points), 0.0))
    return bool(spreads[0] <= FLAT * spreads[2])


def _check_steps(scan: Scan, seen: Survey, metres: float) -> None:
    """Refuse coordinates so rounded that no shape is left, before the points that fell together are counted."""
    if seen.size > 0 and seen.step > TOO_COARSE * seen.size:
        raise ScanFault(
            f"the coordinates lie so far from the origin that they are stored in steps of {length(seen.step * metres)}"
            f", where the largest side is {length(seen.size * metres)}",
            file=scan.file,
            allowed="export them nearer to the origin or in double precision",
        )


def _coarse(scan: Scan, seen: Survey, metres: float) -> tuple[Note, ...]:
    """A warning where single precision far from the origin has rounded the coordinates."""
    if seen.step <= COARSE * seen.size:
        return ()
    text = (
        f"{scan.file}: the coordinates lie far from the origin and are stored in steps of "
        f"{length(seen.step * metres)}; export them nearer to the origin or in double precision."
    )
    return (Note("coordinates-rounded", text),)


def _at_origin(scan: Scan, seen: Survey) -> tuple[Note, ...]:
    """A warning where points lie on one another at the origin, as they do when what was not measured is written."""
    if seen.at_origin < 2:
        return ()
    text = f"{scan.file}: {seen.at_origin} points lie exactly at 0, 0, 0; they may stand for what was not measured."
    return (Note("points-at-origin", text),)


def _loose(scan: Scan) -> tuple[Note, ...]:
    """A warning where points of a mesh belong to no face."""
    if scan.faces is None:
        return ()
    points = sum(len(block.points) for block in scan.blocks())
    used = np.zeros(points, bool)
    used[scan.faces] = True
    loose = points - int(used.sum())
    if loose == 0:
        return ()
    return (Note("points-without-face", f"{scan.file}: {loose} of {points} points belong to no face of the mesh."),)
