"""Faults the package raises, and the notes a result carries."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path


class ScanmassError(Exception):
    """Base of every fault raised on purpose."""


class UserFault(ScanmassError):
    """The input cannot be used; the message says where, what was seen and what is allowed (exit code 2)."""

    def __init__(self, seen: str, *, file: str | Path | None = None, allowed: str | None = None) -> None:
        self.file = None if file is None else Path(file).name
        self.seen = seen
        self.allowed = allowed
        where = "" if self.file is None else f"{self.file}: "
        remedy = "" if allowed is None else f"; {allowed}"
        super().__init__(f"{where}{seen}{remedy}")


class ScanFault(UserFault):
    """A scan file that cannot be read, or holds something that cannot be measured."""


class Declined(UserFault):
    """A figure that cannot be given honestly from this input; ``allowed`` says what would settle it."""


class PipelineFault(UserFault):
    """All the faults of one pipeline file, a line each: ``FILE:LINE: key: what was seen; what is allowed``."""

    def __init__(self, faults: Iterable[str]) -> None:
        self.faults = tuple(faults)
        super().__init__("\n".join(self.faults))


@dataclass(frozen=True)
class Note:
    """An assumption or a warning that a result lists: a stable code and a sentence for people."""

    code: str
    text: str
