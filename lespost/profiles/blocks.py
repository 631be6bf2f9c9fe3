"""Blocks of fields: which slabs of levels are read together, and how each byte of the store is read only once.

A block holds the cells z0 <= k < z1 of one snapshot with the halo levels their statistics need. Where a snapshot is cut
into slabs, a `SlabReader` walks up it: it reads whole chunks of levels and keeps the ones that the next slab needs again.
What is computed from a block stands in `lespost.profiles.one_pass`.
"""

from __future__ import annotations

import collections
import itertools
import threading
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import xarray as xr

from lespost.errors import RequestError
from lespost.kernels.rows import Pieces
from lespost.profiles.layout import Layout, layout_of
from lespost.profiles.settings import ProfilesSettings

#: A block of this size keeps every thread busy and the overhead per block below one part in twenty; larger ones only take
#: memory, and their pages cost more than the arithmetic on them.
GOOD_BLOCK_BYTES = 32 * 10**6

#: Fields of a block that are read at the same time: a chunk is decoded by one processor, so that one field's chunk alone
#: would leave the others idle. Readers of libraries that are not safe to share take turns by themselves.
TOGETHER = 2


@dataclass(frozen=True)
class BlockPlan:
    """What one block will hold. bytes: of fields that it takes in; memory: at most held while it is read and computed."""

    time_index: int
    z0: int
    z1: int
    bytes: int
    memory: int

    @property
    def key(self) -> str:
        """Its name in the journal; sorts in the order of time and height."""
        return f"profiles-{self.time_index:07d}-{self.z0:06d}-{self.z1:06d}"

    @property
    def label(self) -> str:
        """Its name for people."""
        return f"snapshot {self.time_index + 1}, levels {self.z0 + 1} to {self.z1}"

    @property
    def group(self) -> str:
        """Blocks of one snapshot are read in order, by one reader."""
        return f"snapshot {self.time_index}"


@dataclass(frozen=True, eq=False)
class Block:
    """The fields of one slab, all of one type. first[name]: the level that the first of its levels is.

    arrays[name]: its levels (levels, ny, nx) in two pieces, those kept from the slab below and those read for this one.
    """

    layout: Layout
    settings: ProfilesSettings
    time_index: int
    z0: int
    z1: int
    arrays: Mapping[str, Pieces] = field(repr=False)
    first: Mapping[str, int]

    def count(self, name: str) -> int:
        """Number of levels of a field in the block."""
        return sum(len(piece) for piece in self.arrays[name])

    def levels(self, name: str, start: int, stop: int) -> np.ndarray:
        """Levels start <= k < stop of a field (of faces where it sits on z faces): a view where that is possible."""
        low, high = start - self.first[name], stop - self.first[name]
        if low < 0 or high > self.count(name):
            raise IndexError(f"levels {start} to {stop} of {name} are not in the block")
        halo, main = self.arrays[name]
        if low >= len(halo):
            return main[low - len(halo) : high - len(halo)]
        return np.concatenate([halo[low:high], main[: max(0, high - len(halo))]])


def span_needed(layout: Layout, name: str, z0: int, z1: int) -> tuple[int, int]:
    """Levels [start, stop) of a field that the statistics of cells z0 <= k < z1 need."""
    if name in layout.on_z_faces:
        return z0, z1 + 1
    above = 0 if layout.w_on_faces else 1  # with w at centres vertical differences reach both ways
    return max(z0 - 1, 0), min(z1 + above, layout.nz)


