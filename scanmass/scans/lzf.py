"""The LZF compression of binary_compressed PCD files: a byte under 32 begins a run of literals, others a copy."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from numba import njit

MOST_GROWTH = 88
"""Three bytes copy 264 at the most, so nothing can unpack to more than 88 times its size."""


@njit(cache=True)
def _unpack(packed, out):  # type: ignore[no-untyped-def]
    at, end = 0, 0
    while at < len(packed):
        control = int(packed[at])
        at += 1
        if control < 32:
            run = control + 1
            if at + run > len(packed) or end + run > len(out):
                return -1
            out[end : end + run] = packed[at : at + run]
            at += run
            end += run
            continue
        run = (control >> 5) + 2
        if run == 9:
            if at >= len(packed):
                return -1
            run += int(packed[at])
            at += 1
        if at >= len(packed):
            return -1
        source = end - ((control & 31) << 8) - int(packed[at]) - 1
        at += 1
        if source < 0 or end + run > len(out):
            return -1
        # A copy may run into what it writes: byte by byte.
        for k in range(run):
            out[end + k] = out[source + k]
        end += run
    return end


def unpacked(packed: npt.NDArray[np.uint8], size: int) -> npt.NDArray[np.uint8] | None:
    """The ``size`` bytes that ``packed`` holds, or None where it holds something else.

    >>> unpacked(np.frombuffer(b"\\x01ab\\x60\\x01", np.uint8), 7).tobytes()
    b'abababa'
    """
    if size > MOST_GROWTH * len(packed):
        return None
    out = np.empty(size, np.uint8)
    return out if _unpack(packed, out) == size else None
