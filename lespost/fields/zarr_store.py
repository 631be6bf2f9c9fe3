"""Reading zarr stores (formats 2 and 3, sharded or not, consolidated or not): headers and slices.

The arrays themselves are asked, never the consolidated copy of their metadata, which goes stale when a run appends.
Which chunks a store really holds is the business of `lespost.fields.zarr_chunks`.
"""

from __future__ import annotations

import threading
import warnings
from collections import OrderedDict
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import zarr

from lespost.errors import DataError
from lespost.fields.variable import RawFile, RawVariable, counter, decode

#: Opened arrays remembered per process (metadata only: a zarr array holds no file handle).
MAX_ARRAYS = 256

_arrays: OrderedDict[tuple[Path, str, int], Any] = OrderedDict()
_lock = threading.Lock()


def metadata_file(path: Path, name: str) -> Path:
    """The document that describes array `name` of the store at `path`."""
    v3 = path / name / "zarr.json"
    return v3 if v3.exists() else path / name / ".zarray"


def open_array(path: Path, name: str) -> Any:
    """The zarr array `name` of the store at `path`, opened read-only and remembered until its metadata change."""
    try:
        stamp = metadata_file(path, name).stat().st_mtime_ns
    except OSError as error:
        raise DataError(f'{path}: array "{name}" cannot be read ({error.strerror}); is the store still there?') from None
    key = (path, name, stamp)
    with _lock:
        if key in _arrays:
            _arrays.move_to_end(key)
            return _arrays[key]
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            array = zarr.open_array(path / name, mode="r")
    except Exception as error:  # zarr raises many kinds; each means that this array cannot be used
        raise DataError(f'{path}: array "{name}" cannot be opened ({_first_line(error)}); its metadata are damaged.') from None
    with _lock:
        _arrays[key] = array
        while len(_arrays) > MAX_ARRAYS:
            _arrays.popitem(last=False)
    return array


@dataclass(frozen=True, eq=False)
class ZarrVariable(RawVariable):
    """An array of a zarr store. shards: shape of the stored shards, None where chunks are stored singly."""

    shards: tuple[int, ...] | None = None

    def read(self, slices: tuple[slice, ...]) -> np.ndarray:
        array = open_array(self.path, self.name)
        try:
            values = np.asarray(array[slices] if slices else array[...])
        except Exception as error:  # codecs raise many kinds; each means that a stored chunk cannot be decoded
            span = ", ".join(f"{s.start}:{s.stop}" for s in slices)
            raise DataError(
                f"{self.describe()}: reading [{span}] failed ({_first_line(error)}); a chunk is damaged or cut off. "
                "Copy or write the store again."
            ) from None
        values = values if values.dtype.isnative else values.astype(values.dtype.newbyteorder("="))
        counter.add(values.nbytes)
        return decode(values, array.attrs.asdict())


def _first_line(error: BaseException) -> str:
    return (str(error).strip() or type(error).__name__).splitlines()[0]


def read_header(path: Path) -> RawFile:
    """The header of a zarr store with its scalars and series. Raises DataError if it cannot be read."""
    variables: dict[str, RawVariable] = {}
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            root = zarr.open(path, mode="r") if (path / ".zarray").exists() else _open_group(path)
            if isinstance(root, zarr.Array):
                raise DataError(f"{path}: a single zarr array; give the group (folder) that holds u, v and w.")
            _collect(root, "", path, variables)
            attrs = dict(root.attrs)
    except DataError:
        raise
    except PermissionError:
        raise DataError(f"{path}: permission denied; ask its owner for read access (chmod -R a+rX).") from None
    except Exception as error:  # zarr and JSON raise many kinds; each means that the store cannot be read
        raise DataError(f"{path}: the zarr store cannot be read ({_first_line(error)}); its metadata are damaged.") from None
    series = {name: v.read_all() for name, v in variables.items() if v.is_series}
    return RawFile(path, "zarr", variables, attrs, (), series)


def _open_group(path: Path) -> Any:
    return zarr.open_group(path, mode="r", use_consolidated=False)


def _collect(group: Any, prefix: str, path: Path, variables: dict[str, RawVariable]) -> None:
    for name, item in sorted(group.members()):
        if isinstance(item, zarr.Group):
            _collect(item, f"{prefix}{name}/", path, variables)
            continue
        if item.dtype.kind not in "fiu":
            continue
        attrs = item.attrs.asdict()
        dims = attrs.pop("_ARRAY_DIMENSIONS", None) or getattr(item.metadata, "dimension_names", None)
        if not dims or any(dim is None for dim in dims):
            dims = tuple(f"{prefix}{name}[{i}]" if item.ndim == 1 else f"dim_{i}" for i in range(item.ndim))
        variables[prefix + name] = ZarrVariable(
            path, prefix + name, tuple(dims), tuple(item.shape), np.dtype(item.dtype), attrs, tuple(item.chunks),
            shards=tuple(item.shards) if item.shards else None,
        )
