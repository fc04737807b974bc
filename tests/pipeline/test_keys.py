"""The reference of keys is told from the models, and the README holds it."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from scanmass.pipeline.file import effective_text, load
from scanmass.pipeline.keys import KeyRow, keys, keys_markdown, keys_text

README = Path(__file__).parents[2] / "README.md"


def as_file(row: KeyRow, value: str) -> str:
    """A file with just this key, and a body."""
    if row.key.endswith(".NAME"):
        return as_file(replace(row, key=row.key.removesuffix(".NAME")), value)
    if row.key == "scan.noise_length":
        value += ", noise_std: 1 mm"
    if row.key == "scan.certificate.length":
        value += ", PF: 1 mm"
    parts = row.key.split(".")
    text = ": {".join(parts) + f": {value}" + "}" * (len(parts) - 1)
    return text + ("\n" if parts[0] == "inside" else "\ninside: {body: {density: 1 g/cm3}}\n")


@pytest.mark.parametrize("row", keys(), ids=lambda row: row.key)
def test_every_key_is_explained_and_its_example_loads(row: KeyRow, tmp_path: Path) -> None:
    assert len(row.meaning) > 15
    assert row.meaning.endswith(".")
    assert row.allowed
    path = tmp_path / "p.yaml"
    path.write_text(as_file(row, row.example), encoding="utf-8")
    assert load(path).inside.body
    if row.default not in ("not given", "none") and not row.default.startswith("none:"):
        path.write_text(as_file(row, row.default), encoding="utf-8")
        assert load(path) == load({"inside": {"body": {"density": "1 g/cm3"}}})


def test_the_keys_are_those_of_the_effective_file() -> None:
    # Two independent walks: the one that explains the keys, and the one that writes the settings out.
    told = {row.key for row in keys()} - {
        "points.NAME",
        "scan.poses.NAME",
        "surface.underside.hollow",
        "inside.body.material",
    }
    assert told == written_keys(effective_text(load({"inside": {"body": {"density": "1 g/cm3"}}})))


def written_keys(text: str) -> set[str]:
    from ruamel.yaml import YAML

    def leaves(tree: Any, prefix: str) -> set[str]:
        if not isinstance(tree, dict):
            return {prefix}
        return {leaf for key, value in tree.items() for leaf in leaves(value, f"{prefix}.{key}" if prefix else key)}

    return leaves(YAML(typ="safe").load(text), "")


def test_terminal_and_readme_print_the_same_rows() -> None:
    assert [line for line in keys_text().splitlines() if line and line[0] != " "] == [row.key for row in keys()]
    table = keys_markdown().splitlines()
    assert len(table) == len(keys()) + 2
    # A bar inside a cell must not end it.
    assert {line.replace("\\|", "").count("|") for line in table} == {6}


def test_readme_holds_the_keys() -> None:
    text = README.read_text(encoding="utf-8") if README.exists() else ""
    if "<!-- keys -->" not in text:
        pytest.skip("README.md has no <!-- keys --> section yet")
    section = text.split("<!-- keys -->", 1)[1].split("<!-- /keys -->", 1)[0]
    assert section.strip() == keys_markdown().strip(), "put keys_markdown() between the marks"
