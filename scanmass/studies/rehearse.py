"""Rehearse a result: scan its own surface in simulation, measure each scan, count how often the bounds held."""

from __future__ import annotations

import json
import multiprocessing
import signal
import tempfile
from collections.abc import Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor, as_completed
from dataclasses import asdict
from importlib.metadata import version
from pathlib import Path
from typing import Any

from scanmass.errors import Declined, PipelineFault, UserFault
from scanmass.pipeline import run
from scanmass.progress import Progress, silent
from scanmass.studies.rehearse_ledger import Ledger
from scanmass.studies.rehearse_plan import Plan, read_plan
from scanmass.studies.rehearse_scan import simulate
from scanmass.studies.rehearse_score import score, summarise, verdict
from scanmass.studies.rehearse_words import assumptions

Plain = dict[str, Any]
SCHEMA = "scanmass/rehearsal/1"
LEDGER, OUTCOME = "rehearsal.jsonl", "rehearsal.json"
SCANS = 40


def rehearse(
    result_dir: str | Path,
    *,
    scans: int = SCANS,
    seed: int = 0,
    workers: int = 1,
    again: bool = False,
    progress: Progress = silent,
) -> Plain:
    """Simulate scans of a result's surface, measure each by ``scanmass.measure``, and say how its bounds fared.

    Every scan is put down in ``rehearsal.jsonl`` of the folder when it is done; called again, those are not done
    again, and more can be asked for. The outcome goes to ``rehearsal.json``.

    Parameters
    ----------
    result_dir : folder that ``measure`` wrote
    scans : how many in all
    workers : processes; the outcome does not depend on their number. With more than one, call it from a main guard
    again : start anew where the folder holds a rehearsal of another result, seed or version

    Raises
    ------
    UserFault
        If the folder is no whole result, or holds another rehearsal.
    Declined
        If the result states no bounds, or no simulated scan could be measured.
    """
    if scans < 1:
        raise UserFault(f"{scans} simulated scans", allowed="at least 1; some 40 say something")
    directory = Path(result_dir)
    plan = read_plan(directory)
    ledger = Ledger(directory / LEDGER, plan.key, seed, again=again)
    missing = [k for k in range(scans) if k not in ledger.entries]
    progress("rehearse", scans - len(missing), scans)
    for done, entry in enumerate(_entries(plan, seed, missing, workers), start=scans - len(missing) + 1):
        ledger.add(entry)
        progress("rehearse", done, scans)
    outcome = _outcome(plan, seed, [ledger.entries[k] for k in range(scans)])
    text = json.dumps(outcome, indent=1, allow_nan=False, ensure_ascii=False) + "\n"
    (directory / OUTCOME).write_text(text, encoding="utf-8", newline="\n")
    return outcome


def rehearse_one(plan: Plan, seed: int, index: int) -> Plain:
    """The ledger's entry of one simulated scan: its figures, or why it could not be measured."""
    with tempfile.TemporaryDirectory(prefix="scanmass-rehearsal-") as folder:
        here = Path(folder)
        settings = here / "pipeline.yaml"
        settings.write_text(plan.pipeline, encoding="utf-8")
        paths = simulate(plan, seed, index, here)
        try:
            result = run.measure(paths, settings, seed=index)
        except PipelineFault:
            raise  # of every scan alike: no outcome of this one
        except UserFault as fault:
            return {"scan": index, "failed": str(fault)}
        return {"scan": index, **score(result.document, plan.truth)}


def _entries(plan: Plan, seed: int, missing: Sequence[int], workers: int) -> Iterator[Plain]:
    """The entries of the missing scans as they are done: here, or in processes of their own."""
    workers = min(workers, len(missing))
    if workers <= 1:
        for index in missing:
            yield rehearse_one(plan, seed, index)
        return
    others = multiprocessing.active_children()
    # Fresh processes: threads of kernels and of open3d do not survive a fork. An interruption is for this one alone.
    fresh = multiprocessing.get_context("spawn")
    pool = ProcessPoolExecutor(
        workers, mp_context=fresh, initializer=signal.signal, initargs=(signal.SIGINT, signal.SIG_IGN)
    )
    try:
        for future in as_completed([pool.submit(rehearse_one, plan, seed, index) for index in missing]):
            yield future.result()
    except BaseException:
        for child in multiprocessing.active_children():
            if child not in others:
                child.terminate()
        raise
    finally:
        pool.shutdown(cancel_futures=True)


def _outcome(plan: Plan, seed: int, entries: Sequence[Plain]) -> Plain:
    scores = [entry for entry in entries if "failed" not in entry]
    failures = [{"scan": entry["scan"], "reason": entry["failed"]} for entry in entries if "failed" in entry]
    if not scores:
        raise Declined(
            f"none of {len(entries)} simulated scans could be measured; the first: {failures[0]['reason']}",
            allowed="nothing can be said of the bounds",
        )
    figures = summarise(scores, plan.level)
    factors = [row["widen_by"] for row in figures if row["widen_by"] is not None]
    return {
        "schema": SCHEMA,
        "scanmass": {"version": version("scanmass"), "seed": seed},
        "result_key": plan.key,
        "level": plan.level,
        "scans": len(entries),
        "measured": len(scores),
        "failed": failures,
        "noise": asdict(plan.noise),
        "figures": figures,
        "widen_by": max(factors) if factors else None,
        "verdict": verdict(figures, plan.level, len(failures), len(entries)),
        "assumptions": [asdict(note) for note in assumptions(plan)],
    }
