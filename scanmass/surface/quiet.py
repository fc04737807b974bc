"""Silence for libraries that print from C++ to the process's own streams."""

from __future__ import annotations

import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager


@contextmanager
def quiet() -> Iterator[None]:
    """Send file descriptors 1 and 2 to nowhere while the block runs.

    Reconstruction prints thousands of lines of its own to both. Keep only the call itself in the block: a fault
    raised in it is an exception, and is told as any other.
    """
    sys.stdout.flush()
    sys.stderr.flush()
    kept = {number: copy for number in (1, 2) if (copy := _copy(number)) is not None}
    nowhere = os.open(os.devnull, os.O_WRONLY)
    try:
        for number in kept:
            os.dup2(nowhere, number)
        yield
    finally:
        for number, copy in kept.items():
            os.dup2(copy, number)
            os.close(copy)
        os.close(nowhere)


def _copy(number: int) -> int | None:
    """A copy of a descriptor, or None where the process was started without it."""
    try:
        return os.dup(number)
    except OSError:
        return None
