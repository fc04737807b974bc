"""The command ``scanmass``: one table of commands, one way out."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable
from typing import Annotated

import typer

from scanmass.cli.check import check
from scanmass.cli.exits import guarded
from scanmass.cli.materials import materials
from scanmass.cli.measure import measure
from scanmass.cli.rehearse import rehearse
from scanmass.cli.samples import samples

COMMANDS: tuple[Callable[..., int], ...] = (measure, check, materials, samples, rehearse)

app = typer.Typer(
    name="scanmass",
    add_completion=False,
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    context_settings={"help_option_names": ["-h", "--help"]},
)
for command in COMMANDS:
    app.command(command.__name__)(guarded(command))


def _version(asked: bool) -> None:
    if asked:
        from importlib.metadata import version

        print(f"scanmass {version('scanmass')}")
        raise typer.Exit


@app.callback()
def scanmass(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version and leave.")
    ] = False,
) -> None:
    """Mass, centre of mass, inertia and principal axes of scanned objects, with bounds.

    \b
    Example:
      scanmass measure heron.ply --pipeline heron.yaml --unit mm --out heron-result

    \b
    Exit codes: 0 done; 2 the input cannot be used, or a figure is declined for cause;
    3 a fault of scanmass itself; 130 interrupted.
    Results go to stdout, everything else to stderr.
    """


def main() -> None:
    """Run the command line."""
    # A closed stream is None in Python, and would turn every print into a fault.
    sys.stdout = sys.stdout or open(os.devnull, "w", encoding="utf-8")  # noqa: SIM115
    sys.stderr = sys.stderr or open(os.devnull, "w", encoding="utf-8")  # noqa: SIM115
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace", **({} if stream.isatty() else {"encoding": "utf-8"}))
    app(prog_name="scanmass")
