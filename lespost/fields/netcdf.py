"""Reading netCDF files (classic and netCDF-4): headers and slices, one thread at a time, few files open.

The netCDF and HDF5 libraries are not safe under threads, so every call is made under one lock per process; work in
parallel goes by process over files. No more than `MAX_HANDLES` files are open at once.
"""

from __future__ import annotations

import errno
import os
import threading
from collections import OrderedDict
from collections.abc import Collection
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np

from lespost.errors import DataError
from lespost.fields.integrity import announced_extent, file_kind
from lespost.fields.variable import RawFile, RawVariable, counter, decode

#: Files kept open at once, well below the usual limits of a shell (256 to 1024) and of the 64 promised to users.
MAX_HANDLES = 48
#: Sizes in bytes between which a chunk is kept after a part of it was read.
KEEP_FROM, KEEP_TO = 1 << 20, 256 << 20
#: Numbers of the operating system that mean "the file system does not support locks".
LOCK_ERRORS = {errno.EAGAIN, errno.ENOLCK, 524}

LOCK = threading.RLock()


class _Handles:
    """Open files of this process, the least recently used closed first; forgotten after a fork or a rewrite."""

    def __init__(self) -> None:
        self._open: OrderedDict[Path, tuple[tuple[int, int, int], netCDF4.Dataset]] = OrderedDict()
        self._pid = os.getpid()

    def get(self, path: Path) -> netCDF4.Dataset:
        """The open dataset of `path`; call under LOCK."""
        if self._pid != os.getpid():
            self._open, self._pid = OrderedDict(), os.getpid()
        try:
            status = path.stat()
        except OSError as error:
            raise unreadable(path, error) from None
        signature = (status.st_ino, status.st_size, status.st_mtime_ns)
        held = self._open.get(path)
        if held is not None and held[0] == signature:
            self._open.move_to_end(path)
            return held[1]
        if held is not None:
            self.close(path)
        while len(self._open) >= MAX_HANDLES:
            self.close(next(iter(self._open)))
        dataset = _open(path)
        self._open[path] = (signature, dataset)
        return dataset

    def close(self, path: Path) -> None:
        """Close one file."""
        _, dataset = self._open.pop(path)
        with suppress(RuntimeError, OSError):
            dataset.close()

    def close_all(self) -> None:
        """Close every file of this process."""
        with LOCK:
            for path in list(self._open):
                self.close(path)

    def __len__(self) -> int:
        return len(self._open)


handles = _Handles()


def unreadable(path: Path, error: OSError) -> DataError:
    """The paragraph for a file that the library or the system refuses."""
    if error.errno in LOCK_ERRORS:
        return DataError(
            f"{path}: the file system does not support the locks that HDF5 asks for (system error {error.errno}). If "
            "nothing is writing to the file, run again with the locks off: HDF5_USE_FILE_LOCKING=FALSE lespost …"
        )
    if error.errno == errno.EACCES:
        return DataError(f"{path}: permission denied; ask its owner for read access (chmod a+r) or copy the file.")
    if error.errno == errno.ENOENT:
        return DataError(f"{path}: no such file; it may have been moved or removed since it was listed.")
    if error.errno == errno.EMFILE:
        return DataError(f"{path}: too many files are open in this process; raise the limit with `ulimit -n 1024`.")
    return DataError(
        f"{path}: the netCDF library cannot read it ({error.strerror or error}); the file is damaged, still being "
        "written, or locked. Write it again or leave it out of [fields].path; where the file system does not support "
        "locks, run HDF5_USE_FILE_LOCKING=FALSE lespost …"
    )


def check_length(path: Path) -> None:
    """Raise DataError if the file is shorter than its header announces, empty, or not netCDF."""
    try:
        kind = file_kind(path)
        size = path.stat().st_size
        if kind == "empty":
            raise DataError(f"{path}: the file is empty (0 bytes); write it again or leave it out of [fields].path.")
        if kind == "other":
            raise DataError(f"{path}: not a netCDF file; give netCDF, zarr or raw binary files (format = \"raw\").")
        extent = announced_extent(path)
    except OSError as error:
        raise unreadable(path, error) from None
    if extent is None or size < extent.expected - 3:
        expected = "more" if extent is None else f"{extent.expected}"
        good = ""
        if extent is not None and extent.records > 0:
            good = f" It holds {extent.complete_records} complete of {extent.records} records."
        raise DataError(
            f"{path}: the file ends early: {size} bytes where its header announces {expected}.{good} The job that wrote "
            "it was probably killed, or the copy broke off: write or copy it again, or set [fields].allow_gaps = true "
            "to go on without this file."
        )


