"""The schema takes what the contract allows and refuses what it does not."""

from __future__ import annotations

import math
from typing import Any

import pytest
from jsonschema import Draft202012Validator

from scanmass.report.schema import InvalidResult, result_schema, validate

Document = dict[str, Any]


def test_the_schema_is_a_schema() -> None:
    Draft202012Validator.check_schema(result_schema())


def test_a_document_of_the_contract_passes(document: Document) -> None:
    validate(document)


def test_absent_bounds_pass(document: Document) -> None:
    document["noise"] |= {"basis": "none", "std_m": None, "length_m": None, "shape": None}
    for name in ("volume_m3", "mass_kg", "center_of_mass_m"):
        nothing = {"std": None, "low": None, "high": None, "degrees_of_freedom": None, "bracket": None}
        document[name] |= nothing | {"random": {"low": None, "high": None}}
    validate(document)


@pytest.mark.parametrize("key", sorted(result_schema()["required"]))
def test_each_block_is_needed(document: Document, key: str) -> None:
    del document[key]
    with pytest.raises(InvalidResult, match=f"'{key}' is a required property"):
        validate(document)


BREAKS: list[tuple[str, Any, str]] = [
    ("mass_kg.value", math.nan, "mass_kg.value: nan is not a number JSON can hold"),
    ("center_of_mass_m.value.1", math.inf, "center_of_mass_m.value.1: inf is not"),
    ("mass_kg.value", -7.0, "mass_kg.value: -7.0 is less than or equal"),
    ("mass_kg.value", "7 kg", "mass_kg.value: '7 kg' is not of type 'number'"),
    ("mass_kg.low", 9.0, "mass_kg: low 9.0 lies above high 7.5"),
    ("center_of_mass_m.low", [0.0, 0.0, 1.0], "center_of_mass_m: low .* lies above high"),
    ("mass_kg.error", 0.1, "mass_kg: Additional properties are not allowed"),
    ("surprise", 1, r"\(top\): Additional properties are not allowed"),
    ("schema", "scanmass/result/2", "schema: 'scanmass/result/1' was expected"),
    ("scans.0.file", "/home/me/cube.ply", "scans.0.file: .* does not match"),
    ("scans", [], "scans: .* should be non-empty"),
    ("surface.closed", False, "surface.closed: True was expected"),
    ("noise.basis", "guessed", "noise.basis: 'guessed' is not one of"),
    ("noise.basis", "none", "mass_kg.low: 6.5 is not of type 'null'"),
    ("frame.up", None, "frame.up_from: 'declared' is not of type 'null'"),
    ("principal", [], "principal: .* (too short|should be non-empty)"),
    ("principal.0.determined", None, "principal.0.determined: None is not of type 'boolean'"),
    ("budget.2.share_mass", 0.5, "budget.2.share_mass: 0.5 is not of type 'null'"),
    ("budget.0.share_mass", 1.5, "budget.0.share_mass: 1.5 is greater than the maximum"),
    ("warnings.0.code", "One Cloud", "warnings.0.code: .* does not match"),
]


@pytest.mark.parametrize(("path", "value", "fault"), BREAKS, ids=[f"{p}={v}" for p, v, _ in BREAKS])
def test_broken_documents_are_refused(document: Document, path: str, value: Any, fault: str) -> None:
    *way, last = path.split(".")
    node: Any = document
    for step in way:
        node = node[int(step)] if isinstance(node, list) else node[step]
    node[int(last) if isinstance(node, list) else last] = value
    with pytest.raises(InvalidResult, match=fault):
        validate(document)


def test_all_faults_at_once(document: Document) -> None:
    document["mass_kg"]["value"] = math.nan
    document["level"] = 95
    del document["budget"]
    with pytest.raises(InvalidResult) as caught:
        validate(document)
    assert len(caught.value.faults) == 3
