"""How one value of a pipeline file becomes what the stages take: a reader on the field, and back to text.

Readers are also what ``scanmass check --keys`` prints from: each tells what it allows.
"""

from __future__ import annotations

import difflib
import unicodedata
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any, get_args, get_origin

from pydantic import GetCoreSchemaHandler
from pydantic.fields import FieldInfo
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

from scanmass import units
from scanmass.errors import Note, UserFault

_SWITCH = {"no": "none", "off": "none", "false": "none", "yes": "auto", "on": "auto", "true": "auto"}


def refusal(seen: str, allowed: str, key: str | None = None) -> PydanticCustomError:
    """The error of a validator: what was seen, what is allowed, and the key inside the block where it is one."""
    return PydanticCustomError("scanmass", "refused", {"seen": seen, "allowed": allowed, "key": key})


def shown(value: Any) -> str:
    """A value as a fault shows it: quoted and short."""
    if isinstance(value, dict):
        return "a block of keys"
    if isinstance(value, list):
        return "a list"
    if value is None:
        return "null"
    text = " ".join(str(value).split())
    return "nothing" if not text else f"'{text if len(text) <= 60 else text[:57] + '...'}'"


def meant(word: str, allowed: Iterable[str], cutoff: float = 0.6) -> str:
    """``" (did you mean 'NAME'?)"`` where one of the allowed words is close, else nothing."""
    names = {name.lower(): name for name in allowed}
    folded = word.strip().lower().replace("-", "_")
    close = difflib.get_close_matches(folded, names, n=1, cutoff=cutoff)
    return f" (did you mean '{names[close[0]]}'?)" if close else ""


@dataclass(frozen=True)
class Reader:
    """Reads one text; ``info.context`` is a list that takes the notes, or None."""

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        """The schema pydantic validates the field with."""
        return core_schema.with_info_plain_validator_function(self._validate)

    def _validate(self, value: Any, info: core_schema.ValidationInfo) -> Any:
        if not isinstance(value, str) or not value.strip():
            raise refusal(shown(value), self.rule)
        notes: list[Note] = []
        try:
            result = self.read(value.strip(), notes)
        except UserFault as fault:
            raise refusal(fault.seen, fault.allowed or self.rule) from None
        if isinstance(info.context, list):
            info.context.extend(notes)
        return result

    @property
    def allowed(self) -> str:
        """What the value can be, in words."""
        raise NotImplementedError

    @property
    def rule(self) -> str:
        """The end of a fault."""
        return f"allowed: {self.allowed}"

    def read(self, text: str, notes: list[Note]) -> Any:
        """The value of a text that is not empty."""
        raise NotImplementedError

    def write(self, value: Any) -> str:
        """The text that reads back to exactly this value."""
        return str(value)


@dataclass(frozen=True)
class Words(Reader):
    """A free text of one line."""

    @property
    def allowed(self) -> str:
        return "a text on one line, 200 letters at most"

    def read(self, text: str, notes: list[Note]) -> str:
        if any(unicodedata.category(letter) in ("Cc", "Cs", "Zl", "Zp") for letter in text) or len(text) > 200:
            raise refusal(shown(text), self.rule)
        return text


@dataclass(frozen=True)
class OneOf(Reader):
    """One of a few words; ``later`` are words of the contract that this version cannot do yet."""

    words: tuple[str, ...]
    later: tuple[str, ...] = ()

    @classmethod
    def of(cls, literal: Any, later: tuple[str, ...] = ()) -> OneOf:
        """The words of a Literal type."""
        return cls(get_args(literal), later)

    @property
    def allowed(self) -> str:
        return " | ".join(word for word in self.words if word not in self.later)

    def read(self, text: str, notes: list[Note]) -> str:
        if text in self.later:
            raise refusal(f"'{text}' is not available in this version", self.rule)
        if text not in self.words:
            switch = _SWITCH.get(text.lower(), text)
            raise refusal(shown(text) + meant(switch, self.words), self.rule)
        return text


@dataclass(frozen=True)
class Whole(Reader):
    """A whole number from ``least`` to ``most``."""

    least: int
    most: int

    @property
    def allowed(self) -> str:
        return f"a whole number from {self.least} to {self.most}"

    def read(self, text: str, notes: list[Note]) -> int:
        if not (text.isascii() and text.isdigit()) or not self.least <= int(text[:12]) <= self.most:
            raise refusal(shown(text), self.rule)
        return int(text)


@dataclass(frozen=True)
class UnitName(Reader):
    """The name of a length unit."""

    @property
    def allowed(self) -> str:
        return "the length unit of the scan's coordinates, such as mm, cm, m or inch"

    def read(self, text: str, notes: list[Note]) -> str:
        units.metres_per(text)
        return text


def reader_of(field: FieldInfo) -> Any:
    """The reader of a field, whether or not the field may be left out; None for a block or a mapping."""
    if get_origin(field.annotation) is dict:
        return None
    found = [mark for mark in field.metadata if hasattr(mark, "allowed")]
    for option in get_args(field.annotation):
        found += [mark for mark in getattr(option, "__metadata__", ()) if hasattr(mark, "allowed")]
    return found[0] if found else None


def member_reader(field: FieldInfo) -> Any:
    """The reader of the values of a mapping from names."""
    return get_args(field.annotation)[1].__metadata__[0]
