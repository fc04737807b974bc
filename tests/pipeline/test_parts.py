"""Exact CAD parts through the whole chain: points with noise in, bounded figures out.

All five and a table of them: ``python -m tests.pipeline.test_parts``, or ``pytest -m study tests/pipeline``.
"""

from __future__ import annotations

import tempfile
import time
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

import scanmass
from scanmass.pipeline.record import MassResult
from tests.pipeline.pebble import write_ply
from tests.surface.parts import PARTS, Exact, exact, tessellated
from tests.surface.scanned import on_mesh

POINTS = 200_000
NOISE = 0.001
"""White noise of each coordinate over the longest side."""
QUICK = "filleted block with bores"
MISSES = {
    "loft": (
        0.001,
        "White noise pushes the surface of this part outward by a thirtieth of its standard deviation (0.03 % of the "
        "volume with every seed, nothing without noise). That bias is in no bound, and the rest, averaged over 200 000 "
        "points, is only 0.016 %: the bounds of the volume and of the three moments miss by up to 0.1 %.",
    )
}
"""Parts whose bounds are known not to hold the truth: by how much of it at most, and why."""


@dataclass(frozen=True)
class Measured:
    """A part's result beside the truth; ``size`` its longest side in metres; density 1 kg/m3."""

    truth: Exact
    size: float
    result: MassResult
    seconds: float

    @property
    def centre_error(self) -> np.ndarray:
        """(3,) over the longest side."""
        return (np.array(self.result["center_of_mass_m"]["value"]) - self.truth.centre) / self.size

    @property
    def moment_errors(self) -> np.ndarray:
        """(3,) relative, of the principal moments in ascending order."""
        return np.array([p["moment_kg_m2"]["value"] for p in self.result["principal"]]) / self.truth.principal - 1.0

    def outside(self, beyond: float = 0.0) -> list[str]:
        """Which of the stated bounds do not hold the truth, though it may lie ``beyond`` them, relative."""
        result, truth = self.result, self.truth
        claims = [("volume", result["volume_m3"], truth.volume)]
        center = result["center_of_mass_m"]
        claims += [
            (f"centre {axis}", {end: center[end][k] for end in ("low", "high")}, truth.centre[k])
            for k, axis in enumerate("xyz")
        ]
        claims += [
            (f"moment {k + 1}", p["moment_kg_m2"], truth.principal[k]) for k, p in enumerate(result["principal"])
        ]
        return [name for name, bound, true in claims if not _holds(bound, true, beyond)]


def _holds(bound: Mapping[str, float], true: float, beyond: float) -> bool:
    return bound["low"] - beyond * abs(true) <= true <= bound["high"] + beyond * abs(true)


def measured(name: str, folder: Path) -> Measured:
    """One part sampled evenly, with noise, without normals, and measured with that noise declared."""
    shape = PARTS[name]()
    points, _ = on_mesh(*tessellated(shape), POINTS, seed=11)
    size = float(np.ptp(points, axis=0).max())
    noisy = points + np.random.default_rng(12).normal(0.0, NOISE * size, points.shape)
    scan = write_ply(folder / "part.ply", noisy)
    pipeline = {
        "scan": {"unit": "m", "noise_std": f"{NOISE * size:.6f} m", "noise_length": "0 mm"},
        "clean": {"support": "none"},
        "surface": {"underside": "seen"},
        "inside": {"body": {"density": "1 ± 0.000001 kg/m3"}},
    }
    start = time.perf_counter()
    result = scanmass.measure(scan, pipeline)
    return Measured(exact(shape), size, result, time.perf_counter() - start)


@pytest.mark.parametrize("name", [n if n == QUICK else pytest.param(n, marks=pytest.mark.study) for n in PARTS])
def test_parts_with_noise(name: str, tmp_path: Path) -> None:
    part = measured(name, tmp_path)
    # The project's stated figures. The noise alone averages out to far less over 200 000 points.
    assert part.result["volume_m3"]["value"] == pytest.approx(part.truth.volume, rel=0.0015)
    np.testing.assert_allclose(part.centre_error, 0.0, atol=0.0003)
    np.testing.assert_allclose(part.moment_errors, 0.0, atol=0.004)
    # What is claimed at 95 % holds in all seven figures, for they share their errors; MISSES says where it does not.
    assert part.outside(MISSES.get(name, (0.0, ""))[0]) == []
    assert part.result["noise"]["basis"] == "declared"
    assert part.result["surface"]["closed"]


def print_table() -> None:
    """One line a part: errors in per cent, half-width of the volume's bounds, what the bounds miss."""
    print(f"{'part':28}{'volume %':>10}{'± %':>8}{'centre %':>10}{'moments %':>11}{'seconds':>9}  outside the bounds")
    for name in PARTS:
        with tempfile.TemporaryDirectory() as folder:
            part = measured(name, Path(folder))
        volume = part.result["volume_m3"]
        print(
            f"{name:28}{100 * (volume['value'] / part.truth.volume - 1):10.4f}"
            f"{50 * (volume['high'] - volume['low']) / part.truth.volume:8.3f}"
            f"{100 * np.abs(part.centre_error).max():10.4f}{100 * np.abs(part.moment_errors).max():11.3f}"
            f"{part.seconds:9.1f}  {', '.join(part.outside()) or '-'}"
        )


if __name__ == "__main__":
    print_table()
