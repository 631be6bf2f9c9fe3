"""Which chunks a zarr store really holds: an absent chunk reads as the fill value and cannot be told from data.

A store may lack a chunk because it was never written (a killed job) or because it is all zeros (writers skip those).
`absent` lists them; `lespost.fields.gaps` judges which is which.
"""

from __future__ import annotations

import itertools
import math
import os
import struct
from pathlib import Path
from typing import Any

import numpy as np

from lespost.fields.zarr_store import ZarrVariable, open_array

_ABSENT = 0xFFFFFFFFFFFFFFFF


def fill_value(variable: ZarrVariable) -> float:
    """The number that absent chunks of the store read as."""
    value = open_array(variable.path, variable.name).fill_value
    return float("nan") if value is None else float(value)


def absent(variable: ZarrVariable) -> np.ndarray:
    """Boolean array over the grid of (inner) chunks: True where the store holds none."""
    array = open_array(variable.path, variable.name)
    outer_shape = variable.shards or variable.chunks
    assert outer_shape is not None and variable.chunks is not None
    outer = tuple(math.ceil(n / c) for n, c in zip(variable.shape, outer_shape, strict=True))
    present = np.zeros(outer, bool)
    base, separator, prefix = _keys(array, variable.path / variable.name)
    for key in _stored_keys(base, separator, len(outer)):
        if all(i < n for i, n in zip(key, outer, strict=True)):
            present[key] = True
    if variable.shards is None:
        return ~present
    ratio = tuple(s // c for s, c in zip(variable.shards, variable.chunks, strict=True))
    inner = tuple(math.ceil(n / c) for n, c in zip(variable.shape, variable.chunks, strict=True))
    missing = np.zeros(tuple(o * r for o, r in zip(outer, ratio, strict=True)), bool)
    for key in itertools.product(*(range(n) for n in outer)):
        block = tuple(slice(k * r, (k + 1) * r) for k, r in zip(key, ratio, strict=True))
        if not present[key]:
            missing[block] = True
            continue
        path = base / (prefix + separator.join(map(str, key)))
        missing[block] = _absent_in_shard(path, math.prod(ratio), _index_at_end(array)).reshape(ratio)
    return missing[tuple(slice(0, n) for n in inner)]


def _keys(array: Any, base: Path) -> tuple[Path, str, str]:
    """Folder that holds the chunk keys, the separator between their numbers, and what stands before them."""
    if array.metadata.zarr_format == 2:
        return base, array.metadata.dimension_separator, ""
    encoding = array.metadata.chunk_key_encoding
    separator = encoding.separator
    if encoding.name == "v2":
        return base, separator, ""
    return (base / "c", "/", "") if separator == "/" else (base, ".", "c.")


def _stored_keys(base: Path, separator: str, ndim: int) -> list[tuple[int, ...]]:
    found: list[tuple[int, ...]] = []
    if not base.is_dir():
        return found
    if separator == "/":
        stack: list[tuple[str, tuple[int, ...]]] = [(str(base), ())]
        while stack:
            folder, key = stack.pop()
            with os.scandir(folder) as entries:
                for entry in entries:
                    if not entry.name.isdigit():
                        continue
                    longer = (*key, int(entry.name))
                    if len(longer) == ndim:
                        found.append(longer)
                    else:
                        stack.append((entry.path, longer))
        return found
    with os.scandir(base) as entries:
        for entry in entries:
            parts = entry.name.removeprefix("c.").split(".")
            if len(parts) == ndim and all(part.isdigit() for part in parts):
                found.append(tuple(map(int, parts)))
    return found


def _index_at_end(array: Any) -> bool:
    codec = array.metadata.codecs[0]
    return "start" not in str(getattr(codec, "index_location", "end")).lower()


def _absent_in_shard(path: Path, count: int, at_end: bool) -> np.ndarray:
    """Chunks whose entry in the shard's index says "not stored"; 16 bytes each (zarr format 3, sharding codec)."""
    length = 16 * count
    with path.open("rb") as stream:
        if at_end:
            stream.seek(0, os.SEEK_END)
            size = stream.tell()
            stream.seek(max(0, size - length - 4))  # 4 bytes of checksum follow the index
        data = stream.read(length)
    if len(data) < length:
        return np.ones(count, bool)
    return np.array([struct.unpack_from("<QQ", data, 16 * i) == (_ABSENT, _ABSENT) for i in range(count)])