class SlabReader:
    """Reads the levels of one snapshot from the bottom up and keeps those that the next slab needs again.

    Whole chunks of levels are read, each once, if the slabs are asked for in order; any other order works, and reads more.
    """

    def __init__(self, fields: xr.Dataset, layout: Layout, time_index: int) -> None:
        self._fields, self._layout, self._time_index = fields, layout, time_index
        self._kept: dict[str, tuple[int, np.ndarray]] = {}

    def read(self, name: str, start: int, stop: int) -> Pieces:
        """Levels from `start` up to `stop` or a little further, as (kept ones, new ones), each (levels, ny, nx)."""
        size = self._layout.levels(name)
        first, kept = self._kept.pop(name, (start, None))
        if kept is None or not first <= start <= first + len(kept):
            first, kept = start, np.empty((0, self._layout.ny, self._layout.nx), self._fields[name].dtype)
        kept = kept[start - first :]
        have = start + len(kept)
        chunk = level_chunk(self._fields, name, size)
        until = min(-(-stop // chunk) * chunk, size)
        new = np.ascontiguousarray(self._fields[name][self._time_index, have : max(until, have)].values)
        if stop < size:
            # The next slab begins at most two levels below the end of this one. A copy, so that the slab itself can go.
            low = max(start, stop - 2)
            parts = [kept[low - start :], new[max(0, low - have) :]]
            self._kept[name] = (low, np.concatenate(parts))
        return kept, new


def level_chunk(fields: xr.Dataset, name: str, size: int) -> int:
    """Number of levels in a chunk of the store; 1 where it is not chunked by levels."""
    chunks = fields[name].encoding.get("preferred_chunks") or {}
    vertical = "z_face" if "z_face" in fields[name].dims else "z"
    return min(max(int(chunks.get(vertical, 1)), 1), size)


def snapshot_block(
    fields: xr.Dataset, time_index: int, z0: int, z1: int, settings: ProfilesSettings,
    layout: Layout | None = None, reader: SlabReader | None = None,
) -> Block:
    """Read the cells z0 <= k < z1 of one snapshot of a canonical dataset, with halo.

    layout, reader: of this dataset and snapshot, where the caller has them; with a reader, levels read before are not read
    again. All fields come out in one type: float64 if any is stored so, else float32.
    """
    layout = layout_of(fields, settings.prandtl_number) if layout is None else layout
    reader = SlabReader(fields, layout, time_index) if reader is None else reader
    dtype = np.dtype(np.float64 if layout.itemsize > 4 else np.float32)
    spans = {name: span_needed(layout, name, z0, z1) for name in layout.names}
    pieces = _read_together(reader, spans)
    arrays = {name: (pieces[name][0].astype(dtype, copy=False), pieces[name][1].astype(dtype, copy=False)) for name in spans}
    return Block(layout, settings, time_index, z0, z1, arrays, {name: start for name, (start, _) in spans.items()})


def _read_together(reader: SlabReader, spans: Mapping[str, tuple[int, int]]) -> dict[str, Pieces]:
    """The pieces of all fields, `TOGETHER` fields at a time."""
    waiting = collections.deque(spans.items())
    found: dict[str, Pieces] = {}
    failed: list[BaseException] = []

    def work() -> None:
        while waiting and not failed:
            try:
                name, (start, stop) = waiting.popleft()
                found[name] = reader.read(name, start, stop)
            except IndexError:  # another thread took the last one
                return
            except BaseException as error:
                failed.append(error)

    threads = [threading.Thread(target=work, daemon=True) for _ in range(min(TOGETHER, len(spans)) - 1)]
    for thread in threads:
        thread.start()
    work()
    for thread in threads:
        thread.join()
    if failed:
        raise failed[0]
    return found


def block_memory(layout: Layout, fields: xr.Dataset, z0: int, z1: int) -> int:
    """Bytes held while a block is read and computed: its levels, what is read ahead, and fields in transit twice."""
    total = largest = 0
    for name in layout.names:
        start, stop = span_needed(layout, name, z0, z1)
        ahead = level_chunk(fields, name, layout.levels(name)) if z1 < layout.nz or z0 > 0 else 0
        count = (stop - start + ahead) * layout.level_bytes(name)
        total += count
        largest = max(largest, count)
    return total + TOGETHER * largest


def plan_blocks(
    fields: xr.Dataset, settings: ProfilesSettings, memory: int, times: Sequence[int] | None = None,
    layout: Layout | None = None,
) -> list[BlockPlan]:
    """Cut the snapshots into blocks: whole snapshots where they are small, else slabs of whole chunks.

    times: indices of the snapshots wanted; default: all. memory: the budget; a block takes half of it at most, so that one
    can be read while another is computed, or all of it where one chunk of levels is that large.
    Raises RequestError if not even one chunk of levels fits.
    """
    layout = layout_of(fields, settings.prandtl_number) if layout is None else layout
    edges = _slab_edges(layout, fields, memory)
    plans = []
    for time_index in range(fields.sizes["time"]) if times is None else times:
        for z0, z1 in itertools.pairwise(edges):
            levels = {name: z1 - z0 + (z1 == layout.nz and name in layout.on_z_faces) for name in layout.names}
            own = sum(count * layout.level_bytes(name) for name, count in levels.items())
            plans.append(BlockPlan(time_index, z0, z1, own, block_memory(layout, fields, z0, z1)))
    return plans


def _slab_edges(layout: Layout, fields: xr.Dataset, memory: int) -> list[int]:
    """Edges of the slabs: 0, then one below multiples of the chunk, so that the halo above is in the chunks at hand."""
    bytes_of_level = sum(layout.level_bytes(name) for name in layout.names)
    if layout.nz * bytes_of_level <= GOOD_BLOCK_BYTES and block_memory(layout, fields, 0, layout.nz) <= memory // 2:
        return [0, layout.nz]
    chunk = max(level_chunk(fields, name, layout.levels(name)) for name in layout.names)
    fits = 0
    while fits * bytes_of_level < GOOD_BLOCK_BYTES and fits < layout.nz:
        if block_memory(layout, fields, 1, min(1 + fits + chunk, layout.nz)) > (memory // 2 if fits else memory):
            break
        fits += chunk
    if fits == 0:
        smallest = block_memory(layout, fields, 1, min(1 + chunk, layout.nz))
        raise RequestError(
            f"[compute].memory is too small: one block of {chunk} levels needs {smallest / 1e6:.3g} MB and may take "
            f"{memory / 1e6:.3g} MB. Raise it, or store the fields in chunks of fewer levels."
        )
    inner = [edge - 1 for edge in range(fits, layout.nz, fits) if edge > 1]
    return [0, *inner, layout.nz]
