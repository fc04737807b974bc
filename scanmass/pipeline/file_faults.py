"""Errors of the models as faults of the file: the line, the key, what was seen, what is allowed, what was meant."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from scanmass.pipeline.file_yaml import Draft, Fault, Path
from scanmass.pipeline.keys import children, keys
from scanmass.pipeline.models import LATER
from scanmass.pipeline.models_read import meant, shown

NEEDED_BODY = "write inside: {body: {material: NAME}} or {density: 1250 ± 60 kg/m3}"


def model_faults(errors: list[Any], draft: Draft) -> Iterator[Fault]:
    """The faults behind pydantic's ``errors``, with their lines; silent where ``draft`` already spoke."""
    for error in errors:
        path: Path = tuple(part for part in error["loc"] if part != "[key]")
        context = error.get("ctx", {})
        if error["type"] == "extra_forbidden":
            fault = unknown_key(path)
            line = draft.key_lines.get(path)
        elif error["type"] == "missing":
            fault = _missing(path)
            line = _line(draft, fault.path[:-1])
        elif error["type"] == "scanmass":
            path = (*path, context["key"]) if context["key"] else path
            fault = Fault(path, context["seen"], context["allowed"])
            line = _line(draft, path)
        else:
            fault = Fault(path, shown(error["input"]), _shape(path))
            line = _line(draft, path)
        if not any(_related(fault.path, spoiled) for spoiled in draft.spoiled):
            yield Fault(fault.path, fault.seen, fault.allowed, line)


def unknown_key(path: Path) -> Fault:
    """The fault of a key that is not one, with the key that may have been meant."""
    name = str(path[-1])
    dotted = ".".join(str(part) for part in path)
    if dotted in LATER:
        return Fault(path, f"{LATER[dotted]} not available in this version", "take the key out for now")
    siblings = children(path[:-1])
    hint = meant(name, siblings) or _elsewhere(name)
    return Fault(path, f"no such key{hint}", f"allowed: {', '.join(siblings)}")


def _elsewhere(name: str) -> str:
    """A key of another block that may have been meant: only a close one, since most words are near to some key."""
    whole = {row.key.rsplit(".", 1)[-1]: row.key for row in keys()}
    hint = meant(name, whole, cutoff=0.8)
    for leaf, key in whole.items():
        hint = hint.replace(f"'{leaf}'", f"'{key}'")
    return hint


def _missing(path: Path) -> Fault:
    if path == ("inside",):
        path = ("inside", "body")
    allowed = NEEDED_BODY if path == ("inside", "body") else _shape(path)
    return Fault(path, "missing", allowed)


def _shape(path: Path) -> str:
    dotted = ".".join(str(part) for part in path)
    examples = [f"{row.key.removesuffix('.NAME')}: {row.example}" for row in keys() if row.key.startswith(dotted)]
    return f"write it as in {examples[0]}" if examples else "see 'scanmass check --keys'"


def _line(draft: Draft, path: Path) -> int | None:
    """The line of the value at ``path``, or of the nearest block round it."""
    for end in range(len(path), -1, -1):
        if path[:end] in draft.value_lines:
            return draft.value_lines[path[:end]]
    return None


def _related(one: Path, other: Path) -> bool:
    short = min(len(one), len(other))
    return one[:short] == other[:short]
