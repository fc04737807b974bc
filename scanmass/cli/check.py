"""``scanmass check``: all the faults of a pipeline file at once, or every key it may hold."""

from __future__ import annotations

import json
import sys
from dataclasses import asdict
from pathlib import Path
from typing import Annotated

import typer

from scanmass.cli.options import JsonOption
from scanmass.errors import UserFault


def check(
    pipeline: Annotated[
        Path | None, typer.Argument(metavar="PIPELINE", help="Pipeline file to check.", show_default=False)
    ] = None,
    keys: Annotated[
        bool, typer.Option("--keys", help="Print every key a pipeline file may hold: meaning, unit, default, example.")
    ] = False,
    as_json: JsonOption = False,
) -> int:
    """Check a pipeline file, all faults at once.

    Nothing is measured. Faults come a line each: FILE:LINE: key: what was seen; what is allowed.
    A file without faults is printed as it was understood.

    \b
    Examples:
      scanmass check heron.yaml
      scanmass check --keys
    """
    if (pipeline is not None) == keys:
        raise UserFault("give a pipeline file or --keys, one of the two", allowed="for example: scanmass check --keys")
    return _keys(as_json) if pipeline is None else _file(pipeline, as_json)


def _keys(as_json: bool) -> int:
    from scanmass.pipeline.keys import keys, keys_text

    if as_json:
        print(json.dumps([asdict(row) for row in keys()], indent=1, ensure_ascii=False))
    else:
        sys.stdout.write(keys_text())
    return 0


def _file(path: Path, as_json: bool) -> int:
    from scanmass.pipeline.file import effective_text, load, quantities, sha256

    settings = load(path)
    notes = settings.assumptions
    if as_json:
        found = {
            "file": path.name,
            "faults": [],
            "sha256": sha256(settings),
            "quantities": [asdict(row) for row in quantities(settings)],
            "assumptions": [asdict(note) for note in notes],
        }
        print(json.dumps(found, indent=1, ensure_ascii=False))
        return 0
    print(f"{path.name}: no faults. Understood, with every default:\n\n{effective_text(settings)}", end="")
    for note in notes:
        print(f"\nassumed: {note.text} [{note.code}]")
    return 0
