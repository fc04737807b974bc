"""A block of keys of the pipeline file: frozen, and closed to keys it does not know."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from pydantic import BaseModel, ConfigDict, model_validator

from scanmass.pipeline.models_read import refusal, shown


class Block(BaseModel):
    """A block of keys; a block without any key is one of defaults."""

    model_config = ConfigDict(frozen=True, extra="forbid", arbitrary_types_allowed=True)

    @model_validator(mode="before")
    @classmethod
    def _is_block(cls, given: Any) -> Any:
        if given is None or given == "":
            return {}
        if not isinstance(given, Mapping):
            raise refusal(shown(given), f"allowed: a block of keys ({', '.join(cls.model_fields)})")
        return given
