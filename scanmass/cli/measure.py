"""``scanmass measure``: from a scan to mass, centre of mass and principal axes, with bounds."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from scanmass.cli.options import JsonOption, Units, UnitsOption

if TYPE_CHECKING:
    from scanmass.pipeline.models import Pipeline
    from scanmass.pipeline.record import MassResult


def measure(
    scans: Annotated[list[Path], typer.Argument(metavar="SCAN", help="Scan file; several are views of one object.")],
    pipeline: Annotated[
        Path, typer.Option("--pipeline", metavar="FILE", help="What the object is made of, and how to treat the scan.")
    ],
    unit: Annotated[
        str | None, typer.Option("--unit", metavar="UNIT", help="Length unit of the scan: mm, cm, m, in, ft ...")
    ] = None,
    out: Annotated[
        Path | None,
        typer.Option("--out", metavar="DIR", help="Folder to write the results to; without it nothing is written."),
    ] = None,
    seed: Annotated[int, typer.Option("--seed", metavar="N", min=0, help="Seed of every random draw.")] = 0,
    replicates: Annotated[
        int | None,
        typer.Option(
            "--replicates", metavar="N", min=1, help="Draws behind the bounds; else as the pipeline file says."
        ),
    ] = None,
    workers: Annotated[
        int,
        typer.Option(
            "--workers", metavar="N", min=1, help="Threads to share the work; the result does not depend on it."
        ),
    ] = 1,
    units: UnitsOption = Units.metric,
    as_json: JsonOption = False,
) -> int:
    """Weigh a scan, with bounds.

    Mass, volume, centre of mass, inertia and principal axes, each with bounds and what dominates them.
    The unit of the scan is never guessed: give it here or in the pipeline file.

    \b
    Example:
      scanmass measure heron.ply --pipeline heron.yaml --unit mm --out heron-result
    """
    from scanmass.cli.streams import progress_bars, stdout_kept_clean
    from scanmass.pipeline.file import load, with_options

    with stdout_kept_clean():
        settings = with_options(load(pipeline), unit=unit, replicates=replicates)
        if out is not None:
            from scanmass.report.directory import refuse_foreign

            refuse_foreign(out)
        from scanmass.pipeline.run import measure as measured

        with progress_bars() as progress:
            result = measured(
                scans, settings, unit=unit, seed=seed, replicates=replicates, workers=workers, progress=progress
            )
        _keep(result, out)
    if as_json:
        sys.stdout.write(result.to_json())
    else:
        _summary(result, settings, units)
    return 0


def _keep(result: MassResult, out: Path | None) -> None:
    from scanmass.report.directory import write
    from scanmass.report.schema import validate

    if out is None:
        validate(result.document)
        return
    write(result, out)
    print(f"results written to {out}", file=sys.stderr)


def _summary(result: MassResult, settings: Pipeline, units: Units) -> None:
    from scanmass.cli.streams import result_console
    from scanmass.pipeline.file import quantities
    from scanmass.report.rows import rows
    from scanmass.report.terminal import show, title

    document = dict(result.document)
    show(title(document), rows(document, units.value, quantities(settings)), result_console())
