"""The contract of ``result.json``: its schema, and the check that every document passes before it is written."""

from __future__ import annotations

import json
import math
from collections.abc import Iterator, Mapping
from importlib.resources import files
from typing import Any

from scanmass.errors import ScanmassError

Document = dict[str, Any]

FAULTS_SHOWN = 20


class InvalidResult(ScanmassError):
    """A document that breaks the contract; ``faults`` holds a line each, ``path: what was seen``."""

    def __init__(self, faults: tuple[str, ...]) -> None:
        self.faults = faults
        shown = list(faults[:FAULTS_SHOWN])
        if len(faults) > FAULTS_SHOWN:
            shown.append(f"... and {len(faults) - FAULTS_SHOWN} more")
        super().__init__("the result breaks its own contract:\n" + "\n".join(shown))


def result_schema() -> Document:
    """The JSON Schema (2020-12) of ``result.json``.

    >>> result_schema()["properties"]["schema"]["const"]
    'scanmass/result/1'
    """
    schema: Document = json.loads(files("scanmass.report").joinpath("result.schema.json").read_text("utf-8"))
    return schema


def validate(document: Mapping[str, Any]) -> None:
    """Check a result against the contract.

    Beyond the schema: every number is finite (JSON has no NaN), and every ``low`` lies at or under its ``high``.

    Raises
    ------
    InvalidResult
        With every fault at once, each with its place in the document.

    >>> validate({"schema": "scanmass/result/2"})
    Traceback (most recent call last):
    ...
    scanmass.report.schema.InvalidResult: the result breaks its own contract:
    ...
    """
    from jsonschema import Draft202012Validator

    # What a reader of the file will see: tuples have become arrays.
    written = json.loads(json.dumps(dict(document)))
    faults = [*_not_finite(written, ""), *_crossed(written, "")]
    validator = Draft202012Validator(result_schema())
    for error in sorted(validator.iter_errors(written), key=lambda e: [str(p) for p in e.absolute_path]):
        faults.append(f"{_dotted(error.absolute_path)}: {error.message[:300]}")
    if faults:
        raise InvalidResult(tuple(faults))


def _dotted(path: Any) -> str:
    return ".".join(str(part) for part in path) or "(top)"


def _not_finite(node: Any, path: str) -> Iterator[str]:
    if isinstance(node, dict):
        for key, value in node.items():
            yield from _not_finite(value, f"{path}.{key}" if path else str(key))
    elif isinstance(node, list):
        for index, value in enumerate(node):
            yield from _not_finite(value, f"{path}.{index}")
    elif isinstance(node, float) and not math.isfinite(node):
        yield f"{path}: {node} is not a number JSON can hold; null where nothing is known"


def _crossed(node: Any, path: str) -> Iterator[str]:
    if isinstance(node, dict):
        if _above(node.get("low"), node.get("high")):
            yield f"{path}: low {node['low']} lies above high {node['high']}"
        for key, value in node.items():
            yield from _crossed(value, f"{path}.{key}" if path else str(key))
    elif isinstance(node, list):
        for index, value in enumerate(node):
            yield from _crossed(value, f"{path}.{index}")


def _above(low: Any, high: Any) -> bool:
    if isinstance(low, list) and isinstance(high, list):
        return any(_above(a, b) for a, b in zip(low, high, strict=False))
    both = isinstance(low, int | float) and isinstance(high, int | float)
    return both and low > high
