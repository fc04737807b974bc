"""One million points, start to finish with 2000 replicates, against the plain script, in one run.

python -m tests.benchmarks.whole_job             # about four minutes
python -m tests.benchmarks.whole_job --points 20000 --depth 6
"""

from __future__ import annotations

import argparse
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

from tests.benchmarks.kernels import lump

PIPELINE = """\
scan: {unit: mm, noise_std: 0.1 mm, noise_length: 5 mm}
inside: {body: {density: 7200 ± 50 kg/m3}}
"""


def write_scan(path: Path, points: int, seed: int = 0) -> None:
    """A noisy cloud of a 500 mm body as a binary PLY without normals, mm."""
    vertices, faces = lump(6)
    vertices = 200 * vertices
    rng = np.random.default_rng(seed)
    a, b, c = (vertices[faces[:, k]] for k in range(3))
    area = np.linalg.norm(np.cross(b - a, c - a), axis=1)
    which = rng.choice(len(faces), points, p=area / area.sum())
    u, v = rng.random((2, points, 1))
    u, v = np.where(u + v > 1, 1 - u, u), np.where(u + v > 1, 1 - v, v)
    cloud = a[which] + u * (b - a)[which] + v * (c - a)[which] + 0.1 * rng.normal(size=(points, 3))
    head = f"ply\nformat binary_little_endian 1.0\nelement vertex {points}\n"
    head += "property float x\nproperty float y\nproperty float z\nend_header\n"
    path.write_bytes(head.encode() + cloud.astype("<f4").tobytes())


def compare(points: int, depth: int) -> dict[str, float]:
    """Seconds and peak memory (GB) of both, each in a process of its own, imports included."""
    with tempfile.TemporaryDirectory() as folder:
        scan, pipeline = Path(folder, "scan.ply"), Path(folder, "job.yaml")
        write_scan(scan, points)
        pipeline.write_text(PIPELINE)
        ours = [sys.executable, "-m", "scanmass", "measure", str(scan), "--pipeline", str(pipeline), "--workers", "2"]
        weigh = f"from tests.benchmarks.plain_script import weigh; print(weigh({str(scan)!r}, {depth}))"
        theirs = [sys.executable, "-c", weigh]
        # Once before on the same file, so that compiled kernels are in the cache as they are for any second run.
        subprocess.run(ours, check=True, stdout=subprocess.DEVNULL)
        figures = {}
        for name, command in (("scanmass", ours), ("plain script", theirs)):
            start = time.perf_counter()
            subprocess.run([*command, *(["--out", folder + "/out"] if name == "scanmass" else [])], check=True)
            figures[name] = time.perf_counter() - start
            figures[name + " peak GB so far"] = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 2**20
        return figures


def main() -> None:
    """Print both times and their ratio."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--points", type=int, default=1_000_000)
    parser.add_argument("--depth", type=int, default=9)
    options = parser.parse_args()
    figures = compare(options.points, options.depth)
    for name, figure in figures.items():
        print(f"{name}: {figure:.2f}")
    print(f"ratio: {figures['plain script'] / figures['scanmass']:.1f}")


if __name__ == "__main__":
    main()
