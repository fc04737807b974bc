"""What a result folder holds is read back as it was written, and nothing else is read."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from scanmass.errors import UserFault
from scanmass.pipeline.record import MassResult
from scanmass.report.ply import read_removed, read_surface, write_removed, write_surface
from scanmass.report.tables import read_state, write_state


def test_the_surface(result: MassResult, tmp_path: Path) -> None:
    write_surface(tmp_path / "surface.ply", result.products.surface)
    read = read_surface(tmp_path / "surface.ply")
    for name in ("vertices", "faces", "inferred"):
        np.testing.assert_array_equal(getattr(read, name), getattr(result.products.surface, name))


def test_what_was_removed(result: MassResult, tmp_path: Path) -> None:
    write_removed(tmp_path / "removed.ply", result.products.removed)
    read = read_removed(tmp_path / "removed.ply")
    for name in ("points", "count", "reason"):
        np.testing.assert_array_equal(getattr(read, name), getattr(result.products.removed, name))


def test_the_state(tmp_path: Path) -> None:
    write_state(tmp_path / "state.npz", {"places": np.arange(6.0).reshape(2, 3)})
    read = read_state(tmp_path / "state.npz")
    np.testing.assert_array_equal(read["places"], np.arange(6.0).reshape(2, 3))


def test_others_files(result: MassResult, tmp_path: Path) -> None:
    surface, removed = tmp_path / "surface.ply", tmp_path / "removed.ply"
    write_surface(surface, result.products.surface)
    write_removed(removed, result.products.removed)
    for read, path in ((read_surface, removed), (read_removed, surface)):
        with pytest.raises(UserFault, match=f"{path.name}: this was not written by scanmass, or was changed"):
            read(path)
    whole = surface.read_bytes()
    for data in (b"", b"ply\n", whole[:-1], whole.replace(b"comment scanmass: ", b"comment else: ", 1)):
        surface.write_bytes(data)
        with pytest.raises(UserFault, match="not written by scanmass, or was changed"):
            read_surface(surface)
    state = tmp_path / "state.npz"
    for data in (b"", b"PK", whole):
        state.write_bytes(data)
        with pytest.raises(UserFault, match=r"state\.npz: this is not the state of a scanmass result"):
            read_state(state)
    np.savez(state, state_version=99)
    with pytest.raises(UserFault, match="of version 99, and this scanmass reads 2; measure the scan again"):
        read_state(state)
