"""A missing system library is said in words, with the packages that hold it."""

from __future__ import annotations

import importlib
from typing import Any

import pytest

from scanmass import libraries
from scanmass.errors import UserFault


def _failing(message: str) -> Any:
    def fail(name: str) -> Any:
        raise ImportError(message)

    return fail


@pytest.mark.parametrize("library", ["libGL.so.1", "libX11.so.6", "libgomp.so.1"])
def test_missing_library_names_the_packages(monkeypatch: pytest.MonkeyPatch, library: str) -> None:
    message = f"{library}: cannot open shared object file: No such file or directory"
    monkeypatch.setattr(importlib, "import_module", _failing(message))
    with pytest.raises(UserFault, match=f"{library}, .* is missing; .* libgl1 libx11-6 libgomp1"):
        libraries.open3d()


def test_another_import_error_stays_what_it_is(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(importlib, "import_module", _failing("No module named 'open3d'"))
    with pytest.raises(ImportError, match="No module named"):
        libraries.open3d()
