"""The pipeline file: what it means, how it echoes, and that it loads light."""

from __future__ import annotations

import pickle
import subprocess
import sys
from pathlib import Path
from typing import Annotated

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from scanmass.doubt import Figure
from scanmass.errors import Note
from scanmass.materials import table
from scanmass.pipeline.file import effective_text, load, quantities, sha256
from scanmass.pipeline.models_block import Block
from scanmass.pipeline.models_quantities import Quantity

PIPELINES = sorted((Path(__file__).parents[2] / "pipelines").glob("*.yaml"))
CONTRACT = """\
object:   {name: heron, id: 1987-14}
scan:     {unit: mm, frames: shared, up: 0 0 1, scale: 1 ± 0.0004, noise_std: 0.10 mm, noise_length: 25 mm}
points:   {left wing tip: 120 0 300 mm, right wing tip: -120 0 300 mm}      # features people can find
clean:    {support: auto, outliers: none}
surface:  {resolution: auto, underside: {hollow: 30 mm}}
inside:
  body:    {density: 1250 ± 60 kg/m3}
bounds:   {level: 95 %, replicates: 2000}
"""


def test_the_block_of_the_contract_is_read_into_si(tmp_path: Path) -> None:
    path = tmp_path / "heron.yaml"
    path.write_text(CONTRACT, encoding="utf-8")
    pipeline = load(path)
    assert (pipeline.object.name, pipeline.object.id) == ("heron", "1987-14")
    assert pipeline.scan.unit == "mm"
    assert pipeline.scan.up == (0.0, 0.0, 1.0)
    # ± is the 95 % half-width, the standard deviation half of it (the contract).
    assert pipeline.scan.scale is not None
    assert (pipeline.scan.scale.value, pipeline.scan.scale.std) == (1.0, 0.0002)
    assert (pipeline.scan.noise_std, pipeline.scan.noise_length) == (0.0001, 0.025)
    assert pipeline.points == {"left wing tip": (0.12, 0.0, 0.3), "right wing tip": (-0.12, 0.0, 0.3)}
    assert (pipeline.clean.support, pipeline.clean.outliers) == ("auto", "none")
    assert pipeline.surface.resolution == "auto"
    assert (pipeline.surface.underside_kind, pipeline.surface.hollow_depth) == ("hollow", 0.03)
    assert pipeline.inside.body.density is not None
    assert (pipeline.inside.body.density.value, pipeline.inside.body.density.std) == (1250.0, 30.0)
    assert (pipeline.bounds.level, pipeline.bounds.replicates) == (0.95, 2000)
    assert pipeline.assumptions == ()


def test_only_the_body_is_needed_and_the_rest_has_its_default() -> None:
    pipeline = load({"inside": {"body": {"material": "plaster"}}})
    assert pipeline.inside.body.material == table.find("plaster").name
    assert pipeline.scan.unit is None
    assert pipeline.scan.up is None
    assert pipeline.scan.scale is None
    assert pipeline.scan.noise_std is None
    assert pipeline.surface.underside_kind == "unknown"
    assert pipeline.surface.hollow_depth is None
    assert (pipeline.bounds.level, pipeline.bounds.replicates) == (0.95, 2000)


@pytest.mark.parametrize("identity", ["1987-14", "1987-04-14", "0014", "1e5", "12:30", "yes", "0x1F", ".5", "null"])
def test_a_text_stays_the_text_that_was_written(tmp_path: Path, identity: str) -> None:
    # What a YAML loader would take for a date, a number, a truth value or nothing.
    path = tmp_path / "p.yaml"
    written = f'"{identity}"' if identity == "null" else identity
    path.write_text(f"object: {{id: {written}}}\ninside: {{body: {{density: 1 g/cm3}}}}\n")
    pipeline = load(path)
    assert pipeline.object.id == identity
    path.write_text(effective_text(pipeline))
    assert load(path) == pipeline


def test_blocks_left_empty_and_nulls_are_defaults(tmp_path: Path) -> None:
    path = tmp_path / "p.yaml"
    path.write_bytes(
        b"\xef\xbb\xbfscan:\n# nothing yet\npoints:\r\nobject: {name: ~}\ninside: {body: {density: 1 t/m3}}"
    )
    assert load(path) == load({"inside": {"body": {"density": "1 t/m3"}}})


def test_settings_are_frozen_and_go_to_workers() -> None:
    pipeline = load({"inside": {"body": {"density": "4 to 9 g/cm3"}}})
    assert pickle.loads(pickle.dumps(pipeline)) == pipeline
    with pytest.raises(ValidationError, match="frozen"):
        pipeline.bounds.level = 0.5  # type: ignore[misc]


def test_the_fingerprint_is_of_the_settings_not_of_their_spelling() -> None:
    one = load({"scan": {"noise_std": "0.10 mm", "up": "0 0 2"}, "inside": {"body": {"density": "1250 ± 60 kg/m3"}}})
    same = load(
        {"inside": {"body": {"density": "1.250 +/- 0.06 g/cm3"}}, "scan": {"up": "0 0 1", "noise_std": "100 um"}}
    )
    other = load({"scan": {"noise_std": "0.11 mm", "up": "0 0 1"}, "inside": {"body": {"density": "1250 ± 60 kg/m3"}}})
    assert one == same
    assert sha256(one) == sha256(same) != sha256(other)


