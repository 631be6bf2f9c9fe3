"""Whether a netCDF file is as long as its own header says, before the library is asked to read it.

A job killed while writing leaves short files. The library reports a short HDF5 file as "HDF error" and reads the
missing end of a short classic file as zeros, so the length is worked out here from the header.
Layouts: HDF5 superblock and netCDF classic format, both from their published specifications (open standards).
"""

from __future__ import annotations

import math
import struct
from dataclasses import dataclass
from pathlib import Path

HDF5_MAGIC = b"\x89HDF\r\n\x1a\n"
_TYPE_BYTES = {1: 1, 2: 1, 3: 2, 4: 4, 5: 4, 6: 8, 7: 1, 8: 2, 9: 4, 10: 8, 11: 8}


@dataclass(frozen=True)
class Extent:
    """expected: bytes the header announces. records, complete_records: of a classic file, -1 if it has none."""

    expected: int
    records: int = -1
    complete_records: int = -1


def file_kind(path: Path) -> str:
    """"hdf5", "classic", "empty" or "other", from the first bytes. Raises OSError if the file cannot be read."""
    with path.open("rb") as stream:
        start = stream.read(8)
    if not start:
        return "empty"
    if start == HDF5_MAGIC:
        return "hdf5"
    if start[:3] == b"CDF" and start[3:4] in (b"\x01", b"\x02", b"\x05"):
        return "classic"
    return "other"


def announced_extent(path: Path) -> Extent | None:
    """What the header of a netCDF file announces; None where it does not say, or the header itself is cut off."""
    size = path.stat().st_size
    length = 1 << 16
    while True:
        with path.open("rb") as stream:
            header = stream.read(length)
        try:
            return _hdf5_extent(header) if header[:8] == HDF5_MAGIC else _classic_extent(header, size)
        except (struct.error, IndexError):
            if length >= size or header[:8] == HDF5_MAGIC:
                return None
            length *= 8


def _hdf5_extent(header: bytes) -> Extent | None:
    version = header[8]
    if version in (0, 1):
        width, start = header[13], 24 + (4 if version == 1 else 0)
        position = 2
    elif version in (2, 3):
        width, start = header[9], 12
        position = 2
    else:
        return None
    if width != 8:
        return None
    return Extent(struct.unpack_from("<Q", header, start + position * width)[0])


class _Cursor:
    """Walks through the header of a classic file."""

    def __init__(self, data: bytes, version: int) -> None:
        self.data, self.at = data, 4
        self.count = ">q" if version == 5 else ">i"
        self.offset = ">i" if version == 1 else ">q"

    def number(self, form: str) -> int:
        value: int = struct.unpack_from(form, self.data, self.at)[0]
        self.at += struct.calcsize(form)
        return value

    def skip(self, count: int) -> None:
        self.at += count + (-count) % 4
        if self.at > len(self.data):
            raise IndexError

    def attributes(self) -> None:
        self.number(">i")
        for _ in range(self.number(self.count)):
            self.skip(self.number(self.count))
            kind = self.number(">i")
            self.skip(self.number(self.count) * _TYPE_BYTES.get(kind, 1))


def _classic_extent(header: bytes, size: int) -> Extent:
    version = header[3]
    cursor = _Cursor(header, version)
    records = cursor.number(cursor.count)
    cursor.number(">i")
    lengths = []
    for _ in range(cursor.number(cursor.count)):
        cursor.skip(cursor.number(cursor.count))
        lengths.append(cursor.number(cursor.count))
    cursor.attributes()
    cursor.number(">i")
    end, record_begin, record_sizes = 0, [], []
    for _ in range(cursor.number(cursor.count)):
        cursor.skip(cursor.number(cursor.count))
        dims = [cursor.number(cursor.count) for _ in range(cursor.number(cursor.count))]
        cursor.attributes()
        kind = cursor.number(">i")
        cursor.number(cursor.count)
        begin = cursor.number(cursor.offset)
        record = bool(dims) and lengths[dims[0]] == 0
        count = math.prod(lengths[d] for d in (dims[1:] if record else dims)) * _TYPE_BYTES.get(kind, 1)
        if record:
            record_begin.append(begin)
            record_sizes.append(count)
        else:
            end = max(end, begin + count)
    if not record_sizes:
        return Extent(max(end, cursor.at))
    padded = record_sizes[0] if len(record_sizes) == 1 else sum(n + (-n) % 4 for n in record_sizes)
    last_padding = 0 if len(record_sizes) == 1 else (-record_sizes[-1]) % 4
    complete = max(0, size + last_padding - min(record_begin)) // padded if padded else 0
    if records < 0:  # "streaming": the number of records follows from the size
        records = complete
    expected = max(end, min(record_begin) + records * padded - (last_padding if records else 0))
    return Extent(expected, records, min(records, complete))
