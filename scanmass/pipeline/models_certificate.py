"""The certificate of the scanner, as a block of the pipeline file, in the symbols the certificate itself uses."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Annotated, Any, Self

from pydantic import Field, model_validator

from scanmass.doubt import Figure
from scanmass.errors import Note
from scanmass.pipeline.models_block import Block
from scanmass.pipeline.models_quantities import Length, faithful
from scanmass.pipeline.models_read import Reader, refusal, shown
from scanmass.uncertainty.certificate import Certificate, LengthLimit
from scanmass.units.quantity import NUMBER

_LEAST_DIVISOR = 1000.0
"""Below this the error grows by more than a millimetre in a metre: no scanner is certified so, and L / 300 on a
certificate means micrometres for L in millimetres."""
_GROWS = re.compile(rf"(?:(?P<constant>[^L/]*?)\s*\+\s*)?L\s*/\s*(?P<divisor>{NUMBER})\s*(?P<unit>\S.*)?", re.ASCII)


@dataclass(frozen=True)
class Limit(Length):
    """The size of a limit or of a tested error: a length above zero; a ± before it is understood."""

    @property
    def allowed(self) -> str:
        return "a length above 0 with its unit, such as 0.05 mm, without its sign"

    def read(self, text: str, notes: list[Note]) -> float | str:
        if text.startswith("-"):
            raise refusal(f"{shown(text)} has a sign", f"give its size: {text[1:].strip()}")
        return super().read(_unsigned(text), notes)


@dataclass(frozen=True)
class GrowingLimit(Reader):
    """A limit that may grow with the length L: ``A``, ``A + L/K`` or ``L/K``, K a bare number."""

    @property
    def allowed(self) -> str:
        return "a length, or a length and the share that grows with L, such as 0.06 mm or 0.06 mm + L/20000"

    def read(self, text: str, notes: list[Note]) -> LengthLimit:
        found = _GROWS.fullmatch(_unsigned(text))
        if found is None:
            if "L" in text or re.search(r"/\s*\d", text):
                raise refusal(shown(text), self.rule)
            return LengthLimit(self._constant(text, notes))
        constant, divisor, unit = found.groups()
        if unit is not None:
            raise refusal(
                f"{shown(text)} has '{unit}' after L/{divisor}",
                "write K without a unit, as in 0.06 mm + L/20000, which grows by 0.05 mm in a metre",
            )
        if float(divisor) < _LEAST_DIVISOR:
            fix = "write L/K with L and the limit in one unit"
            if float(divisor) > 0:
                fix += f" (if L/{divisor} means micrometres for L in millimetres, write L/{1000 * float(divisor):.12g})"
                seen = f"{shown(text)} grows by {1000 / float(divisor):.3g} mm in a metre"
            else:
                seen = f"{shown(text)} divides by {divisor}"
            raise refusal(seen, fix)
        return LengthLimit(0.0 if constant is None else self._constant(constant, notes), float(divisor))

    def _constant(self, text: str, notes: list[Note]) -> float:
        return float(Limit().read(text.strip(), notes))

    def write(self, value: Any) -> str:
        constant = faithful(Figure.exact(value.constant), "length", ("mm", "m"))
        if value.divisor is None:
            return constant
        grows = f"L/{value.divisor!r}".removesuffix(".0")
        return grows if value.constant == 0.0 else f"{constant} + {grows}"


class CertificateBlock(Block):
    """What the scanner's certificate states; every figure as a limit, or as the test gave it."""

    PF: Annotated[float, Limit()] | None = Field(
        default=None,
        description="Probing form error of the scanner's certificate (ISO 10360-13, VDI/VDE 2634): a quarter of it is "
        "taken as noise_std, unless that is given or the views show their own.",
        examples=["0.05 mm"],
    )
    PS: Annotated[float, Limit()] | None = Field(
        default=None,
        description="Probing size error: the whole surface may lie too far out or in by up to half of it.",
        examples=["0.03 mm"],
    )
    SD: Annotated[LengthLimit, GrowingLimit()] | None = Field(
        default=None,
        description="Sphere-spacing error, used as E; of both the larger counts.",
        examples=["0.04 mm"],
    )
    E: Annotated[LengthLimit, GrowingLimit()] | None = Field(
        default=None,
        description="Length-measurement error: over the object's length it is the limit of the scale's error, unless "
        "scale is given.",
        examples=["0.06 mm + L/20000"],
    )
    length: Annotated[float, Length()] | None = Field(
        default=None,
        description="The longest length the scanner was tested over; a longer object is warned of.",
        examples=["500 mm"],
    )

    @model_validator(mode="after")
    def _length_of_something(self) -> Self:
        if self.length is not None and self.certificate is None:
            raise refusal("given without an error", "give PF, PS, SD or E too", "length")
        return self

    @property
    def certificate(self) -> Certificate | None:
        """The certificate, or None where the block states no error."""
        if all(error is None for error in (self.PF, self.PS, self.SD, self.E)):
            return None
        return Certificate(self.PF, self.PS, self.SD, self.E, self.length)


def _unsigned(text: str) -> str:
    return re.sub(r"^(±|\+/-)\s*", "", text)
