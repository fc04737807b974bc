"""The material table: look a material up, search it, and take its density with its doubt."""

from __future__ import annotations

import csv
import difflib
import functools
from dataclasses import dataclass
from importlib.resources import files
from typing import Final

from scanmass.doubt import Figure
from scanmass.errors import Note, UserFault

MARKS: Final = {
    "P": "published, read in the source named",
    "Q": "read where the source is quoted",
    "M": "value from memory",
    "T": "common practice, no source",
}
"""How far the range of a row can be traced. A row with one end from memory is marked M as a whole."""

LIGHTEST, HEAVIEST = 5.0, 23_000.0
"""kg/m3: below the lightest foam and above osmium (22 590, value from memory)."""

_SPELLINGS: Final = {"aluminum": "aluminium", "gray": "grey", "mold": "mould", "fiber": "fibre", "-": " ", "_": " "}
"""Taken as the same when a name is looked up."""


@dataclass(frozen=True)
class Material:
    """One row of the table: equally likely anywhere from ``low_kg_m3`` to ``high_kg_m3``.

    ``source`` says where the range comes from and ``mark`` how far that can be traced (see ``MARKS``);
    ``note`` says how the range was chosen and what moves the density.
    """

    name: str
    aliases: tuple[str, ...]
    family: str
    low_kg_m3: float
    high_kg_m3: float
    source: str
    mark: str
    note: str

    def __post_init__(self) -> None:
        if not LIGHTEST < self.low_kg_m3 < self.high_kg_m3 < HEAVIEST:
            raise ValueError(f"{self.name}: no density range: {self.low_kg_m3} to {self.high_kg_m3} kg/m3")
        if self.mark not in MARKS:
            raise ValueError(f"{self.name}: mark {self.mark!r} is none of {', '.join(MARKS)}")
        for field in ("name", "family", "source"):
            if not getattr(self, field):
                raise ValueError(f"{self.name}: {field} is empty")

    @property
    def casting(self) -> bool:
        """Whether porosity may lower it further than its range says."""
        return self.family.startswith("cast ")

    def density(self) -> Figure:
        """The density in kg/m3, alike anywhere in the range.

        >>> find("marble").density().value
        2700.0
        """
        return Figure.uniform(self.low_kg_m3, self.high_kg_m3)

    def origin(self) -> str:
        """Where the range comes from, in words fit to print: a value from memory is never printed as a citation.

        >>> find("marble").origin()
        'published stone and building tables, citing ... (quoted)'
        >>> find("terracotta").origin()
        'value from memory'
        """
        return f"{self.source} (quoted)" if self.mark == "Q" else self.source

    def assumptions(self) -> tuple[Note, ...]:
        """What is assumed when this row is used, for the result's list.

        >>> [note.code for note in find("grey iron").assumptions()]
        ['density-range', 'porosity-lowers-density']
        """
        said = (
            f"{self.name}: any density from {self.low_kg_m3:g} to {self.high_kg_m3:g} kg/m3 is taken as equally likely "
            f"({self.origin()})."
        )
        taken = Note("density-range", said)
        if not self.casting:
            return (taken,)
        pores = f"{self.name}: gas and shrinkage pores in a casting only lower its density, at worst below the range."
        return (taken, Note("porosity-lowers-density", pores))


@functools.cache
def materials() -> tuple[Material, ...]:
    """All rows, in the order of the table.

    >>> len(materials()) >= 60
    True
    """
    text = files("scanmass.materials").joinpath("table.csv").read_text(encoding="utf-8")
    return tuple(_material(row) for row in csv.DictReader(text.splitlines()))


def find(name: str) -> Material:
    """The material of this name or alias; capitals, hyphens and British or American spelling don't matter.

    Raises
    ------
    UserFault
        If there is none; the message names the closest.

    >>> find("Gray Iron").name, find("C83600").name
    ('grey cast iron', 'red brass C83600')
    """
    row = _by_key().get(_key(name))
    if row is None:
        close = _close(name)
        listed = " or ".join(filter(None, (", ".join(close[:-1]), *close[-1:])))
        meant = f"did you mean {listed}? " if close else ""
        remedy = f"{meant}'scanmass materials' lists all {len(materials())}, 'scanmass materials WORD' searches them"
        raise UserFault(f"material '{name}' is not in the table", allowed=remedy)
    return row


def search(word: str) -> tuple[Material, ...]:
    """The rows with all the words of ``word`` in their name, aliases, family or note, in the order of the table.

    >>> [row.name for row in search("alabaster")]
    ['gypsum alabaster', 'calcite alabaster']
    """
    parts = _key(word).split()
    return tuple(row for row in materials() if all(part in _searched(row) for part in parts))


def _material(row: dict[str, str]) -> Material:
    return Material(
        name=row["name"],
        aliases=tuple(alias.strip() for alias in row["aliases"].split(";") if alias.strip()),
        family=row["family"],
        low_kg_m3=float(row["low_kg_m3"]),
        high_kg_m3=float(row["high_kg_m3"]),
        source=row["source"],
        mark=row["mark"],
        note=row["note"],
    )


@functools.cache
def _by_key() -> dict[str, Material]:
    rows: dict[str, Material] = {}
    for row in materials():
        for name in (row.name, *row.aliases):
            other = rows.setdefault(_key(name), row)
            if other is not row:
                raise ValueError(f"{name!r} is both {other.name} and {row.name}")
    return rows


def _close(name: str) -> list[str]:
    """Up to four names that may be meant: those that hold its words or begin like them, else those spelt alike."""
    key, rows = _key(name), _by_key()
    parts = key.split()
    near = [
        known
        for known in sorted(rows, key=len)
        if parts and all(any(word.startswith(part) for word in known.split()) for part in parts)
    ]
    near = near or difflib.get_close_matches(key, list(rows), n=3, cutoff=0.7)
    return list(dict.fromkeys(rows[known].name for known in near))[:4]


def _searched(row: Material) -> str:
    return _key(" ".join((row.name, *row.aliases, row.family, row.note)))


def _key(name: str) -> str:
    key = name.casefold()
    for spelt, same in _SPELLINGS.items():
        key = key.replace(spelt, same)
    return " ".join(key.split())
