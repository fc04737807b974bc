"""How often the stated bounds hold the truth: the coverage study.

python -m tests.benchmarks.coverage --out coverage.jsonl --scans 200 --workers 2     # hours; go on where it stopped
python -m tests.benchmarks.coverage --out coverage.jsonl --scans 40 --cells first    # cells, groups or noise models
python -m tests.benchmarks.coverage --out coverage.jsonl --scans 0                   # only the tables

The ledger holds one line a scan; a scan already in it is not run again. Results do not depend on the workers.
"""

from __future__ import annotations

import argparse
import json
import multiprocessing
import os
import sys
import time
from collections.abc import Iterable, Sequence
from concurrent.futures import Future, ProcessPoolExecutor, as_completed
from pathlib import Path

from tests.benchmarks.coverage_cells import CELLS, Cell, named
from tests.benchmarks.coverage_scan import Line, run
from tests.benchmarks.coverage_tables import tables

_THREADS = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "NUMBA_NUM_THREADS")


def ledger(path: Path) -> list[Line]:
    """Lines of the ledger, in the order of cells and scans; a last line that was cut off is left out."""
    if not path.exists():
        return []
    lines = []
    for text in path.read_text().splitlines():
        try:
            lines.append(json.loads(text))
        except json.JSONDecodeError:
            continue
    order = {cell.name: k for k, cell in enumerate(CELLS)}
    return sorted(lines, key=lambda line: (order.get(line["cell"], len(order)), line["scan"]))


def missing(lines: Iterable[Line], cells: Sequence[Cell], scans: int) -> list[tuple[Cell, int]]:
    """Scans not in the ledger, one of each cell in turn; cells that were found unavailable are left out."""
    done = {(line["cell"], line["scan"]) for line in lines if "unavailable" not in line}
    return [(cell, k) for k in range(scans) for cell in cells if (cell.name, k) not in done]


def fill(path: Path, work: Sequence[tuple[Cell, int]], workers: int, points: int | None = None) -> dict[str, str]:
    """Run scans and add their lines to the ledger as they come; gives the cells that are not available, and why."""
    started, refused, done = time.perf_counter(), dict[str, str](), 0
    if path.exists() and not path.read_bytes().endswith(b"\n"):
        path.write_bytes(path.read_bytes() + b"\n")
    for name in _THREADS:
        # Read by the workers as they start: each has one core.
        os.environ[name] = "1"
    context = multiprocessing.get_context("spawn")
    with path.open("a") as out, ProcessPoolExecutor(workers, context) as pool:
        # A cell is handed out one scan ahead at most until its first answer: it may be unavailable.
        ahead, at = 3 * workers, 0
        running: dict[Future[Line], str] = {}
        while at < len(work) or running:
            while at < len(work) and len(running) < ahead:
                cell, number = work[at]
                at += 1
                if cell.name not in refused:
                    running[pool.submit(run, cell, number, points)] = cell.name
            if not running:
                continue
            ready = next(as_completed(running))
            name, line = running.pop(ready), ready.result()
            done += 1
            if "unavailable" in line:
                refused[name] = line["unavailable"]
                continue
            out.write(json.dumps(line) + "\n")
            out.flush()
            print(f"\r{done}/{len(work)} {time.perf_counter() - started:.0f} s", end="", file=sys.stderr, flush=True)
    print(file=sys.stderr)
    return refused


def main(arguments: Sequence[str] | None = None) -> None:
    """Run what is missing and print every table."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--out", type=Path, required=True, help="the ledger: JSON lines, added to")
    parser.add_argument("--scans", type=int, default=200, help="scans of each cell")
    parser.add_argument("--cells", help="names of cells, groups or noise models, comma-separated; all without it")
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--points", type=int, help="points a view, instead of each cell's own")
    asked = parser.parse_args(arguments)
    cells = named(asked.cells)
    work = missing(ledger(asked.out), cells, asked.scans)
    refused = fill(asked.out, work, asked.workers, asked.points) if work else {}
    names = {cell.name for cell in cells}
    lines = [line for line in ledger(asked.out) if line["cell"] in names]
    print(tables(lines))
    for name, why in refused.items():
        print(f"{name}: skipped, not available: {why}")
    for name in sorted(names - {line["cell"] for line in lines} - set(refused)):
        print(f"{name}: no scan in the ledger")


if __name__ == "__main__":
    main()
