"""What every reader yields: a `RawFile` of `RawVariable`s that read slices of themselves, still in the file's own layout.

Values come out decoded (packed integers unpacked with the file's own scale, sentinels made NaN, native byte order) but
not yet permuted, flipped or converted: that is `lespost.fields.canonical`. Joining files in time is `lespost.fields.stack`.
"""

from __future__ import annotations

import threading
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np

#: Magnitude beyond which a number in a file is a fill, never a measurement (default netCDF fill: 9.97e36).
FILL_LIMIT = 1e30
#: A finite fill below this may be a true value (0 above all), so it is never taken for "missing".
SENTINEL_LIMIT = 900.0
#: Longest one-dimensional variable that is read together with a header.
SERIES_LIMIT = 1_000_000


class ReadCounter:
    """Bytes of field values that the readers handed out in this process; tests and progress lines look at it."""

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self.bytes = 0

    def add(self, count: int) -> None:
        """Count `count` more bytes."""
        with self._lock:
            self.bytes += count


counter = ReadCounter()


def decoded_dtype(stored: np.dtype, attrs: Mapping[str, Any]) -> np.dtype:
    """Type of the decoded numbers: float32 stays, packed integers of 16 bits or fewer become float32, all else float64."""
    if stored.kind == "f":
        return np.dtype(np.float32 if stored.itemsize <= 4 else np.float64)
    packed = "scale_factor" in attrs or "add_offset" in attrs
    return np.dtype(np.float32 if packed and stored.itemsize <= 2 else np.float64)


def sentinels(attrs: Mapping[str, Any], integer: bool) -> list[float]:
    """Values that stand for "missing" according to `_FillValue` and `missing_value`.

    A fill of small magnitude (zero above all) in a floating-point variable is never one: true zeros would vanish.
    """
    found = []
    for key in ("_FillValue", "missing_value"):
        for value in np.atleast_1d(attrs.get(key, [])):
            try:
                number = float(value)
            except (TypeError, ValueError):
                continue
            if np.isfinite(number) and (integer or abs(number) >= SENTINEL_LIMIT):
                found.append(number)
    return found


def decode(values: np.ndarray, attrs: Mapping[str, Any]) -> np.ndarray:
    """Stored numbers to real ones, with the scale, offset and sentinels in `attrs` (those of the file read from).

    The result may be `values` itself when nothing is to be done.
    """
    dtype = decoded_dtype(values.dtype, attrs)
    integer = values.dtype.kind in "iu"
    packed = "scale_factor" in attrs or "add_offset" in attrs
    missing = sentinels(attrs, integer) if packed or not integer else []
    mask = None
    for number in missing:
        hit = values == values.dtype.type(number)
        mask = hit if mask is None else mask | hit
    out = values.astype(dtype, copy=False)
    if packed:
        scale, offset = (float(np.ravel(attrs.get(k, d))[0]) for k, d in (("scale_factor", 1.0), ("add_offset", 0.0)))
        out = (out * dtype.type(scale) + dtype.type(offset)).astype(dtype, copy=False)
    if mask is not None and mask.any():
        out = np.array(out, copy=True) if out is values else out
        out[mask] = np.nan
    return out


@dataclass(frozen=True, eq=False)
class RawVariable:
    """A variable of one file, in the file's own order of axes.

    dims, shape: as stored. stored: type on disk. chunks: stored chunk shape, None if contiguous. attrs: as stored.
    """

    path: Path
    name: str
    dims: tuple[str, ...]
    shape: tuple[int, ...]
    stored: np.dtype
    attrs: Mapping[str, Any] = field(default_factory=dict)
    chunks: tuple[int, ...] | None = None

    @property
    def dtype(self) -> np.dtype:
        """Type of what `read` returns."""
        return decoded_dtype(self.stored, self.attrs)

    @property
    def units(self) -> str | None:
        """The file's unit text, None where it states none."""
        text = self.attrs.get("units")
        return str(text) if text is not None else None

    @property
    def packed(self) -> bool:
        """Whether integers with a scale stand for the numbers."""
        return self.stored.kind in "iu" and ("scale_factor" in self.attrs or "add_offset" in self.attrs)

    def read(self, slices: tuple[slice, ...]) -> np.ndarray:
        """The decoded values of `slices` (one per dimension, 0 <= start <= stop, step 1), a new array.

        Raises DataError if the file cannot be read there.
        """
        raise NotImplementedError

    def read_all(self) -> np.ndarray:
        """The whole variable: for coordinates and series, never for fields."""
        return self.read(tuple(slice(0, n) for n in self.shape))

    def at(self, path: Path, dims: tuple[str, ...], shape: tuple[int, ...]) -> RawVariable:
        """The same variable in another file."""
        return replace(self, path=path, dims=dims, shape=shape)

    @property
    def is_series(self) -> bool:
        """A scalar or a series: small enough to be read with the header."""
        return len(self.shape) <= 1 and (not self.shape or self.shape[0] <= SERIES_LIMIT)

    def describe(self) -> str:
        """Name and file, for messages."""
        return f'variable "{self.name}" in {self.path}'


@dataclass(frozen=True)
class RawFile:
    """The header of one file or store; `series` holds the scalars and one-dimensional variables read with it."""

    path: Path
    kind: str
    variables: Mapping[str, RawVariable]
    attrs: Mapping[str, Any] = field(default_factory=dict)
    unlimited: tuple[str, ...] = ()
    series: Mapping[str, np.ndarray] = field(default_factory=dict)

    def values(self, name: str) -> np.ndarray:
        """A scalar or series of the file as a one-dimensional array."""
        found = self.series.get(name)
        return np.atleast_1d(self.variables[name].read_all() if found is None else found)

    def coordinate(self, dim: str) -> RawVariable | None:
        """The one-dimensional variable named as its dimension `dim`, if there is one."""
        found = self.variables.get(dim)
        return found if found is not None and found.dims == (dim,) else None
