"""The benchmarks at small size: they run, both sides do the same work, and no time is judged."""

from __future__ import annotations

from pathlib import Path

import igl
import pytest

from scanmass.density.cells import cut_solid
from scanmass.geometry.polyhedron import polyhedron_moments
from tests.benchmarks import kernels, plain_script, whole_job


def test_kernels_and_peers_find_the_same_body() -> None:
    vertices, faces = kernels.lump(3)
    volume = polyhedron_moments(vertices, faces)[0]
    assert igl.centroid(vertices, faces)[1] == pytest.approx(volume, rel=1e-9)
    assert cut_solid(vertices, faces, cells=16).moments()[0] == pytest.approx(volume, rel=1e-9)
    for _, ours, _, theirs in kernels.rows(2, 16, 1):
        assert ours > 0
        assert theirs > 0


def test_whole_job_and_plain_script_weigh_the_same_scan(tmp_path: Path) -> None:
    figures = whole_job.compare(20_000, 6)
    assert {"scanmass", "plain script"} <= set(figures)
    whole_job.write_scan(tmp_path / "scan.ply", 20_000)
    mass, _ = plain_script.weigh(str(tmp_path / "scan.ply"), 6)
    vertices, faces = kernels.lump(6)
    # The script has no refinement, at depth 6: a few tenths of a per cent.
    assert mass == pytest.approx(7200 * 0.2**3 * polyhedron_moments(vertices, faces)[0], rel=0.01)
