"""Every fault of a pipeline file in full: its line, its key, what was seen and what is allowed."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from scanmass.errors import PipelineFault
from scanmass.pipeline.file import load, with_options
from scanmass.pipeline.file_yaml import LONGEST
from scanmass.pipeline.models import Pipeline

BODY = "inside: {body: {density: 1 g/cm3}}\n"
LENGTHS = "allowed for a length: m, cm, mm, um, in, inch, ft, thou"
BODIES = "write {material: NAME} or {density: 1250 ± 60 kg/m3}"
BLOCKS = "object, scan, points, clean, surface, inside, bounds"


def faults_of(tmp_path: Path, data: str | bytes) -> list[str]:
    """The faults of a file with this content, without the name of the file."""
    path = tmp_path / "p.yaml"
    path.write_bytes(data.encode() if isinstance(data, str) else data)
    with pytest.raises(PipelineFault) as caught:
        load(path)
    assert str(caught.value).splitlines() == list(caught.value.faults)
    assert all(line.startswith(f"{path}:") for line in caught.value.faults)
    return [line.removeprefix(f"{path}:") for line in caught.value.faults]


KEYS = {
    "scan: {unti: mm}": "1: scan.unti: no such key (did you mean 'unit'?); "
    "allowed: unit, frames, poses, up, scale, noise_std, noise_length, certificate",
    "surface:\n  Under-side: flat": "2: surface.Under-side: no such key (did you mean 'underside'?); "
    "allowed: resolution, underside",
    "unit: mm": f"1: unit: no such key (did you mean 'scan.unit'?); allowed: {BLOCKS}",
    "mesh:\n  depth: 7": f"1: mesh: no such key; allowed: {BLOCKS}",
    "assumptions: []": f"1: assumptions: no such key; allowed: {BLOCKS}",
    "clean: {support: auto,\n  outliers: auto,\n  support: none}": "3: clean.support: given again, first on line 1; "
    "give it once",
    "bounds: {}\nbounds: {}": "2: bounds: given again, first on line 1; give it once",
    "? [a, b]\n: 1": "1: file: a key that is not a text; a key is a word",
    "weighings: [{mass: 3 kg}]": "1: weighings: weighings are not available in this version; take the key out for now",
    "decisions: {}": "1: decisions: decisions are not available in this version; take the key out for now",
    "scan: {poses: {a.ply: 1 0 0 0 5 0 0}}": "1: scan.poses.a.ply: '1 0 0 0 5 0 0' has no unit; "
    "end it with the length unit of the translation, such as mm",
    "scan: {poses: {a.ply: 2 0 0 0 5 0 0 mm}}": "1: scan.poses.a.ply: a quaternion of length 2; "
    "w x y z of length 1, before the translation",
    "scan: {poses: {a.ply: 0 1 0 0 1 0 0 0 0 0 1 0 0 0 0 1 mm}}": "1: scan.poses.a.ply: a matrix that mirrors; "
    "a rotation: exchange the axes in the scan instead",
    "scan: {poses: {a.ply: 1 0 0 0 0 1 0 0 0 0 1 0 9 8 7 1 mm}}": "1: scan.poses.a.ply: a matrix written column by "
    "column; write it row by row: the translation ends rows 1 to 3",
    "scan: mm": "1: scan: 'mm'; "
    "allowed: a block of keys (unit, frames, poses, up, scale, noise_std, noise_length, certificate)",
    "clean: [auto]": "1: clean: a list; allowed: a block of keys (support, outliers)",
}

VALUES = {
    "object:\n  id:\n  name: x": "2: object.id: nothing; allowed: a text on one line, 200 letters at most",
    "object: {name: [a]}": "1: object.name: a list; allowed: a text on one line, 200 letters at most",
    "object: {name: @b}": "1: file: this is not YAML (found character '@' that cannot start any token); "
    "write 'key: value' lines, indented with spaces",
    "object:\n  name: |\n    a\n    b": "2: object.name: 'a b'; allowed: a text on one line, 200 letters at most",
    "scan: {unit: MM}": f"1: scan.unit: 'MM' is not a unit that is read here; "
    f"did you mean mm (capitals matter)? {LENGTHS}",
    "scan: {unit: kg}": f"1: scan.unit: 'kg' is a unit of mass, not of length; {LENGTHS}",
    "scan: {frames: sharde}": "1: scan.frames: 'sharde' (did you mean 'shared'?); allowed: shared | own",
    "scan: {up: z}": "1: scan.up: 'z' is not a direction; write three bare numbers, like '0 0 1'",
    "scan: {up: [0, 0, 1]}": "1: scan.up: a list; allowed: three bare numbers, such as 0 0 1",
    "scan: {up: 0 0 0}": "1: scan.up: '0 0 0' has no length; write three bare numbers, like '0 0 1'",
    "scan: {scale: 0.001 ± 1}": "1: scan.scale: '0.001 ± 1' reaches zero; allowed: above zero, its doubt included",
    "scan: {scale: 1 mm}": "1: scan.scale: '1 mm': 'mm' is a unit of length, not of ratio; "
    "allowed for a ratio: a bare number, %, ppm",
    "scan:\n  noise_std: 0.1 ± 0.02 mm": "2: scan.noise_std: '0.1 ± 0.02 mm' has a doubt of its own; "
    "allowed: a length 0 or more with its unit, such as 0.2 mm",
    "scan:\n  noise_std: 0,1 mm": "2: scan.noise_std: '0,1 mm' has a comma; "
    "decimals take a point, thousands no mark: write '0.1 mm'",
    "scan:\n  noise_length: -1 mm": "2: scan.noise_length: '-1 mm' is negative; this length is 0 or more",
    "scan:\n  noise_length:\n    9 mm": "3: scan.noise_length: given without noise_std; "
    "declare noise_std too, or certificate.PF",
    "surface: {resolution: 0 mm}": "1: surface.resolution: '0 mm'; "
    "allowed: auto, or a length above 0 with its unit, such as 0.2 mm",
    "points: {lug: 1 2 3}": f"1: points.lug: '1 2 3': no unit is given; {LENGTHS}",
    "points: {lug: [1, 2, 3]}": "1: points.lug: a list; allowed: three numbers and a length unit, such as 120 0 300 mm",
    'points: {lug: 1 2 3 mm,\n "lug ": 4 5 6 mm}': "1: points: two points are called 'lug'; "
    "give each point a name of its own",
    "points: [lug]": "1: points: a list; write it as in points: {left wing tip: 120 0 300 mm}",
    "clean:\n  support: no": "2: clean.support: 'no' (did you mean 'none'?); allowed: auto | turntable | none",
    "clean:\n  outliers: True": "2: clean.outliers: 'True' (did you mean 'auto'?); allowed: auto | none",
    "surface: {resolution: 2}": f"1: surface.resolution: '2': no unit is given; {LENGTHS}",
    "surface: {resolution: atuo}": "1: surface.resolution: 'atuo' (did you mean 'auto'?); "
    "allowed: auto, or a length above 0 with its unit, such as 0.2 mm",
    "surface: {underside: hollow}": "1: surface.underside: 'hollow' without its depth; write {hollow: 30 mm}",
    "surface: {underside: flatt}": "1: surface.underside: 'flatt' (did you mean 'flat'?); "
    "allowed: seen | flat | unknown | {hollow: DEPTH}",
    "surface:\n  underside: {\n    hollow: 30}": f"3: surface.underside.hollow: '30': no unit is given; {LENGTHS}",
    "surface:\n  underside: {}": "2: surface.underside.hollow: missing; write it as in surface.underside.hollow: 30 mm",
    "bounds: {level: 95}": "1: bounds.level: '95' (did you mean '95 %'?); allowed: from 50 % to 99.9 %",
    "bounds: {level: 100 %}": "1: bounds.level: '100 %'; allowed: from 50 % to 99.9 %",
    "bounds: {replicates: 2e3}": "1: bounds.replicates: '2e3'; allowed: a whole number from 200 to 100000",
    "bounds: {replicates: 199}": "1: bounds.replicates: '199'; allowed: a whole number from 200 to 100000",
    "bounds: {replicates: 100001}": "1: bounds.replicates: '100001'; allowed: a whole number from 200 to 100000",
    "bounds:\n  level: 99.9 %\n  replicates: 1999": "3: bounds.replicates: "
    "1999 leave less than one beyond each bound at 99.9 %; at least 2000, or a lower level",
}

GROWING = "a length, or a length and the share that grows with L, such as 0.06 mm or 0.06 mm + L/20000"
CERTIFICATE = {
    "scan: {certificate: yes}": "1: scan.certificate: 'yes'; allowed: a block of keys (PF, PS, SD, E, length)",
    "scan: {certificate: {pf: 0.1 mm}}": "1: scan.certificate.pf: no such key (did you mean 'PF'?); "
    "allowed: PF, PS, SD, E, length",
    "scan:\n  certificate:\n    length: 1 m": "3: scan.certificate.length: given without an error; "
    "give PF, PS, SD or E too",
    "scan: {certificate: {PF: 0 mm}}": "1: scan.certificate.PF: '0 mm'; "
    "allowed: a length above 0 with its unit, such as 0.05 mm, without its sign",
    "scan: {certificate: {PS: -0.02 mm}}": "1: scan.certificate.PS: '-0.02 mm' has a sign; give its size: 0.02 mm",
    "scan: {certificate: {PF: 0.05}}": f"1: scan.certificate.PF: '0.05': no unit is given; {LENGTHS}",
    "scan: {certificate: {E: 0.06 + L/20000}}": f"1: scan.certificate.E: '0.06': no unit is given; {LENGTHS}",
    "scan: {certificate: {E: 0.06 mm + L/20000 mm}}": "1: scan.certificate.E: '0.06 mm + L/20000 mm' has 'mm' after "
    "L/20000; write K without a unit, as in 0.06 mm + L/20000, which grows by 0.05 mm in a metre",
    "scan: {certificate: {E: 1.8 um + L/300}}": "1: scan.certificate.E: '1.8 um + L/300' grows by 3.33 mm in a metre; "
    "write L/K with L and the limit in one unit (if L/300 means micrometres for L in millimetres, write L/300000)",
    "scan: {certificate: {E: L/0}}": "1: scan.certificate.E: 'L/0' divides by 0; "
    "write L/K with L and the limit in one unit",
    "scan: {certificate: {SD: 0.06 mm + 20 L}}": f"1: scan.certificate.SD: '0.06 mm + 20 L'; allowed: {GROWING}",
}

INSIDE = {
    "scan: {unit: mm}": "1: inside.body: missing; write inside: {body: {material: NAME}} or {density: 1250 ± 60 kg/m3}",
    "scan: {unit: mm}\ninside:\n": "2: inside.body: missing; "
    "write inside: {body: {material: NAME}} or {density: 1250 ± 60 kg/m3}",
    "inside:\n  body: {}": f"2: inside.body: nothing; {BODIES}",
    "inside:\n  body: empty": f"2: inside.body: 'empty' is not available in this version; {BODIES}",
    "inside: {body: plaster}": "1: inside.body: 'plaster'; write {material: plaster}",
    "inside: {body: 1250 kg/m3}": "1: inside.body: '1250 kg/m3'; write {density: 1250 kg/m3}",
    "inside: {body: {material: plaster, density: 1 g/cm3}}": "1: inside.body: both material and density; "
    "give one of them",
    "inside: {body: {material: ~}}": "1: inside.body: neither material nor density; give one of them",
    "inside:\n  body:\n    density: 0 kg/m3": "3: inside.body.density: '0 kg/m3' is zero; a density is above zero",
    "inside:\n  layers: []\n  body: {density: 1 g/cm3}": "2: inside.layers: "
    "layers of other materials are not available in this version; take the key out for now",
    "inside:\n  body: {density: 1 g/cm3}\n  inserts: []": "3: inside.inserts: "
    "inserts are not available in this version; take the key out for now",
}

YAML = {
    "": "1: file: nothing is in the file; at least scan.unit and inside.body are needed",
    "# only words\n": "1: file: nothing is in the file; at least scan.unit and inside.body are needed",
    "- a\n- b\n": f"1: file: a list; allowed: a block of keys ({BLOCKS})",
    "hello": f"1: file: 'hello'; allowed: a block of keys ({BLOCKS})",
    "scan:\n\tunit: mm\n": "2: file: a tab before the text; indent with spaces",
    "scan:\n  unit: mm: cm\n": "2: file: a second ': ' on the line, or a wrong indent; quote texts that hold ': '",
    BODY + "---\n" + BODY: "2: file: a second document after '---'; one pipeline a file",
    BODY + "scan: &s {unit: mm}\n": "2: scan: an anchor '&s'; write the value out where it is needed",
    BODY + "scan:\n  unit: *s\n": "3: scan.unit: a reference '*s'; write the value out",
    BODY + "scan: !!python/object/apply:os.system [ls]\n": "2: scan: "
    "a tag 'tag:yaml.org,2002:python/object/apply:os.system'; write the plain value",
    BODY + "points: {a: {b: {c: {d: {e: {f: {g: {h: {i: 1}}}}}}}}}": "2: points.a.b.c.d.e.f.g: "
    "more than 8 blocks inside each other; see 'scanmass check --keys'",
    BODY + "points: " + "[" * 5000: "2: file: brackets inside brackets without end; close each '{' and '['",
    'object: {name: "\\UFFFFFFFF"}': "1: file: this is not YAML; write 'key: value' lines, indented with spaces",
}


@pytest.mark.parametrize(("text", "fault"), [*KEYS.items(), *VALUES.items(), *CERTIFICATE.items()])
def test_a_fault_names_its_line_and_key(tmp_path: Path, text: str, fault: str) -> None:
    assert faults_of(tmp_path, f"{text}\n{BODY}" if fault[3:7] != "file" or "a key" in fault else text) == [fault]


@pytest.mark.parametrize(("text", "fault"), [*INSIDE.items(), *YAML.items()])
def test_a_file_that_is_wrong_as_a_whole(tmp_path: Path, text: str, fault: str) -> None:
    assert faults_of(tmp_path, text) == [fault]


def test_a_material_that_is_not_in_the_table(tmp_path: Path) -> None:
    (fault,) = faults_of(tmp_path, "inside:\n  body: {material: plastr}\n")
    assert fault.startswith("2: inside.body.material: ")
    assert "plastr" in fault
    assert "plaster" in fault.replace("plastr'", "")


def test_bytes_that_are_not_a_text(tmp_path: Path) -> None:
    assert faults_of(tmp_path, b"scan:\n  unit: \xb5m\n") == ["2: file: byte 0xB5 is not UTF-8; save it as UTF-8"]
    assert faults_of(tmp_path, "scan: {}".encode("utf-16")) == ["1: file: the text is UTF-16; save it as UTF-8"]
    assert faults_of(tmp_path, b"a: 1\nb: \x01\n")[0].startswith("2: file: this is not YAML (")
    too_long = "1: file: longer than 100 kB; a pipeline file is a page of text; is this the scan?"
    assert faults_of(tmp_path, "0 0 1\n" * (LONGEST // 6 + 1)) == [too_long]


def test_a_file_that_cannot_be_opened(tmp_path: Path) -> None:
    for source, fault in (
        (tmp_path / "none.yaml", "there is no such file"),
        (tmp_path, "this is a folder"),
        ("a\0b", "it cannot be opened (embedded null byte)"),
    ):
        with pytest.raises(PipelineFault) as caught:
            load(source)
        assert str(caught.value) == f"{source}:1: file: {fault}; give the path of a pipeline file"
    with pytest.raises(PipelineFault, match=r":1: file: YAML text where a path is wanted; give a path, or a dict$"):
        load(BODY + "scan: {}\n")


def test_all_faults_come_at_once_in_the_order_of_the_lines(tmp_path: Path) -> None:
    text = """\
