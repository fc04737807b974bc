"""The settings as they were understood: the effective file, its fingerprint, and every quantity one by one."""

from __future__ import annotations

import hashlib
import json
import re
from collections.abc import Iterator
from dataclasses import dataclass

from scanmass.doubt import Figure, Spread
from scanmass.materials import table
from scanmass.pipeline.models import Body, Hollow, Pipeline
from scanmass.pipeline.models_block import Block
from scanmass.pipeline.models_certificate import GrowingLimit
from scanmass.pipeline.models_quantities import Direction, Length, Level, MaterialName, Place, Quantity
from scanmass.pipeline.models_read import member_reader, reader_of

_PLAIN = re.compile(r"[A-Za-z0-9](?:[A-Za-z0-9 ._/±+%-]*[A-Za-z0-9._/%])?", re.ASCII)
_SPECIAL = ("null", "true", "false", "yes", "no", "on", "off")


@dataclass(frozen=True)
class QuantityRow:
    """One quantity as understood: its key, its text, and value, std and ends in SI (None for a place or direction)."""

    key: str
    text: str
    value: float | tuple[float, float, float]
    std: float | None
    low: float | None
    high: float | None
    spread: Spread


def effective_text(pipeline: Pipeline) -> str:
    """The pipeline as a YAML file with every default written out; it loads back to an equal pipeline."""
    return "# Effective settings of a measurement\n" + "".join(f"{line}\n" for line in _lines(pipeline, ""))


def sha256(pipeline: Pipeline) -> str:
    """Hexadecimal SHA-256 of the effective text: the same for the same settings, however they were written."""
    return hashlib.sha256(effective_text(pipeline).encode()).hexdigest()


def quantities(pipeline: Pipeline) -> tuple[QuantityRow, ...]:
    """Every quantity that is declared or taken by default, as it was understood, in the order of the file."""
    return tuple(_rows(pipeline, ""))


def _rows(block: Block, prefix: str) -> Iterator[QuantityRow]:
    for name, field in type(block).model_fields.items():
        key, value, reader = f"{prefix}{name}", getattr(block, name), reader_of(field)
        if isinstance(value, Block):
            yield from _rows(value, f"{key}.")
        elif isinstance(value, dict):
            for place, at in value.items():
                if isinstance(member_reader(field), Place):
                    yield QuantityRow(f"{key}.{place}", Place().write(at), at, None, None, None, "exact")
        elif value is None or (isinstance(value, str) and not isinstance(reader, MaterialName)):
            continue
        elif isinstance(reader, MaterialName):
            figure = table.find(value).density()
            yield _row(key, f"{value}: {Quantity('density').write(figure)}", figure)
        elif isinstance(reader, Direction):
            yield QuantityRow(key, reader.write(value), value, None, None, None, "exact")
        elif isinstance(reader, GrowingLimit):
            yield _row(key, reader.write(value), Figure.exact(value.constant))
        elif isinstance(reader, Quantity | Length | Level):
            figure = value if isinstance(value, Figure) else Figure.exact(value)
            yield _row(key, reader.write(value), figure)


def _row(key: str, text: str, figure: Figure) -> QuantityRow:
    value, std, low, high = (
        None if number is None else float(number) for number in (figure.value, figure.std, figure.low, figure.high)
    )
    return QuantityRow(key, text, value or 0.0, std, low, high, figure.spread)


def _lines(block: Block, indent: str) -> Iterator[str]:
    for name, field in type(block).model_fields.items():
        value = getattr(block, name)
        reader = reader_of(field)
        if isinstance(value, Block) and not isinstance(value, Hollow):
            yield f"{indent}{name}:"
            yield from _lines(value, indent + "  ")
        elif isinstance(value, dict):
            yield f"{indent}{name}:" + ("" if value else " {}")
            write = member_reader(field).write
            yield from (f"{indent}  {_scalar(key)}: {write(place)}" for key, place in value.items())
        elif value is None:
            if not isinstance(block, Body):
                yield f"{indent}{name}: null"
        elif isinstance(value, Hollow):
            yield f"{indent}{name}: {reader.write(value)}"
        else:
            yield f"{indent}{name}: {_scalar(reader.write(value))}"


def _scalar(text: str) -> str:
    """The text as YAML, in quotes where it could be read as something else."""
    if _PLAIN.fullmatch(text) and text.lower() not in _SPECIAL:
        return text
    quoted = json.dumps(text, ensure_ascii=False)
    return "".join(letter if letter.isprintable() else f"\\U{ord(letter):08X}" for letter in quoted)
