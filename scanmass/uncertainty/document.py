"""Bounds as the plain entries of a result: SI, lists and numbers, None for what is not known."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.uncertainty.advice import Advice
from scanmass.uncertainty.bounds import Bounds
from scanmass.uncertainty.bracket import Bound
from scanmass.uncertainty.budget import BudgetRow
from scanmass.uncertainty.noise import NoiseModel, ratios

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
        "checks": checks(bounds),
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
        "text": in_words(noise),
    }


def in_words(noise: NoiseModel) -> str | None:
    """The noise as people say it, None where it is not known."""
    if noise.std is None:
        return None
    said = [f"{_length(noise.std)}" + (f", alike over {_length(noise.length)}" if noise.length and noise.std else "")]
    if noise.shift_std:
        said.append(f"per-view shift {_length(noise.shift_std)}")
    if noise.rotation_std:
        said.append(f"per-view turn {np.degrees(noise.rotation_std):.2g} degrees")
    return ", ".join(said)


def _length(metres: float) -> str:
    return f"{1000 * metres:.2g} mm"


def checks(bounds: Bounds) -> Plain:
    """What the views were asked besides, as changes of volume (m3) and centre of mass (m); None without views.

    ``poses``: the views laid on one another again, with what chance alone would do (one standard deviation);
    ``weightings``: other weights of the views; ``bootstrap``: standard deviations
    of errors resampled by views, and by patches of views, over those drawn from the fit.
    """
    model = bounds.noise
    if model.basis != "views" or model.resampled is None:
        return {"poses": None, "weightings": None, "bootstrap": None}
    volume = float(bounds.parts.moments[:, 0].sum())
    by = {name: ratios(drawn, model.parts) for name, drawn in zip(("views", "patches"), model.resampled, strict=True)}
    return {
        "poses": [
            {
                "name": a.name,
                **_change(a.change, volume),
                "chance_volume_m3": plain(np.sqrt(a.expected[0, 0])),
                "chance_com_m": plain(np.sqrt(np.diag(a.expected)[1:4]) / volume),
                "beyond_chance": a.beyond,
            }
            for a in model.alternatives
        ],
        "weightings": [{"name": name, **_change(change, volume)} for name, change in model.weightings.items()],
        "bootstrap": [
            {"resampled": name, "volume_ratio": plain(ratio[0]), "com_ratio": plain(ratio[1:])}
            for name, ratio in by.items()
        ],
    }


def _change(change: npt.NDArray[np.float64], volume: float) -> Plain:
    return {"volume_change_m3": plain(change[0]), "com_change_m": plain(change[1:4] / volume)}


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
