"""Silence for libraries that print from C++ to the process's standard output."""

from __future__ import annotations

import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager


@contextmanager
def quiet() -> Iterator[None]:
    """Send file descriptor 1 to nowhere while the block runs: results alone go to stdout."""
    sys.stdout.flush()
    try:
        kept = os.dup(1)
    except OSError:  # the process was started without a standard output
        yield
        return
    nowhere = os.open(os.devnull, os.O_WRONLY)
    try:
        os.dup2(nowhere, 1)
        yield
    finally:
        os.dup2(kept, 1)
        os.close(kept)
        os.close(nowhere)
