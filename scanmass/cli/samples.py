"""``scanmass samples``: sample scans to try things on, each with its truth."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Annotated

import typer

from scanmass.cli.options import JsonOption


def samples(
    directory: Annotated[Path, typer.Argument(metavar="DIR", help="Folder to write the sample scans to.")],
    as_json: JsonOption = False,
) -> int:
    """Write sample scans with their truth.

    Scans of invented objects, the true figures of each in NAME.truth.json. They are
    made by ray casting from scanner positions, with what real scans have: parts hidden from view, noise,
    outliers, a support. The same files come out every time.

    \b
    Example:
      scanmass samples my-samples
    """
    from scanmass.cli.streams import progress_bars, stdout_kept_clean

    with stdout_kept_clean():
        from scanmass.studies.samples import write_samples

        with progress_bars() as progress:
            written = write_samples(directory, progress=progress)
    if as_json:
        print(json.dumps({"directory": directory.name, "files": [path.name for path in written]}, indent=1))
    else:
        for path in written:
            print(path)
    return 0
