"""The journal: results of finished tasks in one append-only file, safe against being killed at any moment.

Layout: 8 bytes of magic, then records. A record is its payload's length (8 bytes, little endian), the payload's CRC-32
(4 bytes) and the payload. The first payload is the identity of the run as JSON; each other one holds a key and named
arrays: texts with their length in front, arrays as type text, shape and raw bytes. Nothing is pickled. A record cut short
or damaged ends the journal: it and what follows are cut off when the file is opened for writing.

One process writes a journal at a time; a second one is refused with the first one's host and number.
"""

from __future__ import annotations

import contextlib
import json
import os
import socket
import struct
import threading
import time
import zlib
from collections.abc import Iterator, Mapping
from pathlib import Path
from types import TracebackType
from typing import Any, BinaryIO

import numpy as np
from filelock import FileLock, Timeout

from lespost.engine.tasks import Result
from lespost.errors import DataError, RequestError

MAGIC = b"LPJRNL1\n"
_HEAD = struct.Struct("<QI")
#: Seconds between two requests that the disk really hold what was written (a crash of the machine, not of the process).
SYNC_INTERVAL = 5.0
#: Types of array that a journal holds: booleans, integers, floats.
_KINDS = "biuf"


def encode(key: str, arrays: Result) -> bytes:
    """The payload of one record. Raises TypeError for arrays of other than plain numbers."""
    parts = [_text(key), struct.pack("<I", len(arrays))]
    for name, value in arrays.items():
        array = np.asarray(value)
        if array.dtype.kind not in _KINDS:
            raise TypeError(f"{name}: a journal holds numbers, not {array.dtype}")
        array = array.astype(array.dtype.newbyteorder("<"), copy=False)
        parts += [_text(name), _text(array.dtype.str), struct.pack(f"<B{array.ndim}Q", array.ndim, *array.shape)]
        parts.append(array.tobytes())
    return b"".join(parts)


def _text(text: str) -> bytes:
    body = text.encode()
    return struct.pack("<I", len(body)) + body


class _Reader:
    """Walks through a payload."""

    def __init__(self, payload: bytes) -> None:
        self.payload, self.at = payload, 0

    def take(self, count: int) -> bytes:
        self.at += count
        return self.payload[self.at - count : self.at]

    def number(self, code: str) -> int:
        return int(struct.unpack("<" + code, self.take(struct.calcsize("<" + code)))[0])

    def text(self) -> str:
        return self.take(self.number("I")).decode()


def decode_key(payload: bytes) -> str:
    """The key of a record's payload."""
    return _Reader(payload).text()


def decode(payload: bytes) -> tuple[str, dict[str, np.ndarray]]:
    """Key and arrays of a record's payload; the arrays are read-only."""
    reader = _Reader(payload)
    key, arrays = reader.text(), {}
    for _ in range(reader.number("I")):
        name, dtype = reader.text(), np.dtype(reader.text())
        shape = tuple(reader.number("Q") for _ in range(reader.number("B")))
        count = int(np.prod(shape, dtype=np.int64))
        arrays[name] = np.frombuffer(reader.take(count * dtype.itemsize), dtype).reshape(shape)
    return key, arrays


