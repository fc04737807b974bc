"""Bounds as the plain entries of a result: SI, lists and numbers, None for what is not known."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.uncertainty.advice import Advice
from scanmass.uncertainty.bounds import Bounds
from scanmass.uncertainty.bracket import Bound
from scanmass.uncertainty.budget import BudgetRow
from scanmass.uncertainty.noise import NoiseModel

Plain = dict[str, Any]


def as_document(bounds: Bounds) -> Plain:
    """The entries of a result that bounds fill, by the contract, and the notes (code, text) of this stage."""
    return {
        "noise": _noise(bounds.noise),
        "volume_m3": _bound(bounds.volume),
        "mass_kg": _bound(bounds.mass),
        "center_of_mass_m": _bound(bounds.com)
        | {"covariance": plain(bounds.com_covariance), "region": _region(bounds)},
        "inertia_kg_m2": {key: plain(getattr(bounds.inertia, key)) for key in ("value", "std", "low", "high")}
        | {"about": "center_of_mass", "axes": "scan", "sign": "I = integral (r.r E - r r^T) dm"},
        "principal": [_principal(bounds, k) for k in range(3)],
        "budget": [_row(row) for row in bounds.budget],
        "assumptions": [{"code": n.code, "text": n.text} for n in bounds.assumptions],
        "warnings": [{"code": n.code, "text": n.text} for n in bounds.warnings],
    }


def advice_block(advice: Advice | None) -> Plain | None:
    """A measurement that is advised, or None."""
    if advice is None:
        return None
    factors = {"mass_factor": plain(advice.mass_factor), "com_factor": plain(advice.com_factor)}
    return {"text": advice.text, "source": advice.source, **factors}


def plain(number: float | npt.NDArray[np.float64] | None) -> Any:
    """A float, nested lists of floats, or None; numbers that are not finite become None."""
    if number is None:
        return None
    if np.ndim(number) > 0:
        return [plain(part) for part in np.asarray(number)]
    return float(number) + 0.0 if np.isfinite(number) else None


def _bound(bound: Bound) -> Plain:
    bracket = None
    if bound.bracket_low is not None:
        bracket = {"low": plain(bound.bracket_low), "high": plain(bound.bracket_high)}
    return {
        "value": plain(bound.value),
        "std": plain(bound.std),
        "low": plain(bound.low),
        "high": plain(bound.high),
        "degrees_of_freedom": plain(bound.degrees_of_freedom),
        "random": {"low": plain(bound.random_low), "high": plain(bound.random_high)},
        "bracket": bracket,
    }


def _region(bounds: Bounds) -> Plain | None:
    found = bounds.region
    if found is None:
        return None
    return {
        "center_m": plain(found.center),
        "radii_m": plain(found.radii),
        "axes": plain(found.axes),
        "level": found.level,
    }


def _principal(bounds: Bounds, k: int) -> Plain:
    moment = {
        key: None if getattr(bounds.principal, key) is None else plain(getattr(bounds.principal, key)[k])
        for key in ("value", "std", "low", "high")
    }
    axes = bounds.axes
    return {
        "moment_kg_m2": moment,
        "axis": plain(axes.axes[k]),
        "cone_deg": plain(np.degrees(axes.cones[k])),
        "determined": bool(axes.determined[k]),
        "plane_normal": plain(axes.plane_normal(k)),
    }


def _noise(noise: NoiseModel) -> Plain:
    return {
        "basis": noise.basis,
        "std_m": plain(noise.std),
        "length_m": plain(noise.length),
        "shape": noise.shape,
        "shift_std_m": plain(noise.shift_std),
        "rotation_std_rad": plain(noise.rotation_std),
        "views": noise.views,
    }


def _row(row: BudgetRow) -> Plain:
    return {
        "source": row.source,
        "kind": row.kind,
        "mass_std_kg": plain(row.mass_std),
        "com_std_m": plain(row.com_std),
        "mass_half_range_kg": plain(row.mass_half_range),
        "com_half_range_m": plain(row.com_half_range),
        "share_mass": plain(row.share_mass),
        "share_com": plain(row.share_com),
    }
