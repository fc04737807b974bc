"""Fields of a pipeline file that are quantities: text with a unit, SI behind the door."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from scanmass import units
from scanmass.doubt import Figure
from scanmass.errors import Note, UserFault
from scanmass.materials import table
from scanmass.pipeline.models_read import Reader, meant, refusal, shown

Vector = tuple[float, float, float]


@dataclass(frozen=True)
class Quantity(Reader):
    """A quantity with its doubt, as a Figure in SI; with ``above_zero`` its interval must not reach zero."""

    dimension: str
    above_zero: bool = False

    @property
    def allowed(self) -> str:
        if self.dimension == "ratio":
            return "a number with its doubt, such as 1 ± 0.0004"
        return f"a number with its doubt and one of {units.allowed(self.dimension)}"

    def read(self, text: str, notes: list[Note]) -> Figure:
        figure, found = units.parse_noted(text, self.dimension)
        if self.above_zero and not float(np.min([figure.value, figure.low])) > 0.0:
            raise refusal(f"{shown(text)} reaches zero", "allowed: above zero, its doubt included")
        notes.extend(found)
        return figure

    def write(self, value: Any) -> str:
        unit = units.system("metric")[self.dimension].replace("%", "")
        return faithful(value, self.dimension, (unit,))


@dataclass(frozen=True)
class Length(Reader):
    """A plain length in metres, not negative; ``above_zero`` where nothing is not enough; ``word`` may stand for it."""

    above_zero: bool = True
    word: str | None = None

    @property
    def allowed(self) -> str:
        least = "above 0" if self.above_zero else "0 or more"
        first = "" if self.word is None else f"{self.word}, or "
        return f"{first}a length {least} with its unit, such as 0.2 mm"

    def read(self, text: str, notes: list[Note]) -> float | str:
        if text == self.word:
            return text
        if self.word is not None and text.isalpha():
            raise refusal(shown(text) + meant(text, [self.word]), self.rule)
        return _plain(text, "length", self.rule, above_zero=self.above_zero)

    def write(self, value: Any) -> str:
        return str(value) if isinstance(value, str) else faithful(Figure.exact(value), "length", ("mm", "m"))


@dataclass(frozen=True)
class Level(Reader):
    """A level of confidence as a fraction, within ``least`` and ``most``."""

    least: float
    most: float

    @property
    def allowed(self) -> str:
        return f"from {100 * self.least:g} % to {100 * self.most:g} %"

    def read(self, text: str, notes: list[Note]) -> float:
        level = _plain(text, "ratio", self.rule, above_zero=True)
        if not self.least <= level <= self.most:
            fix = f" (did you mean '{text} %'?)" if self.least <= level / 100 <= self.most else ""
            raise refusal(shown(text) + fix, self.rule)
        return level

    def write(self, value: Any) -> str:
        return faithful(Figure.exact(value), "ratio", ("%", ""))


@dataclass(frozen=True)
class Direction(Reader):
    """A direction as a unit vector; numbers that already are one are kept to the last digit."""

    @property
    def allowed(self) -> str:
        return "three bare numbers, such as 0 0 1"

    def read(self, text: str, notes: list[Note]) -> Vector:
        direction = units.parse_direction(text)
        given = np.array([float(number) for number in text.split()])
        if abs(float(np.linalg.norm(given)) - 1.0) < 1e-12:
            direction = given
        return _vector(direction)

    def write(self, value: Any) -> str:
        return _numbers(value)


@dataclass(frozen=True)
class Place(Reader):
    """A point in the scan's frame, in metres."""

    @property
    def allowed(self) -> str:
        return "three numbers and a length unit, such as 120 0 300 mm"

    def read(self, text: str, notes: list[Note]) -> Vector:
        return _vector(units.parse_point(text))

    def write(self, value: Any) -> str:
        text = f"{_numbers([float(f'{1000 * number:.12g}') for number in value])} mm"
        return text if _vector(units.parse_point(text)) == value else f"{_numbers(value)} m"


@dataclass(frozen=True)
class MaterialName(Reader):
    """The name of a row of the density table."""

    @property
    def allowed(self) -> str:
        return "a name from 'scanmass materials', such as plaster"

    def read(self, text: str, notes: list[Note]) -> str:
        return table.find(text).name


def _plain(text: str, dimension: str, rule: str, *, above_zero: bool) -> float:
    figure = units.parse(text, dimension)
    if figure.spread != "exact":
        raise refusal(f"{shown(text)} has a doubt of its own", rule)
    value = float(figure.value)
    if above_zero and value == 0.0:
        raise refusal(shown(text), rule)
    return value


def _vector(array: Any) -> Vector:
    x, y, z = (float(number) for number in array)
    return (x, y, z)


def _numbers(values: Any) -> str:
    return " ".join(_number(float(value)) for value in values)


def _number(value: float) -> str:
    """The shortest text that reads back to the same double."""
    return repr(value + 0.0).removesuffix(".0")


def faithful(figure: Figure, dimension: str, names: tuple[str, ...]) -> str:
    """The figure as text: rounded as a report shows it where that reads back to the same figure, else to all digits."""
    for unit in names:
        text = units.show(figure, unit)
        if _reads_back(text, dimension, figure):
            return text
    si = f" {units.allowed(dimension).split(',')[0]}" if dimension != "ratio" else ""
    if figure.spread == "uniform":
        return f"{_number(_float(figure.low))} to {_number(_float(figure.high))}{si}"
    doubt = "" if figure.spread == "exact" else f" ± {_number(2.0 * _float(figure.std))}"
    return f"{_number(_float(figure.value))}{doubt}{si}"


def _reads_back(text: str, dimension: str, figure: Figure) -> bool:
    try:
        return units.parse(text, dimension) == figure
    except UserFault:  # rounded to zero, where zero is refused
        return False


def _float(number: Any) -> float:
    return float(number)
