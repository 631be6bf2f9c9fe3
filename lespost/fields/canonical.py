"""Canonical arrays: a stored variable seen as (time, z, y, x), upward, SI, read only where it is asked for.

`CanonicalArray` turns a request in canonical indices into reads of the file's own slices: axes permuted, vertical and
horizontal directions flipped, high-side faces rolled to low-side ones, a repeated periodic column left out, boundary faces
that the file lacks filled with zeros, units converted. Where nothing of this is needed, the reader's array is handed on
untouched.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr
from xarray.backends.common import BackendArray
from xarray.core import indexing

from lespost.errors import DataError
from lespost.fields.stack import StackedVariable
from lespost.fields.variable import FILL_LIMIT


@dataclass(frozen=True)
class AxisPlan:
    """How one canonical axis is made of a stored one.

    axis: position of the stored axis (0 is time). count: stored points used, counted from the first. flip: stored in the
    opposite direction. roll: canonical point j is ascending point j - roll (periodic). pad_low, pad_high: zeros added.
    """

    axis: int
    count: int
    flip: bool = False
    roll: int = 0
    pad_low: int = 0
    pad_high: int = 0

    @property
    def size(self) -> int:
        """Number of canonical points."""
        return self.count + self.pad_low + self.pad_high

    def pieces(self, start: int, stop: int) -> list[tuple[slice, slice]]:
        """What canonical points start .. stop - 1 are made of: (place in the result, stored slice) pairs."""
        low, high = max(start, self.pad_low), min(stop, self.pad_low + self.count)
        if low >= high:
            return []
        first, last = low - self.pad_low, high - self.pad_low
        spans = [(first, last, low - start)]
        if self.roll:
            shifted = (first - self.roll) % self.count
            until = min(self.count, shifted + last - first)
            spans = [(shifted, until, low - start)]
            if until - shifted < last - first:
                spans.append((0, last - first - (until - shifted), low - start + until - shifted))
        found = []
        for a, b, place in spans:
            stored = slice(self.count - b, self.count - a) if self.flip else slice(a, b)
            found.append((slice(place, place + b - a), stored))
        return found


class CanonicalArray(BackendArray):
    """A lazily read (time, z, y, x) array.

    plans: of z, y, x. factor, offset: to the canonical unit. name, seconds: for messages.
    """

    def __init__(
        self, stored: StackedVariable, plans: tuple[AxisPlan, AxisPlan, AxisPlan], name: str,
        seconds: np.ndarray, factor: float = 1.0, offset: float = 0.0,
    ) -> None:  # fmt: skip
        self.stored, self.plans, self.name, self.seconds = stored, plans, name, seconds
        self.dtype = np.dtype(stored.dtype)
        self.factor, self.offset = self.dtype.type(factor), self.dtype.type(offset)
        self.shape = (stored.shape[0], *(plan.size for plan in plans))
        # from stored order of axes to canonical order, and whether that is any change at all
        self._order = (0, *(plan.axis for plan in plans))
        steps = (1, *(stored.chunks[1:] if stored.chunks is not None else (max(1, n // 4) for n in stored.shape[1:])))
        self._probe = tuple(slice(None, None, int(steps[i])) for i in self._order)

    def __getitem__(self, key: indexing.ExplicitIndexer) -> Any:
        return indexing.explicit_indexing_adapter(key, self.shape, indexing.IndexingSupport.OUTER, self._select)

    def _select(self, key: tuple[Any, ...]) -> np.ndarray:
        """The values at an outer index: integers, slices or integer arrays, one per axis."""
        bounds: list[tuple[int, int]] = []
        after: list[Any] = []
        for item, size in zip(key, self.shape, strict=True):
            if isinstance(item, slice):
                positions = range(*item.indices(size))
                low, high = (min(positions), max(positions) + 1) if len(positions) else (0, 0)
                bounds.append((low, high))
                step = positions.step if len(positions) else 1
                after.append(slice(None) if step == 1 else np.asarray(positions) - low)
            elif np.ndim(item) == 0:
                index = int(item) % size if -size <= int(item) < size else int(item)
                bounds.append((index, index + 1))
                after.append(0)
            else:
                array = np.asarray(item)
                array = np.where(array < 0, array + size, array)
                low, high = (int(array.min()), int(array.max()) + 1) if len(array) else (0, 0)
                bounds.append((low, high))
                after.append(array - low)
        if isinstance(after[0], np.ndarray):  # single snapshots out of a long run: never read what lies between
            chosen = after[0] + bounds[0][0]
            values = np.concatenate([self._box([(int(t), int(t) + 1), *bounds[1:]]) for t in chosen]) if len(
                chosen
            ) else np.empty((0, *(b - a for a, b in bounds[1:])), self.dtype)
            after[0] = slice(None)
        else:
            values = self._box(bounds)
        for axis in range(len(after) - 1, -1, -1):
            item = after[axis]
            if isinstance(item, slice):
                continue
            values = values[(slice(None),) * axis + (item,)]  # an integer makes a view, where np.take would copy
        return values

    def _box(self, bounds: list[tuple[int, int]]) -> np.ndarray:
        """The values of a box: [start, stop) of each canonical axis."""
        shape = tuple(b - a for a, b in bounds)
        pieces = [plan.pieces(*bound) for plan, bound in zip(self.plans, bounds[1:], strict=True)]
        time = slice(*bounds[0])
        whole = all(len(p) == 1 and p[0][0] == slice(0, n) for p, n in zip(pieces, shape[1:], strict=True))
        if whole and not any(plan.flip for plan in self.plans):
            values = self._read(time, [p[0][1] for p in pieces])
            # a permuted view is slow to work on; a plain array is handed on as it is
            return values if self._order == (0, 1, 2, 3) else np.ascontiguousarray(values)
        out = np.zeros(shape, self.dtype)
        for z_place, z_slice in pieces[0]:
            for y_place, y_slice in pieces[1]:
                for x_place, x_slice in pieces[2]:
                    values = self._read(time, [z_slice, y_slice, x_slice])
                    flips = tuple(slice(None, None, -1 if plan.flip else 1) for plan in self.plans)
                    out[:, z_place, y_place, x_place] = values[(slice(None), *flips)]
        return out

    def _read(self, time: slice, space: list[slice]) -> np.ndarray:
        """Stored values of a box, in canonical order of axes and unit, directions still those of the file."""
        slices = [time, time, time, time]
        for plan, item in zip(self.plans, space, strict=True):
            slices[plan.axis] = item
        values = self.stored.read(tuple(slices)).transpose(self._order)
        self._refuse_fills(values, time)
        if self.factor != 1:
            values *= self.factor
        if self.offset != 0:
            values += self.offset
        return values

    def _refuse_fills(self, values: np.ndarray, time: slice) -> None:
        """Records and chunks that were never written read as 9.97e36 throughout: a sparse look finds them at no cost."""
        probe = values[self._probe]
        bad = np.abs(probe) > FILL_LIMIT
        if not bad.any():
            return
        first = time.start + int(np.flatnonzero(bad.any(axis=(1, 2, 3)))[0])
        raise DataError(unwritten(self.name, self.stored, first, self.seconds))

    def __reduce__(self) -> tuple[Any, ...]:
        return CanonicalArray, (
            self.stored, self.plans, self.name, self.seconds, float(self.factor), float(self.offset),
        )  # fmt: skip

    def preferred_chunks(self, dims: tuple[str, ...]) -> dict[str, int]:
        """Stored chunk shape in canonical order of axes."""
        if self.stored.chunks is None:
            return {}
        return {dim: int(self.stored.chunks[axis]) for dim, axis in zip(dims, self._order, strict=True)}


def unwritten(name: str, stored: StackedVariable, snapshot: int, seconds: np.ndarray) -> str:
    """The paragraph about a snapshot that was never written."""
    path, _ = stored.snapshot_source(snapshot)
    return (
        f'{path}: {name} ("{stored.name}") at {seconds[snapshot]:.10g} s (snapshot {snapshot + 1} of {len(seconds)}) holds '
        "fill values (beyond 1e30): it was never written, as after a killed job. Write it again, or set "
        "[fields].allow_gaps = true to leave such snapshots out."
    )


def variable(array: CanonicalArray, dims: tuple[str, ...], attrs: dict[str, Any]) -> xr.Variable:
    """`array` as a lazy xarray variable with the stored chunks in its encoding."""
    encoding = {"preferred_chunks": array.preferred_chunks(dims), "dtype": array.dtype}
    return xr.Variable(dims, indexing.LazilyIndexedArray(array), attrs, encoding)
