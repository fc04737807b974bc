"""The one table of readers: which files are read, how they are known, and by which function."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from dataclasses import dataclass, replace
from importlib import import_module
from pathlib import Path

from scanmass.errors import ScanFault
from scanmass.scans.finite import finite_only
from scanmass.scans.scan import Scan

SNIFF = 4096
"""A format is known by something in its first bytes; comments may come before it."""


@dataclass(frozen=True)
class Format:
    """A format: its name for people, suffixes, how its files begin (empty: not known by that), and its reader."""

    name: str
    suffixes: tuple[str, ...]
    magic: tuple[bytes, ...]
    reader: str

    def read(self, path: Path) -> Scan:
        """Read a file of this format. The reader's module is imported now: some bring large libraries."""
        module, function = self.reader.split(":")
        read: Callable[[Path], Scan] = getattr(import_module(f"scanmass.scans.{module}"), function)
        return read(path)


FORMATS = (
    Format("PLY", (".ply",), (b"ply\n", b"ply\r"), "ply:read_ply"),
    Format("PCD", (".pcd",), (b"# .PCD", b"VERSION"), "pcd:read_pcd"),
    Format("text", (".xyz", ".txt", ".csv", ".pts", ".asc"), (), "text:read_text"),
    Format("OBJ", (".obj",), (), "obj:read_obj"),
    Format("STL", (".stl",), (), "stl:read_stl"),
    Format("OFF", (".off",), (b"OFF", b"COFF", b"NOFF", b"CNOFF"), "off:read_off"),
    Format("GLB", (".glb",), (b"glTF",), "gltf:read_gltf"),
    Format("glTF", (".gltf",), (b"{",), "gltf:read_gltf"),
    Format("LAS", (".las", ".laz"), (b"LASF",), "las:read_las"),
    Format("E57", (".e57",), (b"ASTM-E57",), "e57:read_e57"),
)
SUFFIXES = tuple(suffix for entry in FORMATS for suffix in entry.suffixes)


def read(path: str | Path) -> Scan:
    """The scan in a file, in the file's own unit: ``unit`` is "m" for E57 and glTF, None for all others.

    Its blocks hold finite points only; ``total`` counts the others too.

    Raises
    ------
    ScanFault
        If there is no such file, its format is unknown or not the one its name says, or it cannot be read.
    """
    path = Path(path)
    entry = format_of(path)
    try:
        scan = entry.read(path)
        return replace(finite_only(scan), sha256=digest(path))
    except OSError as error:
        raise ScanFault(f"the file cannot be read ({error.strerror})", file=path, allowed="check its rights") from None


def format_of(path: Path) -> Format:
    """The format of a file by its suffix, checked against how it begins."""
    if path.is_dir():
        raise ScanFault("this is a folder", file=path, allowed="name the scan files in it")
    if not path.exists():
        raise ScanFault("there is no such file", file=path, allowed=f"looked for at {path}")
    if not path.is_file():
        raise ScanFault("this is a pipe or a device, no file", file=path, allowed="save the scan to a file first")
    try:
        with path.open("rb") as stream:
            start = stream.read(SNIFF)
    except OSError as error:
        raise ScanFault(f"the file cannot be read ({error.strerror})", file=path, allowed="check its rights") from None
    if not start:
        raise ScanFault("the file is empty", file=path, allowed="copy or export it again")
    looks = _by_content(start)
    named = next((entry for entry in FORMATS if path.suffix.lower() in entry.suffixes), None)
    if named is None:
        hint = f"; its content looks like {looks.name}: rename it to end in {looks.suffixes[0]}" if looks else ""
        seen = f"the suffix {path.suffix!r} is not known"
        raise ScanFault(seen, file=path, allowed="read are " + " ".join(SUFFIXES) + hint)
    if looks is not None and looks is not named:
        seen = f"the name says {named.name}, the content is {looks.name}"
        raise ScanFault(seen, file=path, allowed=f"rename it to end in {looks.suffixes[0]}")
    if looks is None and named.magic:
        words = " or ".join(dict.fromkeys(repr(mark.decode("ascii").strip()) for mark in named.magic))
        seen = f"the file does not begin like {named.name}"
        raise ScanFault(seen, file=path, allowed=f"it must begin with {words}: copy or export it again")
    return named


def _by_content(start: bytes) -> Format | None:
    text = start.removeprefix(b"\xef\xbb\xbf").lstrip()
    # In PCD and OFF comments may come before the first word.
    words = next((line for line in text.splitlines() if line.strip() and not line.startswith(b"#")), b"").lstrip()
    for entry in FORMATS:
        if entry.name == "PCD":
            if text.startswith(b"# .PCD") or words.startswith((b"VERSION ", b"FIELDS ")):
                return entry
        elif entry.magic and (words if entry.name == "OFF" else text).startswith(entry.magic):
            return entry
    return None


def digest(path: Path) -> str:
    """The SHA-256 of the file's bytes, in hexadecimal."""
    with path.open("rb") as stream:
        return hashlib.file_digest(stream, "sha256").hexdigest()
