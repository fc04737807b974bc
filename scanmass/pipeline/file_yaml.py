"""The text of a pipeline file as plain blocks, lists and texts, with the line of each and all that is wrong with it.

Only the events of the YAML parser are used: nothing is constructed, so no tag can do anything and a value stays the
text that was written (``id: 1987-14`` is no date, ``unit: m`` no guess).
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any

DEEPEST = 8
LONGEST = 100_000
"""Bytes of the longest file that is read: a page of settings has about a thousand."""
_BRACKETS = 40
"""More open brackets than this are never a pipeline, and the parser's time grows with their square."""

Path = tuple[str | int, ...]
Tree = dict[str, Any] | list[Any] | str | None
_NULLS = ("null", "Null", "NULL", "~")


@dataclass(frozen=True)
class Fault:
    """One thing that is wrong: ``path`` of the key, what was seen, what is allowed, and the line where known."""

    path: Path
    seen: str
    allowed: str
    line: int | None = None

    def text(self, file: str) -> str:
        """The fault on one line, ``FILE:LINE: key: what was seen; what is allowed``."""
        where = file if self.line is None else f"{file}:{self.line}"
        key = ".".join(str(part) for part in self.path) or "file"
        return " ".join(f"{where}: {key}: {self.seen}; {self.allowed}".split())


@dataclass
class Draft:
    """What was read: ``tree``, the lines of keys and values by path, and the faults found on the way.

    Values that could not be kept are in ``spoiled``, so that nothing more is said about them.
    """

    tree: Tree = None
    key_lines: dict[Path, int] = field(default_factory=dict)
    value_lines: dict[Path, int] = field(default_factory=dict)
    faults: list[Fault] = field(default_factory=list)
    spoiled: set[Path] = field(default_factory=set)

    def fault(self, path: Path, seen: str, allowed: str, line: int | None) -> None:
        """Note a fault."""
        self.faults.append(Fault(path, seen, allowed, line))


def read_yaml(text: str) -> Draft:
    """The draft of a YAML text. Never raises for what the text holds."""
    from ruamel.yaml import YAML
    from ruamel.yaml.error import YAMLError

    draft = Draft()
    if (line := _line_of_deep_brackets(text)) is not None:
        draft.fault((), "brackets inside brackets without end", "close each '{' and '['", line)
        return draft
    events = _Events(YAML(typ="rt", pure=True).parse(text), draft)
    try:
        events.document()
    except YAMLError as error:
        _syntax_fault(draft, text, error)
    except (ValueError, OverflowError, LookupError, AttributeError, TypeError, AssertionError):
        # The parser trips over some malformed escapes and directives without an error of its own.
        draft.tree = None
        draft.fault((), "this is not YAML", "write 'key: value' lines, indented with spaces", 1 + events.line)
    return draft


def _line_of_deep_brackets(text: str) -> int | None:
    depth = 0
    for bracket in re.finditer(r"[\[\]{}]", text):
        depth = max(0, depth + (1 if bracket.group() in "[{" else -1))
        if depth > _BRACKETS:
            return text.count("\n", 0, bracket.start()) + 1
    return None


def _syntax_fault(draft: Draft, text: str, error: Exception) -> None:
    mark = getattr(error, "problem_mark", None) or getattr(error, "context_mark", None)
    problem = getattr(error, "problem", None) or getattr(error, "reason", None) or "unreadable"
    position = getattr(error, "position", None)
    line = mark.line + 1 if mark else text.count("\n", 0, position or 0) + 1
    row = text.split("\n")[line - 1] if line <= text.count("\n") + 1 else ""
    draft.tree = None
    if "'\\t'" in problem or row[: len(row) - len(row.lstrip())].count("\t"):
        draft.fault((), "a tab before the text", "indent with spaces", line)
    elif problem.startswith("mapping values"):
        draft.fault((), "a second ': ' on the line, or a wrong indent", "quote texts that hold ': '", line)
    else:
        draft.fault((), f"this is not YAML ({problem})", "write 'key: value' lines, indented with spaces", line)


