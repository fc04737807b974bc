"""The real program on a real file, start to finish: a box whose figures follow from its sides."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest
import trimesh

SIDES = (0.10, 0.06, 0.04)
PIPELINE = "scan: {unit: mm, noise_std: 0 mm, up: 0 0 1}\npoints: {corner: 50 30 20 mm}\n"
PIPELINE += "inside: {body: {density: 7100 ± 100 kg/m3}}\n"


def _scanmass(*arguments: str, cwd: Path) -> subprocess.CompletedProcess[bytes]:
    return subprocess.run([sys.executable, "-m", "scanmass", *arguments], capture_output=True, cwd=cwd)


def test_a_box_from_file_to_folder(tmp_path: Path) -> None:
    trimesh.creation.box([1000 * side for side in SIDES]).export(tmp_path / "box.stl")
    (tmp_path / "box.yaml").write_text(PIPELINE, encoding="utf-8")
    ended = _scanmass("measure", "box.stl", "--pipeline", "box.yaml", "--json", "--out", "out", cwd=tmp_path)
    assert ended.returncode == 0, ended.stderr.decode()
    assert ended.stderr.decode().splitlines() == ["results written to out"]
    assert ended.stdout == (tmp_path / "out" / "result.json").read_bytes()
    found = json.loads(ended.stdout)
    a, b, c = SIDES
    # A box in float32 STL: its corners are exact to 1e-7 of its size.
    assert found["volume_m3"]["value"] == pytest.approx(a * b * c, rel=1e-6)
    assert found["mass_kg"]["value"] == pytest.approx(7100 * a * b * c, rel=1e-6)
    # 100 kg/m3 is the half-width at 95 %, and the only doubt declared; 2000 draws find the ends within 8 %
    # (standard error of a 2.5 % quantile: sqrt(0.025 x 0.975 / 2000) / 0.0584 = 0.06 of a standard deviation, in 1.96).
    half = 0.5 * (found["mass_kg"]["high"] - found["mass_kg"]["low"])
    assert half == pytest.approx(0.98 * 100 * a * b * c, rel=0.08)
    corner = found["center_of_mass_m"]["offsets"][0]["offset_m"]["value"]
    assert corner == pytest.approx([-a / 2, -b / 2, -c / 2], abs=1e-8)
    assert found["center_of_mass_m"]["height_above_base_m"]["value"] == pytest.approx(c / 2, abs=1e-8)


def test_a_scan_without_a_unit_stops_in_words(tmp_path: Path) -> None:
    trimesh.creation.box([100, 60, 40]).export(tmp_path / "box.stl")
    (tmp_path / "box.yaml").write_text("inside: {body: {density: 7100 kg/m3}}\n", encoding="utf-8")
    ended = _scanmass("measure", "box.stl", "--pipeline", "box.yaml", "--out", "out", cwd=tmp_path)
    assert (ended.returncode, ended.stdout) == (2, b"")
    assert "box.stl" in ended.stderr.decode()
    assert "unit" in ended.stderr.decode()
    assert not (tmp_path / "out").exists()
