"""``scanmass rehearse``: do the stated bounds of a result hold, on its own surface?"""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import Annotated

import typer

from scanmass.cli.options import JsonOption


def rehearse(
    result: Annotated[Path, typer.Argument(metavar="RESULT_DIR", help="Folder that 'measure' wrote with --out.")],
    scans: Annotated[int, typer.Option("--scans", metavar="N", min=1, help="Simulated scans in all.")] = 40,
    seed: Annotated[int, typer.Option("--seed", metavar="N", min=0, help="Seed of every random draw.")] = 0,
    workers: Annotated[
        int,
        typer.Option("--workers", metavar="N", min=1, help="Processes to share the work; the outcome is the same."),
    ] = 1,
    again: Annotated[
        bool, typer.Option("--again", help="Start anew where the folder holds a rehearsal of another result or seed.")
    ] = False,
    as_json: JsonOption = False,
) -> int:
    """Rehearse a result: do its bounds hold?

    The finished surface is scanned in simulation, with the noise, views, outliers and unseen parts of the real
    scan, and each simulated scan is measured as yours was. How often did the stated bounds hold the truth?
    A simulated scan takes about as long as the measurement did. Interrupted, it goes on where it was.
    Everything is kept in RESULT_DIR: rehearsal.jsonl, and the outcome in rehearsal.json.

    \b
    Example:
      scanmass rehearse heron-result --scans 40 --workers 2
    """
    from scanmass.cli.streams import progress_bars, result_console, stdout_kept_clean

    with stdout_kept_clean():
        from scanmass.studies import rehearse as study

        with progress_bars() as progress:
            outcome = study.rehearse(result, scans=scans, seed=seed, workers=workers, again=again, progress=progress)
    if as_json:
        sys.stdout.write(json.dumps(outcome, indent=1, allow_nan=False, ensure_ascii=False) + "\n")
        return 0
    from scanmass.report.terminal import show
    from scanmass.studies.rehearse_words import sections

    heading = f"{result.resolve().name}: rehearsed by {outcome['scans']} simulated scans, seed {seed}"
    show(heading, sections(outcome), result_console())
    return 0
