"""The names that files give to a point's properties, and what they stand for."""

from __future__ import annotations

import re
from collections.abc import Sequence

AXES = ("x", "y", "z")
NORMALS = ("nx", "ny", "nz")
COLOURS = ("red", "green", "blue")
PROPERTIES = (*AXES, *NORMALS, *COLOURS, "view")

_SPELLINGS = {
    **{axis: (axis, f"p{axis}", f"{axis}coord", f"{axis}coordinate", f"coord{axis}", f"points{k}")
       for k, axis in enumerate(AXES)},
    **{f"n{axis}": (f"n{axis}", f"normal{axis}", f"normals{k}") for k, axis in enumerate(AXES)},
    "red": ("red", "r", "diffusered"),
    "green": ("green", "g", "diffusegreen"),
    "blue": ("blue", "b", "diffuseblue"),
    "view": ("view", "viewid", "viewindex", "scan", "scanid", "scanindex", "station", "stationid", "setup", "setupid"),
}  # fmt: skip
_MEANING = {spelling: name for name, spellings in _SPELLINGS.items() for spelling in spellings}


def meaning(name: str) -> str | None:
    """Which of PROPERTIES a file's ``name`` stands for, or None.

    Case, quotes, a bracketed unit and the marks ``_ : . -`` are looked past.

    >>> meaning("X [mm]"), meaning("normal_y"), meaning("Scan_ID"), meaning("curvature")
    ('x', 'ny', 'view', None)
    """
    plain = re.sub(r"[\[(].*", "", name.strip().strip("\"'").lower())
    plain = re.sub(r"[\s_:.\-/#]", "", plain).removeprefix("scalar")
    return _MEANING.get(plain)


def columns_of(names: Sequence[str]) -> dict[str, int]:
    """Where each property stands among ``names``: property to index, the first of equal ones.

    Sets of three are kept whole: normals or colours that lack a component are left out.

    >>> columns_of(["x", "y", "z", "intensity", "nx", "ny"])
    {'x': 0, 'y': 1, 'z': 2}
    """
    found: dict[str, int] = {}
    for index, name in enumerate(names):
        what = meaning(name)
        if what is not None:
            found.setdefault(what, index)
    for triple in (NORMALS, COLOURS):
        if not all(name in found for name in triple):
            for name in triple:
                found.pop(name, None)
    return found