class _Events:
    """Builds a draft from parser events."""

    def __init__(self, events: Iterator[Any], draft: Draft) -> None:
        self._events = events
        self._draft = draft
        self.line = 0

    def _next(self) -> tuple[str, Any]:
        event = next(self._events)
        if event.start_mark is not None:
            self.line = event.start_mark.line
        return type(event).__name__.removesuffix("Event"), event

    def document(self) -> None:
        kind, _ = self._next()
        kind, event = self._next()
        if kind != "DocumentStart":
            self._draft.fault((), "nothing is in the file", "at least scan.unit and inside.body are needed", 1)
            return
        kind, event = self._next()
        tree = self._value((), kind, event)
        self._next()
        kind, event = self._next()
        if kind == "DocumentStart":
            self._draft.fault((), "a second document after '---'", "one pipeline a file", self.line + 1)
        self._draft.tree = tree

    def _value(self, path: Path, kind: str, event: Any) -> Tree:
        draft, line = self._draft, self.line + 1
        draft.value_lines[path] = line
        if kind == "Alias":
            draft.fault(path, f"a reference '*{event.anchor}'", "write the value out", line)
            draft.spoiled.add(path)
            return None
        self._refuse_extras(path, event, line)
        if kind == "Scalar":
            plain_null = event.style is None and event.value in _NULLS
            return None if plain_null else str(event.value)
        if len(path) >= DEEPEST:
            self._skip()
            draft.fault(path, f"more than {DEEPEST} blocks inside each other", "see 'scanmass check --keys'", line)
            draft.spoiled.add(path)
            return None
        return self._mapping(path) if kind == "MappingStart" else self._sequence(path)

    def _refuse_extras(self, path: Path, event: Any, line: int) -> None:
        if event.anchor is not None:
            self._draft.fault(path, f"an anchor '&{event.anchor}'", "write the value out where it is needed", line)
        if event.tag is not None:
            self._draft.fault(path, f"a tag '{event.tag}'", "write the plain value", line)
            self._draft.spoiled.add(path)

    def _mapping(self, path: Path) -> Tree:
        block: dict[str, Any] = {}
        while True:
            kind, event = self._next()
            if kind == "MappingEnd":
                return block
            line = self.line + 1
            key = self._key(path, kind, event, line)
            kind, event = self._next()
            if key is None or key in block:
                self._discard(kind)
                if key is not None:
                    first = self._draft.key_lines[(*path, key)]
                    self._draft.fault((*path, key), f"given again, first on line {first}", "give it once", line)
                continue
            self._draft.key_lines[(*path, key)] = line
            block[key] = self._value((*path, key), kind, event)
            if block[key] == "" or isinstance(block[key], dict | list):
                self._draft.value_lines[(*path, key)] = line

    def _key(self, path: Path, kind: str, event: Any, line: int) -> str | None:
        if kind == "Scalar":
            self._refuse_extras((*path, str(event.value)), event, line)
            return str(event.value)
        self._discard(kind)
        self._draft.fault(path, "a key that is not a text", "a key is a word", line)
        return None

    def _sequence(self, path: Path) -> Tree:
        items: list[Any] = []
        while True:
            kind, event = self._next()
            if kind == "SequenceEnd":
                return items
            items.append(self._value((*path, len(items)), kind, event))

    def _discard(self, kind: str) -> None:
        if kind in ("MappingStart", "SequenceStart"):
            self._skip()

    def _skip(self) -> None:
        """Past the end of the block or list that has just begun."""
        depth = 1
        while depth:
            kind, _ = self._next()
            depth += kind.endswith("Start") - kind.endswith("End")


def read_mapping(source: Mapping[Any, Any]) -> Draft:
    """The draft of a dict given from Python: numbers become their text, nothing has a line."""
    draft = Draft()
    draft.tree = _plain(source, (), draft)
    return draft


def _plain(value: Any, path: Path, draft: Draft) -> Tree:
    if value is None or isinstance(value, str):
        return value
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int | float):
        return repr(value)
    if len(path) < DEEPEST and isinstance(value, Mapping):
        for key in value:
            if not isinstance(key, str):
                draft.fault(path, f"a key {key!r} that is not a text", "a key is a word", None)
        return {key: _plain(item, (*path, key), draft) for key, item in value.items() if isinstance(key, str)}
    if len(path) < DEEPEST and isinstance(value, list | tuple):
        return [_plain(item, (*path, k), draft) for k, item in enumerate(value)]
    draft.fault(path, f"a Python {type(value).__name__}", "a text such as '1250 ± 60 kg/m3'", None)
    draft.spoiled.add(path)
    return None
