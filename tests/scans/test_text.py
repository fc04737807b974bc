"""Text files of many layouts, and the number parser against Python's own."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from scanmass.errors import ScanFault
from scanmass.scans.load import load
from scanmass.scans.numbers import Columns, parse_lines
from scanmass.scans.table import read


def scan_of(folder: Path, text: str, name: str = "a.txt"):
    path = folder / name
    path.write_bytes(text.encode())
    return read(path)


LAYOUTS = {
    "blanks": "1 2 3\n4 5 6\n",
    "fixed width, no last line end": "   1.0   2.0   3.0\n   4.0   5.0   6.0",
    "tabs, other line ends": "1\t2\t3\r\n4\t5\t6\r\n",
    "old line ends": "1 2 3\r4 5 6\r",
    "commas": "1,2,3\n4,5,6\n",
    "commas and blanks": "1.0, 2.0, 3.0\n4.0, 5.0, 6.0\n",
    "semicolons": "1;2;3\n4;5;6\n",
    "trailing comma": "1,2,3,\n4,5,6,\n",
    "header": "x,y,z\n1,2,3\n4,5,6\n",
    "header in capitals with units": "X [mm];Y [mm];Z [mm]\n1;2;3\n4;5;6\n",
    "header with other order": "id z y x\n9 3 2 1\n8 6 5 4\n",
    "quoted header and words": '"name","x","y","z"\n"a, b",1,2,3\n"c",4,5,6\n',
    "comment as header": "# z x y\n3 1 2\n6 4 5\n",
    "comments and blank lines": "# made by hand\n\n1 2 3\n# between\n// too\n\n4 5 6\n\n",
    "byte order mark": "\ufeffx y z\n1 2 3\n4 5 6\n",
    "powers of ten": "1e0 +2.0E+0 .3e1\n40e-1 5. 600e-2\n",
    "more digits than a float": "1.000000000000000000000 2 3\n4.0000000000000000000000001 5 6\n",
}


@pytest.mark.parametrize("text", LAYOUTS.values(), ids=LAYOUTS.keys())
def test_layouts(tmp_path: Path, text: str) -> None:
    scan = scan_of(tmp_path, text)
    np.testing.assert_array_equal(scan.points(), [[1, 2, 3], [4, 5, 6]])
    assert scan.total == 2
    assert scan.warnings == ()


@pytest.mark.parametrize("name", ["plain.xyz", "counted.pts"])
def test_files_of_open3d(open3d_files: Path, ball, name: str) -> None:
    scan = read(open3d_files / name)
    # Ten decimals are written.
    np.testing.assert_allclose(scan.points(), ball.points, rtol=0, atol=6e-11)
    if name == "counted.pts":
        (block,) = scan.blocks()
        np.testing.assert_array_equal(block.colours, ball.colours)
        assert [note.code for note in scan.assumptions] == ["columns-unnamed"]


def test_columns_by_name(tmp_path: Path, ball) -> None:
    view = np.arange(600) % 3 + 1
    table = np.column_stack([view, ball.points, ball.normals, ball.colours])
    path = tmp_path / "named.csv"
    np.savetxt(path, table, delimiter=",", header="scan_id,x,y,z,nx,ny,nz,r,g,b", comments="")
    scan = read(path)
    assert [head.name for head in scan.views] == ["view 1", "view 2", "view 3"]
    for block in scan.blocks():
        chosen = view == block.view + 1
        # savetxt writes 19 digits; the fast parser is within two units of the last place of 100.
        np.testing.assert_allclose(block.points, ball.points[chosen], rtol=0, atol=3e-14)
        np.testing.assert_allclose(block.normals, ball.normals[chosen], rtol=0, atol=3e-16)
        np.testing.assert_array_equal(block.colours, ball.colours[chosen])


def test_columns_without_names_are_taken_only_for_what_they_must_be(tmp_path: Path, ball) -> None:
    path = tmp_path / "a.xyz"
    np.savetxt(path, np.column_stack([ball.points, ball.normals]))
    scan = read(path)
    (block,) = scan.blocks()
    np.testing.assert_allclose(block.normals, ball.normals, atol=3e-16)
    assert (
        scan.assumptions[0].text == "a.xyz: the columns have no names: columns 1 to 3 are x, y, z, 4 to 6 unit normals."
    )
    np.savetxt(path, np.column_stack([ball.points, ball.points]))
    (block,) = read(path).blocks()
    assert block.normals is None
    assert block.colours is None


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("1,5;2,5;3,5\n", "a.txt: the numbers hold decimal commas: '1,5;2,5;3,5'; write numbers with a decimal point"),
        ("1,5 2,5 3,5\n", "the numbers hold decimal commas"),
        ("x y z\n1,5\t2,5\t3,5\n", "the numbers hold decimal commas"),
        ("1 2 3\n4 5\n", "line 2 holds 2 fields; every line must hold 3, as the first one does"),
        ("1 2 3\n4 5 6 7\n", "line 2 holds 4 fields"),
        ("# c\n1 2 3\n4 five 6\n", "line 3: 'five' is not a number"),
        ("1 2 3\n4 0x5 6\n", "line 2: '0x5' is not a number"),
        ("1 2\n3 4\n", "each line holds 2 fields; at least x, y and z"),
        ("a,b,c\n1,2,3\n", "the first line names the columns a, b, c, and each line holds 3"),
        ("x,y\n1,2,3\n", "a name for each column"),
        ("x y z\nmm mm mm\n1 2 3\n", "line 2 holds 'mm mm mm', after a line of column names"),
        ("ncols 4\nnrows 3\n", "the file is a terrain grid"),
        ("# only a comment\n", "the file holds no line of numbers"),
        ("3\n1 2 3\n4 5 6\n", "the first line counts 3 points, but 2 follow"),
        ("1\n1 2 3\n4 5 6\n", "the first line counts 1 points, but 2 follow"),
        ("1 2 3\0\n", "the file is no plain text"),
    ],
)
def test_faults(tmp_path: Path, text: str, message: str) -> None:
    with pytest.raises(ScanFault) as fault:
        scan_of(tmp_path, text).points()
    assert message in str(fault.value)


def test_line_numbers_hold_in_later_blocks(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("scanmass.scans.numbers.BLOCK_BYTES", 64)
    path = tmp_path / "a.xyz"
    path.write_text("".join(f"{k} {k * k} 1.5\n" for k in range(200)) + "1 2 oops\n")
    blocks = read(path).blocks()
    assert sum(len(next(blocks).points) for _ in range(3)) < 30
    with pytest.raises(ScanFault, match="line 201: 'oops' is not a number"):
        list(blocks)
    path.write_text("".join(f"{k} {k * k} 1.5\n" for k in range(200)))
    np.testing.assert_array_equal(read(path).points()[:, 1], np.arange(200) ** 2)


@settings(max_examples=300, deadline=None)
@given(
    st.lists(st.floats(allow_nan=False, allow_infinity=False), min_size=3, max_size=3),
    st.sampled_from(["%r", "%.6f", "%.18e", "%g"]),
)
def test_numbers_are_read_as_python_reads_them(numbers: list[float], form: str) -> None:
    words = [form % number for number in numbers]
    found = parse_lines(" ".join(words).encode(), Columns(3, (0, 1, 2)), "a", 1)[0]
    for word, got in zip(words, found.tolist(), strict=True):
        plain = float(word)
        digits = word.partition("e")[0].strip("-").replace(".", "").lstrip("0")
        short = len(digits) <= 15 and 1e-7 < abs(plain) < 1e22
        # 15 digits are exact by Clinger's rule; else the mantissa, the power and their quotient round, 2^-53 each.
        assert got == plain if short else abs(got - plain) <= 3.01 * 2.0**-53 * abs(plain)


def test_non_finite_words_are_dropped_or_refused(tmp_path: Path, ball) -> None:
    lines = [" ".join(map(repr, point)) for point in ball.points.tolist()]
    path = tmp_path / "a.xyz"
    path.write_text("\n".join([*lines, "nan nan nan", "1e999 0 0"]))
    (scan,) = load([path], "mm")
    assert len(scan.points()) == 600
    assert scan.total == 602
    assert scan.warnings[0].text == "a.xyz: 2 of 602 points have coordinates that are not finite and were dropped."
    path.write_text("\n".join([*lines, *["nan nan nan"] * 7]))
    with pytest.raises(ScanFault, match=r"7 of 607 points \(1.2 %\) have coordinates that are not finite; up to 1 %"):
        load([path], "mm")
