"""Results that several tests look at, measured once a session."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import cache
from pathlib import Path

import pytest

import scanmass
from scanmass.pipeline.record import MassResult
from tests.pipeline import pebble

ROOT = Path(__file__).parents[2]

Sample = Callable[[str, tuple[str, ...]], MassResult]


@pytest.fixture(scope="session")
def sample() -> Sample:
    """Measure files of sample_scans by a file of pipelines, each pair once."""

    @cache
    def run(pipeline: str, scans: tuple[str, ...]) -> MassResult:
        return scanmass.measure([ROOT / "sample_scans" / scan for scan in scans], ROOT / "pipelines" / pipeline)

    return run


@pytest.fixture(scope="session")
def scans(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with the pebble in millimetres: cloud.ply, view_0.ply to view_3.ply, mesh.off."""
    folder = tmp_path_factory.mktemp("pebble")
    pebble.write_ply(folder / "cloud.ply", 1000.0 * pebble.cloud())
    for k, points in enumerate(pebble.views()):
        pebble.write_ply(folder / f"view_{k}.ply", 1000.0 * points)
    vertices, faces = pebble.mesh()
    pebble.write_off(folder / "mesh.off", 1000.0 * vertices, faces)
    return folder


@pytest.fixture(scope="session")
def view_files(scans: Path) -> Sequence[Path]:
    """The four views of the pebble, a file each."""
    return [scans / f"view_{k}.ply" for k in range(4)]


@pytest.fixture(scope="session")
def of_cloud(scans: Path) -> MassResult:
    """The pebble from one cloud, its noise declared."""
    return scanmass.measure(scans / "cloud.ply", pebble.settings(noise_std="0.1 mm", noise_length="0 mm"))


@pytest.fixture(scope="session")
def of_views(view_files: Sequence[Path]) -> MassResult:
    """The pebble from four views, nothing declared."""
    return scanmass.measure(view_files, pebble.settings())


@pytest.fixture(scope="session")
def of_mesh(scans: Path) -> MassResult:
    """The pebble from its closed mesh, taken as exact, standing on its lowest vertex."""
    return scanmass.measure(scans / "mesh.off", pebble.settings(noise_std="0 mm", up="0 0 1"))
