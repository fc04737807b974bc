"""Files cut and changed at random: each is refused as a scan fault, or read; never anything else, never in bulk."""

from __future__ import annotations

import tracemalloc
from collections.abc import Callable
from pathlib import Path

import laspy
import numpy as np
import pye57
import pytest
import trimesh

from scanmass.errors import ScanFault
from scanmass.scans.load import load

ROUNDS = 60
CLOUDS = ["binary.ply", "ascii.ply", "binary.pcd", "compressed.pcd", "ascii.pcd", "plain.xyz", "counted.pts"]
MESHES = ["m.ply", "m.stl", "m.obj", "m.off", "m.glb"]


@pytest.fixture(scope="module")
def whole_files(open3d_files: Path, ball, tmp_path_factory: pytest.TempPathFactory) -> Callable[[str], bytes]:
    folder = tmp_path_factory.mktemp("whole")
    for name in MESHES:
        trimesh.creation.icosphere(subdivisions=2, radius=50).export(folder / name)
    las = laspy.LasData(laspy.LasHeader(point_format=3, version="1.2"))
    las.x, las.y, las.z = ball.points.T
    for name in ("a.las", "a.laz"):
        las.write(folder / name)
    e57 = pye57.E57(str(folder / "a.e57"), "w")
    columns = {f"cartesian{axis}": ball.points[:, k].copy() for k, axis in enumerate("XYZ")}
    e57.write_scan_raw(columns)
    e57.close()
    return lambda name: (open3d_files if name in CLOUDS else folder).joinpath(name).read_bytes()


def broken(raw: bytes, rng: np.random.Generator, way: int) -> bytes:
    """The file cut anywhere, with bytes of its head or of its whole changed, or a number of its head replaced."""
    changed = bytearray(raw)
    if way == 0:
        return raw[: rng.integers(0, len(raw))]
    if way == 1:
        for place in rng.integers(0, min(400, len(raw)), 2):
            changed[place] = rng.integers(0, 256)
    elif way == 2:
        for place in rng.integers(0, len(raw), 4):
            changed[place] = rng.integers(0, 256)
    else:
        digits = [k for k in range(min(600, len(raw))) if 48 <= raw[k] <= 57]
        place = digits[rng.integers(0, len(digits))] if digits else 0
        changed[place : place + 1] = b"%d" % rng.integers(0, 10 ** int(rng.integers(1, 13)))
    return bytes(changed)


@pytest.mark.parametrize("name", [*CLOUDS, *MESHES, "a.las", "a.laz", "a.e57"])
def test_broken(tmp_path: Path, whole_files: Callable[[str], bytes], name: str) -> None:
    raw = whole_files(name)
    path = tmp_path / ("broken" + Path(name).suffix)
    path.write_bytes(raw)
    if name not in MESHES or name == "m.stl":
        load([path], "mm")
    rng = np.random.default_rng([7, *name.encode()])
    refusals: list[str] = []
    tracemalloc.start()
    try:
        for k in range(ROUNDS):
            path.write_bytes(broken(raw, rng, k % 4))
            try:
                for scan in load([path], "mm"):
                    assert np.isfinite(scan.points()).all()
            except ScanFault as fault:
                refusals.append(str(fault))
        # One block of text, or of packed points, whatever the head promises.
        assert tracemalloc.get_traced_memory()[1] < 80e6
    finally:
        tracemalloc.stop()
    assert len(refusals) > ROUNDS // 4
    assert all(refusal.startswith(path.name + ": ") for refusal in refusals)
