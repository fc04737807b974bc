"""How often the bracket of an unseen underside holds the truth, on bodies of which nothing below was seen.

python -m tests.benchmarks.unseen --runs 3            # each body three times and each way; some ten minutes
python -m tests.benchmarks.unseen --runs 1 --body vase --body dome
"""

from __future__ import annotations

import argparse
import tempfile
import time
from dataclasses import dataclass
from pathlib import Path

import numpy as np

import scanmass
from scanmass import seeds
from scanmass.errors import Declined
from scanmass.geometry.moments import centroid
from scanmass.studies.bodies import Body, box, turned
from scanmass.studies.ray_casting import Scene
from scanmass.studies.scanner import Sensor, look
from scanmass.studies.sensor_errors import SensorErrors
from scanmass.studies.stations import ring
from scanmass.studies.write_points import merged, write_ply
from tests.benchmarks.unseen_bodies import BODIES, FLAT

NOISE = 0.0003
WAYS = ("table", "declared", "flat")
"""Up from the floor in the scan; up declared and the floor cropped away; the floor, and the underside declared flat."""


@dataclass(frozen=True)
class Run:
    """One scan measured: truth and bounds of volume and of each coordinate of the centre, (4,) each, in m3 and m."""

    body: str
    way: str
    seed: int
    true: np.ndarray
    value: np.ndarray
    low: np.ndarray
    high: np.ndarray
    seen: float
    seconds: float
    size: float

    @property
    def beyond(self) -> np.ndarray:
        """How far the truth lies outside (4,): positive is out; % of volume, and % of size."""
        scale = 100.0 / np.array([self.true[0], self.size, self.size, self.size])
        out: np.ndarray = np.maximum(self.low - self.true, self.true - self.high) * scale
        return out

    @property
    def width(self) -> np.ndarray:
        """Width of the bounds (4,): % of volume, and % of size."""
        scale = 100.0 / np.array([self.true[0], self.size, self.size, self.size])
        wide: np.ndarray = (self.high - self.low) * scale
        return wide


def scanned(body: Body, seed: int, *, floor: bool) -> tuple[np.ndarray, np.ndarray]:
    """Points (n, 3) and view numbers (n,) of a body turned about up, from eight stations above the horizon."""
    rng = seeds.stream(seed, "unseen stations")
    low, high = body.vertices.min(axis=0), body.vertices.max(axis=0)
    size = float((high - low).max())
    middle = (0.0, 0.0, 0.5 * float(high[2]))
    ground = box("floor", (4.0 * size, 4.0 * size, 0.02), (0.0, 0.0, -0.01))
    errors = SensorErrors(white_std=NOISE, incidence_growth=0.5, drop_out=0.02, steepest=np.radians(82.0))
    sensor = Sensor(110, 110, np.radians(34.0), errors)
    start = rng.uniform(0.0, 360.0)
    poses = ring(middle, 2.6 * size, rng.uniform(12.0, 24.0), start + 72.0 * np.arange(5))
    poses += ring(middle, 2.6 * size, rng.uniform(45.0, 65.0), start + 36.0 + 120.0 * np.arange(3))
    scene = Scene([body, ground])
    points, view, part = merged([look(scene, sensor, pose, seed=seed, index=k) for k, pose in enumerate(poses)])
    kept = part >= 0 if floor else part == 0
    return points[kept], view[kept]


def run(name: str, way: str, seed: int) -> Run | str:
    """One scan of a body and what is said of it, or why it was declined."""
    rng = seeds.stream(seed, "unseen turn")
    body = BODIES[name]().moved(turned((0.0, 0.0, float(rng.uniform(0.0, 360.0)))), (0.0, 0.0, 0.0))
    points, view = scanned(body, seed, floor=way != "declared")
    settings = {
        "scan": {"unit": "mm", "noise_std": f"{1000 * NOISE:g} mm", "noise_length": "0 mm"},
        "surface": {"underside": "flat" if way == "flat" else "unknown"},
        "inside": {"body": {"density": "1000 ± 1 kg/m3"}},
        "bounds": {"replicates": 200},
    }
    if way == "declared":
        settings["scan"]["up"] = "0 0 1"
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder, "scan.ply")
        write_ply(path, 1000.0 * points, view, "unseen")
        start = time.perf_counter()
        try:
            found = scanmass.measure(path, settings, seed=seed)
        except Declined as fault:
            return f"{name:8} {way:8} {seed:3}  declined: {fault}"
    moments = body.moments()
    volume, centre = found["volume_m3"], found["center_of_mass_m"]

    def of(end: str) -> np.ndarray:
        return np.array([volume[end], *centre[end]])

    return Run(
        name,
        way,
        seed,
        np.array([moments[0], *centroid(moments)]),
        of("value"),
        of("low"),
        of("high"),
        found["surface"]["observed_fraction"],
        time.perf_counter() - start,
        float(np.ptp(body.vertices, axis=0).max()),
    )


def line(found: Run) -> str:
    """A row of the table."""
    off = 100.0 * (found.value[0] / found.true[0] - 1.0)
    ends = " ".join(f"{100 * (end[0] / found.true[0] - 1):6.2f}" for end in (found.low, found.high))
    out = " ".join(f"{x:6.2f}{'*' if x > 0 else ' '}" for x in found.beyond)
    wide = " ".join(f"{x:5.2f}" for x in found.width)
    return (
        f"{found.body:8} {found.way:8} {found.seed:3}  unseen {100 * (1 - found.seen):4.1f}  volume {off:6.2f} [{ends}]"
        f"  beyond {out}  width {wide}  {found.seconds:4.1f} s"
    )


def main() -> None:
    """Print every run, then how many held and the median width, way by way."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--runs", type=int, default=3)
    parser.add_argument("--first", type=int, default=0)
    parser.add_argument("--body", action="append")
    parser.add_argument("--way", action="append")
    options = parser.parse_args()
    print("beyond: truth outside by % of volume, and of size for x y z (* out); width likewise")
    done: list[Run] = []
    for name in options.body or BODIES:
        for way in options.way or WAYS:
            if way == "flat" and name not in FLAT:
                continue
            for seed in range(options.first, options.first + options.runs):
                found = run(name, way, seed)
                print(found if isinstance(found, str) else line(found), flush=True)
                if isinstance(found, Run):
                    done.append(found)
    for way in WAYS:
        of = [found for found in done if found.way == way]
        if of:
            held = np.sum([found.beyond <= 0 for found in of], axis=0)
            wide = np.median([found.width for found in of], axis=0).round(2)
            print(f"{way}: {len(of)} runs; held: volume {held[0]}, x y z {held[1:]}; median width {wide}")


if __name__ == "__main__":
    main()