def _open(path: Path) -> netCDF4.Dataset:
    try:
        dataset = netCDF4.Dataset(path, "r")
    except OSError as error:
        raise unreadable(path, error) from None
    dataset.set_auto_maskandscale(False)
    dataset.set_always_mask(False)
    return dataset


@dataclass(frozen=True, eq=False)
class NetcdfVariable(RawVariable):
    """A variable of a netCDF file; `name` may contain the groups, "group/u"."""

    def read(self, slices: tuple[slice, ...]) -> np.ndarray:
        with LOCK:
            dataset = handles.get(self.path)
            try:
                stored = dataset[self.name]
                self._keep_chunk(stored, slices)
                values = np.asarray(stored[slices] if slices else stored[...])
                attrs = {
                    key: stored.getncattr(key)
                    for key in ("scale_factor", "add_offset", "_FillValue", "missing_value")
                    if key in stored.ncattrs()
                }
            except (OSError, RuntimeError, IndexError, KeyError) as error:
                raise DataError(
                    f"{self.describe()}: reading {_span(slices)} failed ({error}); the file is damaged or incomplete. "
                    "Write it again, or leave it out of [fields].path."
                ) from None
        values = values if values.dtype.isnative else values.astype(values.dtype.newbyteorder("="))
        if values.dtype.kind not in "fiu":
            raise DataError(f"{self.describe()} holds no numbers (type {values.dtype}).")
        counter.add(values.nbytes)
        return decode(values, attrs)


    def _keep_chunk(self, stored: Any, slices: tuple[slice, ...]) -> None:
        """Let the library keep the last chunk where a chunk is larger than what is asked: the next level is in it too.

        Without this, level after level of a chunk larger than the library's own cache is decoded again and again.
        """
        if self.chunks is None or not slices:
            return
        size = int(np.prod(self.chunks)) * self.stored.itemsize
        partial = any(s.stop - s.start < min(c, n) for s, c, n in zip(slices, self.chunks, self.shape, strict=True))
        if partial and KEEP_FROM < size <= KEEP_TO and stored.get_var_chunk_cache()[0] < size:
            stored.set_var_chunk_cache(size=size + 1024, nelems=101, preemption=1.0)


def _span(slices: tuple[slice, ...]) -> str:
    return "[" + ", ".join(f"{s.start}:{s.stop}" for s in slices) + "]"


def read_header(path: Path, preload: Collection[str] | None = None) -> RawFile:
    """The header of a netCDF file, with its scalars and series already read (or only those named in `preload`).

    The file is opened and closed for it: an index of thousands of files leaves no handle behind.
    Raises DataError if the file is cut off, foreign or unreadable.
    """
    check_length(path)
    with LOCK:
        dataset = _open(path)
        try:
            variables: dict[str, RawVariable] = {}
            unlimited: list[str] = []
            _collect(dataset, "", path, variables, unlimited)
            attrs = {key: _plain(dataset.getncattr(key)) for key in dataset.ncattrs()}
            series = {
                name: decode(np.array(dataset[name][...]), variable.attrs)
                for name, variable in variables.items()
                if (variable.is_series if preload is None else name in preload)
            }
        except (OSError, RuntimeError) as error:
            raise DataError(f"{path}: its header cannot be read ({error}); the file is damaged.") from None
        finally:
            dataset.close()
    return RawFile(path, "netcdf", variables, attrs, tuple(unlimited), series)


def _collect(
    group: Any, prefix: str, path: Path, variables: dict[str, RawVariable], unlimited: list[str]
) -> None:
    unlimited += [name for name, dim in group.dimensions.items() if dim.isunlimited()]
    for name, stored in group.variables.items():
        dtype = stored.dtype
        if not isinstance(dtype, np.dtype) or dtype.kind not in "fiu":
            continue
        chunking = stored.chunking()
        variables[prefix + name] = NetcdfVariable(
            path, prefix + name, tuple(stored.dimensions), tuple(stored.shape), dtype,
            {key: _plain(stored.getncattr(key)) for key in stored.ncattrs()},
            tuple(chunking) if isinstance(chunking, list) else None,
        )
    for name, child in group.groups.items():
        _collect(child, f"{prefix}{name}/", path, variables, unlimited)


def _plain(value: Any) -> Any:
    if isinstance(value, np.generic):
        return value.item()
    return value
