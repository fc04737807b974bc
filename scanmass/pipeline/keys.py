"""Every key of the pipeline file, told from the models themselves."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from typing import get_args

from pydantic.fields import FieldInfo

from scanmass.pipeline.models import Body, Hollow, Pipeline
from scanmass.pipeline.models_block import Block
from scanmass.pipeline.models_read import member_reader, reader_of

NOT_GIVEN = "not given"


@dataclass(frozen=True)
class KeyRow:
    """One key: its dotted name, what it means, what is allowed, its default and an example as it is written."""

    key: str
    meaning: str
    allowed: str
    default: str
    example: str


@cache
def keys() -> tuple[KeyRow, ...]:
    """Every key that takes a value, in the order of the file."""
    return tuple(_rows(Pipeline, ""))


@cache
def children(path: tuple[str | int, ...]) -> tuple[str, ...]:
    """The keys of the block at ``path``; none where it is no block.

    >>> children(("bounds",))
    ('level', 'replicates')
    """
    block: type[Block] | None = Pipeline
    for part in path:
        field = block.model_fields.get(str(part)) if block is not None else None
        block = _block(field) if field is not None else None
    return tuple(block.model_fields) if block is not None else ()


def keys_text() -> str:
    """The keys for a terminal: a paragraph each."""
    parts = []
    for row in keys():
        parts.append(
            f"{row.key}\n    {row.meaning}\n    allowed: {row.allowed}\n"
            f"    default: {row.default}    example: {row.example}\n"
        )
    return "\n".join(parts)


def keys_markdown() -> str:
    """The keys as a Markdown table."""
    lines = ["| key | meaning | allowed | default | example |", "|---|---|---|---|---|"]
    for row in keys():
        cells = (f"`{row.key}`", row.meaning, row.allowed, row.default, f"`{row.example}`")
        lines.append("| " + " | ".join(cell.replace("|", "\\|") for cell in cells) + " |")
    return "\n".join(lines) + "\n"


def _rows(block: type[Block], prefix: str) -> Iterator[KeyRow]:
    for name, field in block.model_fields.items():
        key = f"{prefix}{name}"
        nested = _block(field)
        reader = reader_of(field)
        meaning = field.description or ""
        example = str((field.examples or [""])[0])
        if reader is not None:
            yield KeyRow(key, meaning, reader.allowed, _default(block, field), example)
        elif nested is None:
            yield KeyRow(f"{key}.NAME", meaning, member_reader(field).allowed, "none", example)
        if nested is not None:
            yield from _rows(nested, f"{key}.")


def _block(field: FieldInfo) -> type[Block] | None:
    """The block a field holds, or can hold."""
    for option in (field.annotation, *get_args(field.annotation)):
        if isinstance(option, type) and issubclass(option, Block):
            return option
    return None


def _default(block: type[Block], field: FieldInfo) -> str:
    if block is Body:
        return f"none: {' or '.join(Body.model_fields)} is required"
    if block is Hollow or field.default is None:
        return NOT_GIVEN
    return str(reader_of(field).write(field.default))
