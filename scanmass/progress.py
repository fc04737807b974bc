"""How long work tells where it is: a callable passed in, silent by default."""

from __future__ import annotations

from typing import Protocol


class Progress(Protocol):
    """Called with the stage's name and how much of its work is done."""

    def __call__(self, stage: str, done: int, total: int) -> None:
        """Report ``done`` of ``total`` steps of ``stage``."""


def silent(stage: str, done: int, total: int) -> None:
    """Say nothing."""
