"""Replicates as a Parquet table, and the state of a run as arrays for the commands that go on from it."""

from __future__ import annotations

import zipfile
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from scanmass.errors import UserFault

STATE_VERSION = 2
"""In every ``state.npz`` as ``state_version``: a reader refuses one it does not know. 2: samples, scanner places."""

_AGAIN = "measure the scan again with this version, with --out"
_ZIP_EPOCH = (1980, 1, 1, 0, 0, 0)


def write_replicates(path: Path, columns: Mapping[str, npt.NDArray[np.float64]]) -> None:
    """Write one row a replicate, one column a figure, in SI, doubles.

    Raises
    ------
    ValueError
        If the columns differ in length.
    """
    import pyarrow as pa
    import pyarrow.parquet as pq

    lengths = {name: np.shape(column) for name, column in columns.items()}
    if any(len(shape) != 1 for shape in lengths.values()) or len(set(lengths.values())) > 1:
        raise ValueError(f"replicates must be columns of one length, got {lengths}")
    table = pa.table({name: pa.array(np.asarray(column, np.float64)) for name, column in columns.items()})
    pq.write_table(table, path, compression="zstd", use_dictionary=False)


def write_state(path: Path, arrays: Mapping[str, npt.NDArray[Any]]) -> None:
    """Write arrays as an ``.npz`` without pickles; the same arrays give the same bytes.

    Raises
    ------
    ValueError
        If an array holds Python objects.
    """
    members = {"state_version": np.array(STATE_VERSION), **arrays}
    with zipfile.ZipFile(path, "w") as archive:
        for name in sorted(members):
            entry = zipfile.ZipInfo(f"{name}.npy", _ZIP_EPOCH)
            entry.compress_type = zipfile.ZIP_DEFLATED
            with archive.open(entry, "w", force_zip64=True) as file:
                np.lib.format.write_array(file, np.asanyarray(members[name]), allow_pickle=False)


def read_state(path: Path) -> dict[str, npt.NDArray[Any]]:
    """The arrays of a ``state.npz``.

    Raises
    ------
    UserFault
        If the file is none, or of a version that this scanmass does not know.
    """
    try:
        with np.load(path, allow_pickle=False) as archive:
            arrays = {name: archive[name] for name in archive.files}
    except (ValueError, EOFError, zipfile.BadZipFile, AttributeError) as fault:
        raise UserFault("this is not the state of a scanmass result", file=path, allowed=_AGAIN) from fault
    found = int(arrays.get("state_version", 0))
    if found != STATE_VERSION:
        seen = f"the state is of version {found}, and this scanmass reads {STATE_VERSION}"
        raise UserFault(seen, file=path, allowed=_AGAIN)
    return arrays