def test_what_was_assumed_in_reading_is_collected() -> None:
    # No key of this version takes a mass, so a block of its own shows that notes come through.
    class Weighing(Block):
        mass: Annotated[Figure, Quantity("mass")]

    notes: list[Note] = []
    weighing = Weighing.model_validate({"mass": "9.80665 kN"}, context=notes)
    assert weighing.mass.value == 1000.0  # standard gravity by definition
    assert [note.code for note in notes] == ["force-as-mass"]


def test_every_quantity_is_echoed_as_understood() -> None:
    rows = {
        row.key: row
        for row in quantities(
            load(
                {
                    "scan": {"noise_std": "0.004 in", "up": "0 0 5", "scale": "1"},
                    "points": {"lug": "1 2 3 in"},
                    "inside": {"body": {"density": "1.25 ± 0.06 g/cm3"}},
                }
            )
        )
    }
    density = rows["inside.body.density"]
    assert (density.text, density.value, density.std, density.spread) == ("1250 ± 60 kg/m3", 1250.0, 30.0, "normal")
    assert rows["scan.noise_std"].text == "0.1016 mm"  # 0.004 x 25.4
    assert rows["scan.up"].text == "0 0 1"
    assert rows["points.lug"].text == "25.4 50.8 76.2 mm"
    assert rows["scan.scale"].text == "1"
    assert rows["bounds.level"].text == "95 %"
    material = {row.key: row for row in quantities(load({"inside": {"body": {"material": "plaster"}}}))}
    row = material["inside.body.material"]
    assert row.text.startswith("cast plaster: ")
    assert row.text.endswith(" kg/m3")
    assert row.low is not None
    assert row.high is not None
    assert 500 < row.low < row.value < row.high < 2000


NUMBER = st.floats(1e-6, 1e6).map(repr)
LENGTH = st.builds("{} {}".format, NUMBER, st.sampled_from(["mm", "in", "m", "thou"]))
GROWING = st.builds("{}{} + L/{!r}".format, st.sampled_from(["", "± "]), LENGTH, st.floats(1e3, 1e9))
SIGNED = st.floats(-1e6, 1e6).map(repr)
NAME = st.text(min_size=1, max_size=12).filter(
    lambda text: (
        bool(text.strip()) and not any(ord(c) < 32 or 0x7F <= ord(c) < 0xA0 or c in "\u2028\u2029" for c in text)
    )
)
DENSITY = st.one_of(
    st.builds("{} {}".format, NUMBER, st.sampled_from(["kg/m3", "lb/in3"])),
    st.builds("{} ± {} {}".format, NUMBER, NUMBER, st.sampled_from(["kg/m3", "lb/ft3"])),
    st.builds(lambda a, b: f"{a} to {a + b} g/cm3", st.floats(1e-3, 9.0), st.floats(0.1, 9.0)),
)
SETTINGS = st.fixed_dictionaries(
    {"inside": st.fixed_dictionaries({"body": st.fixed_dictionaries({"density": DENSITY})})},
    optional={
        "object": st.fixed_dictionaries({}, optional={"name": NAME, "id": NAME}),
        "scan": st.fixed_dictionaries(
            {},
            optional={
                "unit": st.sampled_from(["mm", "inch", "µm"]),
                "up": st.builds("{} {} {}".format, SIGNED, SIGNED, NUMBER),
                "scale": st.builds("1 ± {}".format, st.floats(1e-7, 0.9).map(repr)),
                "noise_std": LENGTH,
                "noise_length": LENGTH,
                "certificate": st.fixed_dictionaries(
                    {"PF": LENGTH}, optional={"PS": LENGTH, "SD": LENGTH, "E": GROWING}
                ),
            },
        ).map(lambda scan: scan if "noise_std" in scan else {k: v for k, v in scan.items() if k != "noise_length"}),
        "points": st.dictionaries(
            NAME, st.builds("{} {} {} {}".format, SIGNED, SIGNED, SIGNED, st.sampled_from(["mm", "ft"])), max_size=3
        ),
        "surface": st.fixed_dictionaries(
            {}, optional={"resolution": LENGTH, "underside": st.builds(lambda depth: {"hollow": depth}, LENGTH)}
        ),
        "bounds": st.fixed_dictionaries({"level": st.floats(50, 99).map("{!r} %".format)}),
    },
)


@settings(max_examples=300, deadline=None, derandomize=True, database=None)
@given(settings_=SETTINGS)
def test_the_effective_text_loads_back_to_the_same_settings(
    tmp_path_factory: pytest.TempPathFactory, settings_: dict
) -> None:
    pipeline = load(settings_)
    text = effective_text(pipeline)
    path = tmp_path_factory.getbasetemp() / "effective.yaml"
    path.write_text(text, encoding="utf-8", newline="\n")
    again = load(path)
    assert again == pipeline
    assert effective_text(again) == text


@pytest.mark.parametrize("path", PIPELINES, ids=lambda path: path.stem)
def test_the_shipped_pipelines_are_sound(path: Path) -> None:
    head = path.read_text(encoding="utf-8")
    assert load(path).assumptions == ()
    assert f"--pipeline pipelines/{path.name}" in head, "the head comment names the command"
    assert all(len(line) <= 120 for line in head.splitlines())


def test_loading_settings_needs_no_heavy_module() -> None:
    code = (
        "import sys, scanmass.pipeline.file, scanmass.pipeline.keys;"
        "print([m for m in ('open3d', 'numba', 'scipy', 'sklearn', 'pyarrow') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
