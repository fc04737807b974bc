"""Random streams that depend on the seed, the stage and an index, and on nothing else."""

from __future__ import annotations

import zlib

import numpy as np


def stream(seed: int, stage: str, index: int = 0) -> np.random.Generator:
    """The generator of one stage: the same whatever ran before it, or beside it.

    >>> stream(0, "replicates").random() == stream(0, "replicates").random()
    True
    >>> stream(0, "replicates").random() == stream(0, "replicates", 1).random()
    False
    """
    return np.random.default_rng([seed, zlib.crc32(stage.encode()), index])
