"""Corners of triangles that repeat the very same coordinates, found in one pass."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from numba import njit

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


def shared(points: FloatArray) -> tuple[FloatArray, IntArray]:
    """The different points among (n, 3), in the order of their first coming, and which of them each point is (n,).

    Points are equal when all three coordinates are; -0 equals 0. A million take 0.1 s, where sorting takes two.

    >>> points, which = shared(np.array([[0, 0, 1.0], [2, 0, 0], [-0.0, 0, 1]]))
    >>> points.tolist(), which.tolist()
    ([[0.0, 0.0, 1.0], [2.0, 0.0, 0.0]], [0, 1, 0])
    """
    plain = np.ascontiguousarray(points + 0.0)
    slots = np.full(1 << int(2 * len(plain) + 1).bit_length(), -1, np.int64)
    firsts, which = np.empty(len(plain), np.int64), np.empty(len(plain), np.int64)
    found = int(_find(plain.view(np.uint64), slots, firsts, which))
    return plain[firsts[:found]], which


@njit(cache=True)
def _find(bits, slots, firsts, which):  # type: ignore[no-untyped-def]
    """Numbers the different rows of ``bits``: a table of open addresses, under half full."""
    mask = np.uint64(len(slots) - 1)
    found = 0
    for i in range(len(bits)):
        a, b, c = bits[i, 0], bits[i, 1], bits[i, 2]
        mixed = (
            a * np.uint64(0x9E3779B97F4A7C15) + b * np.uint64(0xC2B2AE3D27D4EB4F) + c * np.uint64(0x165667B19E3779F9)
        )
        # Single-precision coordinates end in zeros: bring the upper half down.
        mixed ^= mixed >> np.uint64(32)
        mixed *= np.uint64(0xD6E8FEB86659FD93)
        mixed ^= mixed >> np.uint64(32)
        at = mixed & mask
        while True:
            known = slots[at]
            if known < 0:
                slots[at] = found
                firsts[found] = i
                which[i] = found
                found += 1
                break
            j = firsts[known]
            if bits[j, 0] == a and bits[j, 1] == b and bits[j, 2] == c:
                which[i] = known
                break
            at = (at + np.uint64(1)) & mask
    return found
