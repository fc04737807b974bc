"""The sizes in a LAS header, checked against the file before anything is made for them."""

from __future__ import annotations

import struct
from pathlib import Path

from scanmass.errors import ScanFault
from scanmass.scans.wording import CUT

RECORD_HEAD, LONG_RECORD_HEAD = 54, 60
LEAST_HEADER = 227
"""Bytes of the headers of versions 1.0 to 1.2; 1.4 has 375."""


def check_header(path: Path) -> None:
    """Refuse a LAS or LAZ file whose header speaks of more than the file holds (ASPRS LAS 1.4, public header block).

    Raises
    ------
    ScanFault
        If the header, its records or the first point lie beyond the end of the file, or before what precedes them.
    """
    size = path.stat().st_size
    with path.open("rb") as stream:
        head = stream.read(375)
        if len(head) < LEAST_HEADER:
            raise ScanFault("the file ends within its header", file=path, allowed=CUT)
        minor = head[25]
        header_size, points_at, records = struct.unpack_from("<HII", head, 94)
        if head[24] != 1 or minor > 4:
            seen = f"the file is LAS version {head[24]}.{minor}"
            raise ScanFault(seen, file=path, allowed="versions 1.0 to 1.4 are read")
        if not LEAST_HEADER <= header_size <= points_at <= size:
            seen = f"the header of {header_size} bytes puts the first point at byte {points_at} of {size}"
            raise ScanFault(seen, file=path, allowed=CUT)
        at = header_size
        for _ in range(records):
            stream.seek(at)
            record = stream.read(RECORD_HEAD)
            at += RECORD_HEAD + (struct.unpack_from("<H", record, 20)[0] if len(record) == RECORD_HEAD else size)
            if at > points_at:
                raise ScanFault(f"{records} header records do not fit before the points", file=path, allowed=CUT)
    if minor == 4 and len(head) == 375:
        _check_long_records(path, size, *struct.unpack_from("<QI", head, 235))
    if head[104] & 0x80:
        _check_chunk_table(path, size, points_at, point_size=struct.unpack_from("<H", head, 105)[0])


def _check_long_records(path: Path, size: int, at: int, records: int) -> None:
    """The records after the points: each says its own length."""
    with path.open("rb") as stream:
        for _ in range(records):
            stream.seek(min(at, size))
            record = stream.read(LONG_RECORD_HEAD)
            at += LONG_RECORD_HEAD
            at += struct.unpack_from("<Q", record, 20)[0] if len(record) == LONG_RECORD_HEAD else size
            if at > size:
                raise ScanFault(f"{records} records after the points do not fit", file=path, allowed=CUT)


def _check_chunk_table(path: Path, size: int, points_at: int, point_size: int) -> None:
    """Compressed points come in chunks that begin with a whole point; a table after them counts the chunks."""
    with path.open("rb") as stream:
        stream.seek(points_at)
        place = stream.read(8)
        table_at = struct.unpack("<q", place)[0] if len(place) == 8 else size
        if table_at == -1:  # the writer could not go back: the place stands at the end
            stream.seek(-8, 2)
            table_at = struct.unpack("<q", stream.read(8))[0]
        stream.seek(table_at if points_at + 8 <= table_at < size else size)
        table = stream.read(8)
    chunks = struct.unpack_from("<I", table, 4)[0] if len(table) == 8 else size
    if chunks * max(point_size, 1) > size:
        raise ScanFault("the table of the compressed points does not fit the file", file=path, allowed=CUT)