class Journal:
    """Results by key, in a file. Use as a context manager; `opened` says in words what was found.

    path: the file. identity: what all its results depend on (input fingerprint, settings, version); a journal of another
    identity is started anew, and so is any with fresh=True.
    Raises RequestError if another process writes to it, DataError if `path` is a file of another kind.
    """

    def __init__(self, path: Path, identity: Mapping[str, Any], fresh: bool = False) -> None:
        self.path = path
        self._identity = json.loads(json.dumps(dict(identity), sort_keys=True))
        self._guard = threading.Lock()
        self._places: dict[str, tuple[int, int]] = {}
        self.dropped_bytes = 0
        path.parent.mkdir(parents=True, exist_ok=True)
        self._lock = FileLock(str(path) + ".lock", thread_local=False)
        self._holder = path.with_name(path.name + ".holder")
        self._acquire()
        try:
            self._file: BinaryIO = open(path, "r+b" if path.exists() else "w+b")  # noqa: SIM115 - closed by close()
            self.opened = self._open(fresh)
        except BaseException:
            self._release()
            raise
        self._synced = time.monotonic()

    def _acquire(self) -> None:
        try:
            self._lock.acquire(timeout=0)
        except Timeout:
            try:
                holder = self._holder.read_text().strip()
            except OSError:
                holder = "another process"
            raise RequestError(
                f"{self.path.parent}: {holder} is writing there; wait for it to end, stop it, or choose another folder "
                "with --out."
            ) from None
        self._holder.write_text(f"process {os.getpid()} on {socket.gethostname()}\n")

    def _release(self) -> None:
        self._holder.unlink(missing_ok=True)
        self._lock.release()

    def _open(self, fresh: bool) -> str:
        size = os.fstat(self._file.fileno()).st_size
        start = self._file.read(len(MAGIC))
        if start and not MAGIC.startswith(start[: len(MAGIC)]):
            raise DataError(f"{self.path} is not a journal of this program: move it away.")
        records = self._scan(size) if start == MAGIC else iter(())
        first = next(records, None)
        if fresh or first is None:
            said = "started anew as asked" if fresh and first is not None else "nothing to resume"
            self._start()
            return said
        try:
            old = json.loads(first[1])
        except ValueError:
            old = {}
        if old != self._identity:
            changed = sorted(k for k in {*old, *self._identity} if old.get(k) != self._identity.get(k))
            self._start()
            return f"started anew: {', '.join(changed)} changed since the earlier run"
        end = first[0] + len(first[1])
        for at, payload in records:
            self._places[decode_key(payload)] = (at, len(payload))
            end = at + len(payload)
        self.dropped_bytes = size - end
        self._file.truncate(end)
        self._file.seek(end)
        cut = f", {self.dropped_bytes} bytes of an unfinished record dropped" if self.dropped_bytes else ""
        return f"resumed: {len(self._places)} results of an earlier run{cut}"

    def _scan(self, size: int) -> Iterator[tuple[int, bytes]]:
        """(position, payload) of each good record, up to the first bad one."""
        at = len(MAGIC)
        while at + _HEAD.size <= size:
            self._file.seek(at)
            length, checksum = _HEAD.unpack(self._file.read(_HEAD.size))
            at += _HEAD.size
            if length > size - at:
                return
            payload = self._file.read(length)
            if zlib.crc32(payload) != checksum:
                return
            yield at, payload
            at += length

    def _start(self) -> None:
        self._places.clear()
        self._file.seek(0)
        self._file.truncate(0)
        self._file.write(MAGIC)
        self._write(json.dumps(self._identity, sort_keys=True).encode())

    def _write(self, payload: bytes) -> int:
        """Append one record in one call to the system; returns where its payload begins."""
        at = self._file.seek(0, os.SEEK_END)
        self._file.write(_HEAD.pack(len(payload), zlib.crc32(payload)) + payload)
        self._file.flush()
        return at + _HEAD.size

    def append(self, key: str, arrays: Result) -> None:
        """Store the result of task `key`; it survives a kill of the process from here on."""
        payload = encode(key, arrays)
        with self._guard:
            self._places[key] = (self._write(payload), len(payload))
            if time.monotonic() - self._synced > SYNC_INTERVAL:
                os.fsync(self._file.fileno())
                self._synced = time.monotonic()

    def get(self, key: str) -> dict[str, np.ndarray]:
        """The result of task `key`. Raises KeyError if there is none."""
        with self._guard:
            at, length = self._places[key]
            self._file.seek(at)
            payload = self._file.read(length)
        return decode(payload)[1]

    def __contains__(self, key: object) -> bool:
        return key in self._places

    def __len__(self) -> int:
        return len(self._places)

    def close(self) -> None:
        """Hand everything to the disk and let others write."""
        if self._file.closed:
            return
        with contextlib.suppress(OSError):
            os.fsync(self._file.fileno())
        self._file.close()
        self._release()

    def __enter__(self) -> Journal:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None) -> None:
        self.close()
