"""The pipeline file: every fault at once, each with its line, or the settings of a measurement."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from scanmass.errors import Note, PipelineFault
from scanmass.pipeline.file_echo import QuantityRow, effective_text, quantities, sha256
from scanmass.pipeline.file_faults import model_faults
from scanmass.pipeline.file_yaml import LONGEST, Draft, Fault, read_mapping, read_yaml
from scanmass.pipeline.models import Pipeline
from scanmass.units import metres_per

__all__ = ["QuantityRow", "effective_text", "load", "quantities", "sha256", "with_options"]


def load(source: str | Path | Mapping[str, Any] | Pipeline) -> Pipeline:
    """The settings of a pipeline file, or of a dict of the same shape; a Pipeline is handed on as it is.

    Parameters
    ----------
    source
        Path of a YAML file, or the blocks as a mapping; quantities are texts with their unit in both.

    Raises
    ------
    PipelineFault
        With everything that is wrong, a line each: ``FILE:LINE: key: what was seen; what is allowed``.
        For a mapping, ``pipeline: key: ...``.

    >>> pipeline = load({"scan": {"unit": "mm"}, "inside": {"body": {"density": "1250 ± 60 kg/m3"}}})
    >>> pipeline.inside.body.density.std
    30.0
    >>> load({"inside": {"body": {"density": "1250"}}})
    Traceback (most recent call last):
    ...
    scanmass.errors.PipelineFault: pipeline: inside.body.density: ...
    """
    if isinstance(source, Pipeline):
        return source
    if isinstance(source, Mapping):
        return _settings("pipeline", read_mapping(source))
    return _settings(" ".join(str(source).split()), _read_file(source))


def with_options(pipeline: Pipeline, *, unit: str | None = None, replicates: int | None = None) -> Pipeline:
    """The settings with what was given beside the file, under the same rules; a unit must agree with the file's.

    Raises
    ------
    PipelineFault
        ``options: key: what was seen; what is allowed``.

    >>> with_options(load({"inside": {"body": {"density": "1 g/cm3"}}}), unit="mm", replicates=500).bounds.replicates
    500
    """
    blocks: Any = read_yaml(effective_text(pipeline)).tree
    blocks["scan"]["unit"] = pipeline.scan.unit if unit is None else unit
    blocks["bounds"]["replicates"] = pipeline.bounds.replicates if replicates is None else replicates
    changed = _settings("options", read_mapping(blocks))
    told, given = pipeline.scan.unit, changed.scan.unit
    if told is not None and given is not None and metres_per(told) != metres_per(given):
        fault = Fault(
            ("scan", "unit"), f"'{given}' is given, and the file says '{told}'", "make them agree, or give one"
        )
        raise PipelineFault([fault.text("options")])
    changed._assumptions = pipeline.assumptions
    return changed


def _settings(name: str, draft: Draft) -> Pipeline:
    """The settings of a draft, or every fault of it under the file's ``name``."""
    notes: list[Note] = []
    faults = list(draft.faults)
    pipeline = None
    if not faults or draft.tree is not None:
        try:
            pipeline = Pipeline.model_validate(draft.tree, context=notes)
        except ValidationError as error:
            faults += model_faults(error.errors(include_url=False), draft)
    if faults or pipeline is None:
        faults.sort(key=lambda fault: fault.line or 0)
        raise PipelineFault(dict.fromkeys(fault.text(name) for fault in faults))
    pipeline._assumptions = tuple(dict.fromkeys(notes))
    return pipeline


def _read_file(source: str | Path) -> Draft:
    """The draft of a file; what keeps it from being read is a fault of its first line."""
    if "\n" in str(source):
        return _unreadable("YAML text where a path is wanted", "give a path, or a dict")
    try:
        with Path(source).open("rb") as file:
            data = file.read(LONGEST + 1)
    except FileNotFoundError:
        return _unreadable("there is no such file", "give the path of a pipeline file")
    except IsADirectoryError:
        return _unreadable("this is a folder", "give the path of a pipeline file")
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or error
        return _unreadable(f"it cannot be opened ({reason})", "give the path of a pipeline file")
    if data[:2] in (b"\xff\xfe", b"\xfe\xff"):
        return _unreadable("the text is UTF-16", "save it as UTF-8")
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        if error.start > LONGEST - 4 > 0:
            return _too_long()
        line = data.count(b"\n", 0, error.start) + 1
        return _unreadable(f"byte 0x{data[error.start]:02X} is not UTF-8", "save it as UTF-8", line)
    return read_yaml(text) if len(data) <= LONGEST else _too_long()


def _too_long() -> Draft:
    return _unreadable(f"longer than {LONGEST // 1000} kB", "a pipeline file is a page of text; is this the scan?")


def _unreadable(seen: str, allowed: str, line: int = 1) -> Draft:
    return Draft(faults=[Fault((), seen, allowed, line)])
