"""Results on stdout and nothing else there; progress on stderr, only where a person is looking."""

from __future__ import annotations

import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from typing import TYPE_CHECKING

from scanmass.progress import Progress, silent

if TYPE_CHECKING:
    from rich.console import Console

WIDEST = 100
STDOUT, STDERR = 1, 2


@contextmanager
def stdout_kept_clean() -> Iterator[None]:
    """Send whatever is printed meanwhile to stderr, by C++ libraries and child processes too."""
    sys.stdout.flush()
    try:
        kept = os.dup(STDOUT)
    except OSError:  # stdout is closed: there is nothing to keep clean
        yield
        return
    try:
        with suppress(OSError):  # stderr is closed
            os.dup2(STDERR, STDOUT)
        yield
    finally:
        sys.stdout.flush()
        os.dup2(kept, STDOUT)
        os.close(kept)


@contextmanager
def progress_bars() -> Iterator[Progress]:
    """A progress callable that draws bars on stderr if it is a terminal, else says nothing."""
    if not sys.stderr.isatty():
        yield silent
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, TextColumn, TimeElapsedColumn
    from rich.progress import Progress as Bars

    columns = (TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), TimeElapsedColumn())
    console = Console(stderr=True)
    with Bars(*columns, console=console, transient=True, redirect_stdout=False, redirect_stderr=False) as bars:
        known: dict[str, int] = {}

        def report(stage: str, done: int, total: int) -> None:
            if stage not in known:
                known[stage] = int(bars.add_task(stage, total=total))
            bars.update(bars.task_ids[known[stage]], completed=done, total=total)

        yield report


def result_console() -> Console:
    """A rich console on stdout, no wider than is good to read; plain when piped."""
    from rich.console import Console

    console = Console(highlight=False)
    return Console(highlight=False, width=min(console.width, WIDEST))
