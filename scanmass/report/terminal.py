"""Rows on a terminal: aligned, wrapped to its width, coloured only where a person is looking."""

from __future__ import annotations

from collections.abc import Iterable
from textwrap import wrap
from typing import TYPE_CHECKING, Any

from scanmass.report.rows import Kind, Row, Section

if TYPE_CHECKING:
    from rich.console import Console

TITLE_STYLES: dict[Kind, str] = {
    "lead": "bold red",
    "result": "bold",
    "measured": "bold green",
    "bracketed": "bold yellow",
    "declared": "bold cyan",
    "assumed": "bold yellow",
    "declined": "bold red",
    "warning": "bold red",
    "caution": "bold magenta",
}

WIDEST_LABEL = 34


def title(document: dict[str, Any]) -> str:
    """The heading of a summary: the object, and what made the figures."""
    name = document["object"]["name"] or document["scans"][0]["file"]
    identity = f" ({document['object']['id']})" if document["object"]["id"] else ""
    made = document["scanmass"]
    return f"{name}{identity}: scanmass {made['version']}, seed {made['seed']}"


def show(heading: str, sections: Iterable[Section], console: Console) -> None:
    """Print a heading and the sections on a rich console."""
    from rich.text import Text

    _indented(heading, 0, console, "bold")
    for section in sections:
        console.print()
        console.print(Text(section.title, style=TITLE_STYLES[section.kind]))
        if section.note:
            _indented(section.note, 2, console, "italic")
        _rows(section.rows, console)


def _rows(rows: tuple[Row, ...], console: Console) -> None:
    from rich.text import Text

    columns = [row for row in rows if row.value or row.bounds]
    label_width = min(WIDEST_LABEL, max((len(row.label) for row in columns), default=0))
    value_width = max((len(row.value) for row in columns), default=0)
    for row in rows:
        if row not in columns:
            # A code in brackets ends its sentence; any other remark stands below.
            code = row.remark if row.remark.startswith("[") else ""
            _indented(f"{row.label} {code}".rstrip(), 2, console, mark="- " if code or not row.remark else "")
            if code:
                continue
        else:
            line = f"  {row.label:<{label_width}}  {row.value:<{value_width}}  {row.bounds}".rstrip()
            if len(line) <= console.width:
                console.print(Text(line), soft_wrap=True)
            else:
                _indented(row.label, 2, console)
                _indented("  ".join(filter(None, (row.value, row.bounds))), 4, console)
        if row.remark:
            _indented(row.remark, 6, console, "dim")


def _indented(text: str, by: int, console: Console, style: str = "", mark: str = "") -> None:
    from rich.text import Text

    blank = " " * by
    further = blank + " " * len(mark)
    lines = wrap(
        text,
        max(console.width, by + 20),
        initial_indent=blank + mark,
        subsequent_indent=further,
        break_on_hyphens=False,
    )
    console.print(Text("\n".join(lines), style=style), soft_wrap=True)
