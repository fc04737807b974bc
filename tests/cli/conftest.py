"""A stand-in for the measuring itself, so that the command line is tested alone."""

from __future__ import annotations

import importlib.util
import sys
from collections.abc import Callable
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest
from typer.testing import CliRunner

from scanmass.cli.main import app

_spec = importlib.util.spec_from_file_location("report_fixtures", Path(__file__).parents[1] / "report" / "conftest.py")
assert _spec is not None
assert _spec.loader is not None
_fixtures = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(_fixtures)
document = _fixtures.document
result = _fixtures.result

PIPELINE = "scan: {unit: mm, noise_std: 0.10 mm, noise_length: 25 mm}\ninside: {body: {density: 7100 ± 100 kg/m3}}\n"


@pytest.fixture
def run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[..., Any]:
    """Run ``scanmass`` with arguments in an empty folder that holds ``cube.yaml``."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "cube.yaml").write_text(PIPELINE, encoding="utf-8")
    return lambda *arguments: CliRunner().invoke(app, list(arguments))


@pytest.fixture
def measuring(monkeypatch: pytest.MonkeyPatch) -> Callable[[Callable[..., Any]], None]:
    """Put a function in the place of ``scanmass.pipeline.run.measure``."""

    def put(function: Callable[..., Any]) -> None:
        stand_in = ModuleType("scanmass.pipeline.run")
        stand_in.measure = function  # type: ignore[attr-defined]
        monkeypatch.setitem(sys.modules, "scanmass.pipeline.run", stand_in)

    return put