object: {nam: heron}
scan:
  unit: MM
  noise_std:
    # forgotten
  up: 0 0 0
points:
  "left: tip": 1 2 mm
  right tip: {x: 1 mm}
clean: {support: auto, support: none, outliers: off}
inside:
  body:
    material: plaster
    densty: &d 3
bounds: {level: 95 %,
         replicates: 12}
weighings: *d
"""
    found = [line.split("; ")[0] for line in faults_of(tmp_path, text)]
    assert found == [
        "1: object.nam: no such key (did you mean 'name'?)",
        "3: scan.unit: 'MM' is not a unit that is read here",
        "4: scan.noise_std: nothing",
        "6: scan.up: '0 0 0' has no length",
        "8: points.left: tip: '1 2 mm' is not a point",
        "9: points.right tip: a block of keys",
        "10: clean.support: given again, first on line 10",
        "10: clean.outliers: 'off' (did you mean 'none'?)",
        "14: inside.body.densty: an anchor '&d'",
        "14: inside.body.densty: no such key (did you mean 'density'?)",
        "16: bounds.replicates: '12'",
        "17: weighings: a reference '*d'",
    ]


def test_a_dict_has_keys_but_no_lines() -> None:
    with pytest.raises(PipelineFault) as caught:
        load({"scan": {"up": (0, 0, 1)}, "bounds": {"replicates": 7}, 3: 4, "inside": {"body": {"density": 1250.0}}})
    assert caught.value.faults == (
        "pipeline: file: a key 3 that is not a text; a key is a word",
        "pipeline: scan.up: a list; allowed: three bare numbers, such as 0 0 1",
        "pipeline: inside.body.density: '1250.0': no unit is given; "
        "allowed for a density: kg/m3, g/cm3, kg/L, t/m3, lb/ft3, lb/in3",
        "pipeline: bounds.replicates: '7'; allowed: a whole number from 200 to 100000",
    )
    with pytest.raises(PipelineFault, match=r"^pipeline: scan.up: a Python object; a text such as '1250 ± 60 kg/m3'$"):
        load({"scan": {"up": object()}, "inside": {"body": {"density": "1 g/cm3"}}})
    endless: dict[str, Any] = {}
    endless["inside"] = endless
    with pytest.raises(PipelineFault, match="a Python dict"):
        load(endless)


def test_options_beside_the_file_follow_its_rules() -> None:
    pipeline = load({"scan": {"unit": "in"}, "bounds": {"level": "99.5 %"}, "inside": {"body": {"density": "1 g/cm3"}}})
    assert with_options(pipeline) == pipeline
    assert with_options(pipeline, unit="inch").scan.unit == "inch"  # the same unit by another name
    for options, fault in (
        ({"unit": "mm"}, "scan.unit: 'mm' is given, and the file says 'in'; make them agree, or give one"),
        ({"unit": "mmm"}, f"scan.unit: 'mmm' is not a unit that is read here; did you mean mm? {LENGTHS}"),
        ({"replicates": 7}, "bounds.replicates: '7'; allowed: a whole number from 200 to 100000"),
        (
            {"replicates": 300},
            "bounds.replicates: 300 leave less than one beyond each bound at 99.5 %; at least 400, or a lower level",
        ),
    ):
        with pytest.raises(PipelineFault) as caught:
            with_options(pipeline, **options)
        assert str(caught.value) == f"options: {fault}"


PIECES = st.sampled_from(
    ["scan:", "inside:", "body:", "{", "}", "[", "]", ": ", ", ", "\n", "\n  ", "\n    ", "- ", "? ", "&a ", "*a",
     "!x ", "!!int ", "|\n", ">-\n", "'", '"', "\\", "#", "---\n", "...\n", "%YAML 1.1\n", "%TAG ! a:\n", "\t", "~",
     "<<", "unit", "mm", "density", "1250 ± 60 kg/m3", "1e999 mm", "0 0 1", "points", "underside", "hollow", "\u2028",
     "\x85", "\r", "\ufeff", "@", "`", "\\x", "\\u12", "\\UFFFFFFFF", "level", "nan %", "inf mm", "9" * 400]
)  # fmt: skip
GARBAGE = st.one_of(
    st.binary(max_size=60),
    st.text(max_size=60).map(lambda text: text.encode("utf-8", "surrogatepass")),
    st.lists(PIECES, max_size=25).map(lambda pieces: "".join(pieces).encode()),
    st.lists(PIECES, max_size=6).map(lambda pieces: f"{BODY}scan: {{{''.join(pieces)}}}".encode()),
)


@settings(max_examples=2000, deadline=None, derandomize=True, database=None)
@given(data=GARBAGE)
@example(data=b"- " * 300)
@example(data=b"{a: " * 40)
@example(data=b"a: &a [*a, *a]")
def test_garbage_never_raises_anything_but_a_pipeline_fault(
    tmp_path_factory: pytest.TempPathFactory, data: bytes
) -> None:
    path = tmp_path_factory.getbasetemp() / "garbage.yaml"
    path.write_bytes(data)
    try:
        assert isinstance(load(path), Pipeline)
    except PipelineFault as fault:
        lines = data.count(b"\n") + data.count(b"\r") + data.count(b"\xc2\x85") + data.count(b"\xe2\x80") + 1
        for line in fault.faults:
            assert 1 <= int(line.removeprefix(f"{path}:").split(":")[0]) <= lines + 1
            assert "\n" not in line


JSONISH = st.recursive(
    st.one_of(st.none(), st.booleans(), st.integers(), st.floats(), st.text(max_size=9), st.binary(max_size=3), PIECES),
    lambda inner: (
        st.lists(inner, max_size=3)
        | st.dictionaries(
            st.sampled_from(["scan", "inside", "body", "density", "points", "surface", "underside"]), inner
        )
    ),
    max_leaves=12,
)


@settings(max_examples=500, deadline=None, derandomize=True, database=None)
@given(tree=st.dictionaries(st.sampled_from(["scan", "inside", "bounds", "points", "surface", "x"]), JSONISH))
def test_any_dict_loads_or_is_a_pipeline_fault(tree: dict[str, Any]) -> None:
    try:
        faults: tuple[str, ...] = ()
        assert isinstance(load(tree), Pipeline)
    except PipelineFault as fault:
        faults = fault.faults
    assert all(line.startswith("pipeline: ") for line in faults)
