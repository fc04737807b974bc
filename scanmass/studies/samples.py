"""The sample scans: own invented scenarios, ray-cast, each with its truth."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from scanmass.errors import UserFault
from scanmass.progress import Progress, silent
from scanmass.studies import sample_bronze, sample_casting, sample_rotor, sample_stone

SAMPLES: dict[str, Callable[[Path, Progress], list[Path]]] = {
    sample_stone.NAME: sample_stone.write_stone,
    sample_bronze.NAME: sample_bronze.write_bronze,
    sample_casting.MERGED: sample_casting.write_merged,
    sample_casting.VIEWS: sample_casting.write_views,
    sample_casting.NOMINAL: sample_casting.write_nominal,
    sample_rotor.NAME: sample_rotor.write_rotor,
}
"""Each sample's name and what writes its files; NAME.truth.json tells its scenario, files, units and exact figures."""


def write_samples(directory: Path, *, progress: Progress = silent) -> list[Path]:
    """Write every sample scan with its truth into ``directory``, made where it is missing; the files' paths.

    The files are the same at every run. Files of the same names are replaced; others are left alone.

    Raises
    ------
    UserFault
        If ``directory`` is the name of a file.
    """
    if directory.exists() and not directory.is_dir():
        raise UserFault("is a file", file=directory, allowed="give a folder to put the sample scans in")
    directory.mkdir(parents=True, exist_ok=True)
    return [path for write in SAMPLES.values() for path in write(directory, progress)]
