"""The parts of a glTF file: its JSON description, its buffers, and the arrays in them."""

from __future__ import annotations

import base64
import binascii
import json
import struct
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any
from urllib.parse import unquote

import numpy as np
import numpy.typing as npt

from scanmass.errors import ScanFault
from scanmass.scans.wording import CUT

COMPONENTS = {5120: "i1", 5121: "u1", 5122: "i2", 5123: "u2", 5125: "u4", 5126: "f4"}
WIDTHS = {"SCALAR": 1, "VEC2": 2, "VEC3": 3, "VEC4": 4}
FINE = {"KHR_mesh_quantization", "KHR_texture_transform", "KHR_materials_unlit"}
"""Required extensions that change nothing here, or are read."""


@dataclass(frozen=True)
class Document:
    """A glTF file, version 2.0: ``tree`` its description, ``binary`` the second chunk of a GLB or None."""

    path: Path
    tree: dict[str, Any]
    binary: bytes | None
    _buffers: dict[int, bytes] = field(default_factory=dict)

    def item(self, kind: str, index: Any) -> dict[str, Any]:
        """Entry ``index`` of the list ``kind`` of the description."""
        entries = self.tree.get(kind, [])
        if not isinstance(index, int) or not 0 <= index < len(entries) or not isinstance(entries[index], dict):
            raise ScanFault(f"the description names entry {index!r} of its {kind}", file=self.path, allowed=CUT)
        entry: dict[str, Any] = entries[index]
        return entry

    def array(self, index: Any) -> npt.NDArray[Any]:
        """The numbers of one accessor (n, width), whole numbers scaled to 0..1 or -1..1 where it says normalized."""
        accessor = self.item("accessors", index)
        if "sparse" in accessor or "bufferView" not in accessor:
            allowed = "export it again without sparse accessors"
            raise ScanFault("the file stores sparse arrays, which are not read", file=self.path, allowed=allowed)
        view = self.item("bufferViews", accessor["bufferView"])
        raw = self._buffer(view["buffer"])
        dtype = np.dtype("<" + COMPONENTS[accessor["componentType"]])
        count, width = accessor["count"], WIDTHS[accessor["type"]]
        start = view.get("byteOffset", 0) + accessor.get("byteOffset", 0)
        stride = view.get("byteStride", dtype.itemsize * width)
        end = start + (count - 1) * stride + dtype.itemsize * width
        if min(count - 1, start, stride) < 0 or max(end, view.get("byteOffset", 0) + view["byteLength"]) > len(raw):
            seen = f"an array of {count} entries ends after its buffer of {len(raw)} bytes"
            raise ScanFault(seen, file=self.path, allowed=CUT)
        array: npt.NDArray[Any] = np.ndarray((count, width), dtype, raw, start, (stride, dtype.itemsize))
        if accessor.get("normalized") and dtype.kind != "f":
            return np.maximum(array / float(np.iinfo(dtype).max), -1.0)
        return array

    def _buffer(self, index: Any) -> bytes:
        if index not in self._buffers:
            entry = self.item("buffers", index)
            raw = self._content(entry.get("uri"))
            if len(raw) < entry["byteLength"]:
                seen = f"a buffer of {entry['byteLength']} bytes is promised, {len(raw)} are there"
                raise ScanFault(seen, file=self.path, allowed=CUT)
            self._buffers[index] = raw
        return self._buffers[index]

    def _content(self, uri: str | None) -> bytes:
        if uri is None:
            if self.binary is None:
                raise ScanFault("the file lacks its binary part", file=self.path, allowed=CUT)
            return self.binary
        if uri.startswith("data:"):
            try:
                return base64.b64decode(uri.partition(",")[2], validate=True)
            except binascii.Error:
                raise ScanFault("a buffer inside the file is no base64", file=self.path, allowed=CUT) from None
        name = unquote(uri)
        beside = self.path.parent / name
        if "://" in name or Path(name).is_absolute() or ".." in Path(name).parts:
            seen = f"a buffer lies elsewhere: {name[:60]}"
            raise ScanFault(seen, file=self.path, allowed="only files beside it are read: export it as GLB")
        if not beside.is_file():
            raise ScanFault(f"its buffer {name[:60]} is missing", file=self.path, allowed="keep it beside the file")
        return beside.read_bytes()


def open_document(path: Path) -> Document:
    """The glTF or GLB file at ``path``.

    Raises
    ------
    ScanFault
        If it is not version 2, cut, or needs an extension that is not read.
    """
    raw = path.read_bytes()
    text, binary = _chunks(raw, path) if raw.startswith(b"glTF") else (raw, None)
    try:
        tree = json.loads(text)
    except (ValueError, RecursionError):
        raise ScanFault("its description is no JSON", file=path, allowed=CUT) from None
    if not isinstance(tree, dict) or not str(tree.get("asset", {}).get("version", "")).startswith("2."):
        raise ScanFault("the file is not glTF version 2", file=path, allowed="export it as glTF 2.0 or GLB")
    strange = set(tree.get("extensionsRequired", [])) - FINE
    if strange:
        seen = f"the file needs the extension {', '.join(sorted(strange))}, which is not read"
        raise ScanFault(seen, file=path, allowed="export it again without compression or instancing")
    return Document(path, tree, binary)


def _chunks(raw: bytes, path: Path) -> tuple[bytes, bytes | None]:
    """The JSON chunk of a GLB and its binary chunk."""
    version, length = struct.unpack_from("<II", raw, 4) if len(raw) >= 20 else (0, 0)
    if version != 2:
        raise ScanFault(f"the file is GLB version {version}", file=path, allowed="only version 2 is read")
    if length > len(raw):
        raise ScanFault(f"the header promises {length} bytes, the file holds {len(raw)}", file=path, allowed=CUT)
    chunks: list[tuple[int, bytes]] = []
    at = 12
    while at + 8 <= length:
        size, kind = struct.unpack_from("<II", raw, at)
        if at + 8 + size > length:
            raise ScanFault(f"a part of {size} bytes is promised, the file ends before", file=path, allowed=CUT)
        chunks.append((kind, raw[at + 8 : at + 8 + size]))
        at += 8 + size
    if not chunks or chunks[0][0] != 0x4E4F534A:
        raise ScanFault("the file lacks its description", file=path, allowed=CUT)
    return chunks[0][1], chunks[1][1] if len(chunks) > 1 and chunks[1][0] == 0x004E4942 else None
