"""Mass, centre of mass, inertia and principal axes of scanned objects, with confidence bounds."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from scanmass.pipeline.record import MassResult as MassResult
    from scanmass.pipeline.run import measure as measure

# Names handed on when asked for: numba and scipy take a second to load, which `--help` must not wait for.
_HOMES = {"measure": "scanmass.pipeline.run", "MassResult": "scanmass.pipeline.record"}


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'scanmass' has no attribute {name!r}")
