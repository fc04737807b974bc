"""The settings of a measurement: one frozen block per stage, SI inside, every default in sight.

``scanmass check --keys`` and the README print from these models, so the descriptions here are for users.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Annotated, Any, Literal, Self

from pydantic import Field, GetCoreSchemaHandler, PrivateAttr, model_validator
from pydantic_core import CoreSchema, core_schema

from scanmass.doubt import Figure
from scanmass.errors import Note
from scanmass.pipeline.models_block import Block
from scanmass.pipeline.models_certificate import CertificateBlock
from scanmass.pipeline.models_poses import GivenPose, PoseText
from scanmass.pipeline.models_quantities import (
    Direction,
    Length,
    Level,
    MaterialName,
    Place,
    Quantity,
    Vector,
)
from scanmass.pipeline.models_read import OneOf, UnitName, Whole, Words, meant, refusal, shown

Frames = Literal["shared", "own"]
Switch = Literal["auto", "none"]
Support = Literal["auto", "turntable", "none"]
UndersideWord = Literal["seen", "flat", "unknown"]
UndersideKind = Literal["seen", "flat", "hollow", "unknown"]

LATER = {
    "inside.layers": "layers of other materials are",
    "inside.inserts": "inserts are",
    "weighings": "weighings are",
    "decisions": "decisions are",
}
"""Keys of the contract that this version refuses in its own words, rather than as unknown."""


class Object(Block):
    """What was scanned. Carried into the result; nothing is computed from it."""

    name: Annotated[str, Words()] | None = Field(
        default=None, description="What the object is called in the result.", examples=["heron"]
    )
    id: Annotated[str, Words()] | None = Field(
        default=None, description="Inventory, drawing or heat number, kept letter by letter.", examples=["1987-14"]
    )


class Scan(Block):
    """How the numbers of the scan are to be read, and how good they are."""

    unit: Annotated[str, UnitName()] | None = Field(
        default=None,
        description="Length unit of the coordinates. Needed here or as --unit; never guessed.",
        examples=["mm"],
    )
    frames: Annotated[Frames, OneOf.of(Frames)] = Field(
        default="shared",
        description="Several views: shared = already in one coordinate frame; own = each in its own, to be aligned to "
        "the first.",
        examples=["own"],
    )
    poses: dict[Annotated[str, Words()], Annotated[GivenPose, PoseText()]] = Field(
        default={},
        description="Pose of each view, by its file name (or FILE: VIEW where a file holds several), where another "
        "program aligned them; the result is in the frame of the first scan.",
        examples=["{front.ply: 1 0 0 0 0 0 0 mm, back.ply: 0 0 1 0 12.5 0 3 mm}"],
    )
    up: Annotated[Vector, Direction()] | None = Field(
        default=None,
        description="Which way is up in the frame of the scan. Without it: away from the support, if one is found.",
        examples=["0 0 1"],
    )
    scale: Annotated[Figure, Quantity("ratio", above_zero=True)] | None = Field(
        default=None,
        description="True length over scanned length, its doubt from the scanner's certificate. Without it: taken as "
        "exactly 1, and listed as assumed.",
        examples=["1 ± 0.0004"],
    )
    noise_std: Annotated[float, Length(above_zero=False)] | None = Field(
        default=None,
        description="Error of the scanned surface, one standard deviation; of several views, the part they share. "
        "0 mm for a CAD model.",
        examples=["0.10 mm"],
    )
    noise_length: Annotated[float, Length(above_zero=False)] | None = Field(
        default=None,
        description="How far errors of neighbouring points go together: l in exp(-(d/l)^2/2), d their distance; 0 mm "
        "where each point errs by itself. Round up.",
        examples=["25 mm"],
    )
    certificate: CertificateBlock = Field(default=CertificateBlock())

    @model_validator(mode="after")
    def _noise_has_its_size(self) -> Self:
        if self.noise_length is not None and self.noise_std is None and self.certificate.PF is None:
            raise refusal("given without noise_std", "declare noise_std too, or certificate.PF", "noise_length")
        return self


class Clean(Block):
    """What is taken away before measuring. Every removed point is written out with its reason."""

    support: Annotated[Support, OneOf.of(Support)] = Field(
        default="auto",
        description="auto = find and remove table or floor, or a turntable; turntable = also the disc on a table; "
        "none = leave all.",
        examples=["none"],
    )
    outliers: Annotated[Switch, OneOf.of(Switch)] = Field(
        default="auto",
        description="auto = remove stray points and clutter; none = keep every point.",
        examples=["none"],
    )


class Hollow(Block):
    """An underside that is open to a known depth."""

    hollow: Annotated[float, Length()] = Field(
        description="The underside is open: depth of the hollow above the contact plane.", examples=["30 mm"]
    )


class _Underside:
    """Reads ``underside``: a word, or the block of a hollow."""

    words = OneOf.of(UndersideWord)
    allowed = f"{words.allowed} | {{hollow: DEPTH}}"

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_wrap_validator_function(self._read, handler.generate_schema(Hollow))

    def _read(self, given: Any, hollow: core_schema.ValidatorFunctionWrapHandler) -> Any:
        if isinstance(given, Mapping):
            return hollow(given)
        if isinstance(given, str) and given.strip() == "hollow":
            raise refusal("'hollow' without its depth", "write {hollow: 30 mm}")
        if given not in self.words.words:
            word = given if isinstance(given, str) else ""
            raise refusal(shown(given) + meant(word, (*self.words.words, "hollow")), f"allowed: {self.allowed}")
        return given

    def write(self, value: Any) -> str:
        """The text that reads back to this value."""
        if isinstance(value, Hollow):
            return f"{{hollow: {Length().write(value.hollow)}}}"
        return str(value)


class Surface(Block):
    """How the closed surface that is weighed is made."""

    resolution: Annotated[Literal["auto"] | float, Length(word="auto")] = Field(
        default="auto",
        description="Edge length of the triangles. auto = from the spacing of the points.",
        examples=["2 mm"],
    )
    underside: Annotated[UndersideWord | Hollow, _Underside()] = Field(
        default="unknown",
        description="seen = it was scanned; flat = closed by the plane it stands on; unknown = its least and greatest "
        "shape widen the bounds.",
        examples=["flat"],
    )

    @property
    def underside_kind(self) -> UndersideKind:
        """The underside as one word."""
        return "hollow" if isinstance(self.underside, Hollow) else self.underside

    @property
    def hollow_depth(self) -> float | None:
        """Depth of a hollow underside in metres, else None."""
        return self.underside.hollow if isinstance(self.underside, Hollow) else None


class Body(Block):
    """What the body is made of: exactly one of the keys."""

    material: Annotated[str, MaterialName()] | None = Field(
        default=None, description="A material of the density table ('scanmass materials').", examples=["plaster"]
    )
    density: Annotated[Figure, Quantity("density")] | None = Field(
        default=None, description="The density itself, with its doubt.", examples=["1250 ± 60 kg/m3"]
    )

    @model_validator(mode="before")
    @classmethod
    def _is_body(cls, given: Any) -> Any:
        allowed = "write {material: NAME} or {density: 1250 ± 60 kg/m3}"
        if given == "empty":
            raise refusal("'empty' is not available in this version", allowed)
        if given is None or given == "" or given == {}:
            raise refusal("nothing", allowed)
        if isinstance(given, str):
            key = "density" if given.strip()[:1].isdigit() else "material"
            raise refusal(shown(given), f"write {{{key}: {given.strip()}}}")
        if not isinstance(given, Mapping):
            raise refusal(shown(given), allowed)
        if given.get("material") is not None and given.get("density") is not None:
            raise refusal("both material and density", "give one of them")
        return given

    @model_validator(mode="after")
    def _has_one(self) -> Self:
        if self.material is None and self.density is None:
            raise refusal("neither material nor density", "give one of them")
        return self


class Inside(Block):
    """What fills the surface."""

    body: Body = Field(description="What the body is made of: one of the two keys below.")


class Bounds(Block):
    """How sure the bounds are, and how they are sampled."""

    level: Annotated[float, Level(0.5, 0.999)] = Field(
        default=0.95, description="How often the stated bounds hold the true value.", examples=["95 %"]
    )
    replicates: Annotated[int, Whole(200, 100_000)] = Field(
        default=2000, description="Number of bootstrap replicates the bounds are drawn from.", examples=["2000"]
    )

    @model_validator(mode="after")
    def _tails_hold_replicates(self) -> Self:
        needed = math.ceil(round(2.0 / (1.0 - self.level), 6))
        if self.replicates < needed:
            level = f"{100 * self.level:g} %"
            raise refusal(
                f"{self.replicates} leave less than one beyond each bound at {level}",
                f"at least {needed}, or a lower level",
                "replicates",
            )
        return self


class Pipeline(Block):
    """All the settings of one measurement.

    ``assumptions`` lists what had to be assumed in reading them; two pipelines are equal if their settings are.
    """

    object: Object = Field(default=Object())
    scan: Scan = Field(default=Scan())
    points: dict[Annotated[str, Words()], Annotated[Vector, Place()]] = Field(
        default={},
        description="Features people can find on the object, by name, in the frame of the scan; the centre of mass is "
        "also given from them.",
        examples=["{left wing tip: 120 0 300 mm}"],
    )
    clean: Clean = Field(default=Clean())
    surface: Surface = Field(default=Surface())
    inside: Inside
    bounds: Bounds = Field(default=Bounds())
    _assumptions: tuple[Note, ...] = PrivateAttr(default=())

    @model_validator(mode="before")
    @classmethod
    def _points_are_told_apart(cls, given: Any) -> Any:
        if not isinstance(given, Mapping) or "points" not in given:
            return given
        points = given["points"]
        if points is None or points == "":
            return {**given, "points": {}}
        names = [str(name).strip() for name in points] if isinstance(points, Mapping) else []
        twice = [name for k, name in enumerate(names) if name in names[:k]]
        if twice:
            raise refusal(f"two points are called '{twice[0]}'", "give each point a name of its own", "points")
        return given

    @property
    def assumptions(self) -> tuple[Note, ...]:
        """What had to be assumed in reading the settings."""
        return self._assumptions

    def __eq__(self, other: Any) -> bool:
        """Equal settings, whatever was assumed in reading them."""
        return isinstance(other, Pipeline) and bool(self.__dict__ == other.__dict__)

    __hash__ = None  # type: ignore[assignment]
