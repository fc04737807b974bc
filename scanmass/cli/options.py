"""Options that several commands share."""

from __future__ import annotations

from enum import StrEnum
from typing import Annotated

import typer


class Units(StrEnum):
    """Units of a printed summary. Files and ``--json`` are always SI."""

    metric = "metric"
    us = "us"


JsonOption = Annotated[
    bool, typer.Option("--json", help="Print the result as JSON (SI units) on stdout, and nothing else there.")
]
UnitsOption = Annotated[
    Units, typer.Option("--units", help="Units of the printed text: metric (kg, mm) or us (lb, in).")
]
