"""Reading raw binary files by a description of their arrangement: C or Fortran order, byte order, headers, record markers.

A file is an arithmetic of offsets: where variable v at time t begins, and how far apart its planes are. Slices are taken
from a memory map, so that only the pages needed are read.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from lespost.errors import DataError, LayoutError, RecipeError
from lespost.fields.settings import RawSettings
from lespost.fields.variable import RawFile, RawVariable, counter


@dataclass(frozen=True, eq=False)
class RawBinaryVariable(RawVariable):
    """A variable of a raw file: first byte and the stride in bytes of each axis."""

    offset: int = 0
    strides: tuple[int, ...] = ()

    def read(self, slices: tuple[slice, ...]) -> np.ndarray:
        try:
            with self.path.open("rb") as stream:
                mapped = np.memmap(stream, np.uint8, "r")
        except OSError as error:
            raise DataError(f"{self.path}: cannot be read ({error.strerror}).") from None
        last = self.offset + sum((n - 1) * s for n, s in zip(self.shape, self.strides, strict=True))
        if last + self.stored.itemsize > mapped.size:
            raise DataError(f"{self.path}: the file is {mapped.size} bytes long now, shorter than when it was listed.")
        view = np.ndarray(self.shape, self.stored, mapped, self.offset, self.strides)
        values = np.array(view[slices], dtype=self.stored.newbyteorder("="), order="C")
        counter.add(values.nbytes)
        return values


@dataclass(frozen=True)
class _Block:
    """One variable at one time: storage shape (slowest axis first), bytes with its own markers, offset and strides inside."""

    dims: tuple[str, ...]
    shape: tuple[int, ...]
    nbytes: int
    inner_offset: int
    strides: tuple[int, ...]
    first_marker: int


def variable_shape(raw: RawSettings, name: str) -> tuple[int, int, int]:
    """Declared sizes of variable `name`."""
    return raw.shapes.get(name, raw.shape)


def _block(raw: RawSettings, name: str) -> _Block:
    shape: tuple[int, ...] = variable_shape(raw, name)
    dims: tuple[str, ...] = raw.axes or ("axis_1", "axis_2", "axis_3")
    if raw.order == "Fortran":
        shape, dims = shape[::-1], dims[::-1]
    # an axis of another length is another dimension: the faces beside the centres
    usual = raw.shape[::-1] if raw.order == "Fortran" else raw.shape
    dims = tuple(d if n == m else f"{d}_face" for d, n, m in zip(dims, shape, usual, strict=True))
    item = np.dtype(raw.dtype).itemsize
    plane = shape[1] * shape[2] * item
    marker = raw.record_markers
    if raw.record == "level" and marker:
        step = plane + 2 * marker
        return _Block(dims, shape, shape[0] * step, marker, (step, shape[2] * item, item), plane)
    own = marker if raw.record == "variable" else 0
    total = shape[0] * plane
    return _Block(dims, shape, total + 2 * own, own, (plane, shape[2] * item, item), total)


def _stored_dtype(raw: RawSettings) -> np.dtype:
    return np.dtype(raw.dtype).newbyteorder("<" if raw.byte_order == "little" else ">")


def read_header(path: Path, raw: RawSettings, names: tuple[str, ...]) -> RawFile:
    """The variables `names` of the raw file at `path`, which holds them in this order.

    Raises DataError if the file is not a whole number of snapshots long, LayoutError if its record markers disagree
    with the description.
    """
    try:
        size = path.stat().st_size
        with path.open("rb"):
            pass
    except PermissionError:
        raise DataError(f"{path}: permission denied; ask its owner for read access (chmod a+r).") from None
    if size == 0:
        raise DataError(f"{path}: the file is empty (0 bytes); write it again or leave it out of [fields].path.")
    blocks = {name: _block(raw, name) for name in names}
    around = raw.record_markers if raw.record == "time" else 0
    per_time = sum(block.nbytes for block in blocks.values()) + 2 * around
    payload = size - raw.header_bytes
    times, rest = divmod(payload, per_time)
    if times < 1 or rest:
        raise DataError(
            f"{path}: {size} bytes is not a header of {raw.header_bytes} bytes and a whole number of snapshots of "
            f"{per_time} bytes ({', '.join(names)}; {payload / per_time:.3f} snapshots). Either the file ends early (the "
            f"last whole snapshot is number {max(times, 0)}), or [fields.raw] shape, dtype, header_bytes or "
            "record_markers is wrong."
        )
    if raw.record_markers:
        first = per_time - 2 * around if around else next(iter(blocks.values())).first_marker
        _check_marker(path, raw, first)
    variables: dict[str, RawVariable] = {}
    begin = raw.header_bytes + around
    for name, block in blocks.items():
        if raw.arrangement == "times":
            offset, step = begin, per_time
            begin += block.nbytes
        else:
            if around:
                raise RecipeError('[fields.raw]: record = "time" cannot go with arrangement = "variables".')
            offset, step = begin, block.nbytes
            begin += block.nbytes * times
        variables[name] = RawBinaryVariable(
            path, name, ("time", *block.dims), (times, *block.shape), _stored_dtype(raw),
            offset=offset + block.inner_offset, strides=(step, *block.strides),
        )
    return RawFile(path, "raw", variables)


def _check_marker(path: Path, raw: RawSettings, expected: int) -> None:
    """The number before the first record must be its length in bytes; says what it is otherwise."""
    kind = np.dtype(f"i{raw.record_markers}")
    with path.open("rb") as stream:
        stream.seek(raw.header_bytes)
        data = stream.read(raw.record_markers)
    found = {
        order: int(np.frombuffer(data, kind.newbyteorder("<" if order == "little" else ">"))[0])
        for order in ("little", "big")
    }
    if found[raw.byte_order] == expected:
        return
    other = "big" if raw.byte_order == "little" else "little"
    if found[other] == expected:
        raise LayoutError(
            f'{path}: its first record marker is right in the other byte order; write [fields.raw].byte_order = "{other}".'
        )
    raise LayoutError(
        f"{path}: its first record marker says {found[raw.byte_order]} bytes where [fields.raw] announces a record of "
        f"{expected} bytes; correct shape, dtype, header_bytes, record or record_markers."
    )


def split_names(raw: RawSettings) -> dict[str, tuple[str, ...]]:
    """Pattern below the path -> names that such a file holds; "" is the path itself."""
    if raw.variables:
        return {"": raw.variables}
    grouped: dict[str, tuple[str, ...]] = {}
    for name, pattern in raw.files.items():
        grouped[pattern] = (*grouped.get(pattern, ()), name)
    return grouped
