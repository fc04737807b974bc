"""What was rehearsed so far: one JSON line a simulated scan, so that an interrupted rehearsal goes on."""

from __future__ import annotations

import json
import os
from pathlib import Path
from typing import Any

from scanmass.errors import UserFault

Plain = dict[str, Any]
SCHEMA = "scanmass/rehearsal-ledger/1"


class Ledger:
    """The entries of ``path`` by the number of their scan; ``add`` puts one down at once.

    Raises
    ------
    UserFault
        If the file belongs to another result, seed or version (``key``), or is no ledger, unless ``again``.
    """

    def __init__(self, path: Path, key: str, seed: int, *, again: bool = False) -> None:
        self.path = path
        self._head = {"schema": SCHEMA, "key": key, "seed": seed}
        self.entries: dict[int, Plain] = {}
        lines = [] if again or not path.exists() else path.read_bytes().split(b"\n")
        # What follows the last end of line was cut off while it was written.
        if len(lines) > 1:
            self._read([line for line in lines[:-1] if line])
        self._rewrite()

    def _read(self, lines: list[bytes]) -> None:
        remedy = "give --again to start anew"
        try:
            head, *entries = [json.loads(line) for line in lines]
            if head["schema"] != SCHEMA:
                raise ValueError
            if head != self._head:
                which = "seed" if head["key"] == self._head["key"] else "result or version of scanmass"
                seen = f"it holds {len(entries)} simulated scans of another {which}"
                if which == "seed":
                    remedy = f"give --seed {head['seed']} to go on with them, or --again to start anew"
                raise UserFault(seen, file=self.path, allowed=remedy)
            self.entries = {int(entry["scan"]): entry for entry in entries}
        except (ValueError, KeyError, TypeError) as fault:
            raise UserFault("this is no ledger of a rehearsal", file=self.path, allowed=remedy) from fault

    def _rewrite(self) -> None:
        partial = self.path.with_name(f".{self.path.name}.partial")
        partial.write_bytes(b"".join(_line(row) for row in (self._head, *self.entries.values())))
        partial.replace(self.path)

    def add(self, entry: Plain) -> None:
        """Put down one simulated scan; it is on the disk when this returns."""
        self.entries[int(entry["scan"])] = entry
        with self.path.open("ab") as file:
            file.write(_line(entry))
            file.flush()
            os.fsync(file.fileno())


def _line(row: Plain) -> bytes:
    return (json.dumps(row, allow_nan=False, ensure_ascii=False) + "\n").encode()
