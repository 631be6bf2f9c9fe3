"""The bytes of a netCDF file as plain arrays and attributes: netCDF-4 through its library, classic files in
Python.

Classic files (CDF-1, CDF-2) are read by scipy because the C library can crash, not merely fail, on a damaged
classic header. What the values mean is left to `cf.py`.
"""

from __future__ import annotations

import warnings
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from lespost.errors import RecordError

#: A record larger than this many values per variable is no moored record, or its header is damaged.
MOST_VALUES = 2_000_000_000


@dataclass(frozen=True)
class StoredVariable:
    """A variable as stored: not unpacked, fill values in place; texts as bytes or str."""

    name: str
    dims: tuple[str, ...]
    values: np.ndarray
    attributes: Mapping[str, Any]


@dataclass(frozen=True)
class Container:
    """A file as stored. groups: names of groups below the root, which are not read."""

    attributes: Mapping[str, Any]
    dimensions: Mapping[str, int]
    groups: tuple[str, ...]
    variables: tuple[StoredVariable, ...]


def open_container(path: Path) -> Container:
    """The whole content of the root group. Raises RecordError if the file cannot be read to its end."""
    try:
        with path.open("rb") as handle:
            start = handle.read(4)
        return _classic(path) if start in (b"CDF\x01", b"CDF\x02") else _hdf5(path)
    except RecordError:
        raise
    except (
        Exception
    ) as error:  # the libraries raise many kinds for a damaged file, and none of them is the user's
        size = path.stat().st_size if path.exists() else 0
        reason = " ".join(str(error).split())[:160] or type(error).__name__
        raise RecordError(
            f"{path.name}: cannot be read as netCDF ({reason}; {size} bytes): the file is truncated, damaged "
            "or of another "
            "kind. Copy it again and compare its size with the original."
        ) from None


def _attribute(value: Any) -> Any:
    """A plain Python or numpy value of an attribute, texts with their NULs removed, native byte order."""
    if isinstance(value, bytes):
        value = value.decode("utf-8", "replace")
    if isinstance(value, str):
        return value.replace("\x00", "")
    if isinstance(value, np.ndarray | np.generic) and value.dtype.kind in "iuf":
        array = np.asarray(value).astype(value.dtype.newbyteorder("="))
        return array.reshape(-1)[0] if array.size == 1 else array
    return value


def _check_size(path: Path, name: str, size: int) -> None:
    if size > MOST_VALUES:
        raise RecordError(f'{path.name}: variable "{name}" claims {size} values; the header is damaged.')


def _hdf5(path: Path) -> Container:
    import netCDF4

    with netCDF4.Dataset(str(path)) as handle:
        handle.set_auto_maskandscale(False)
        handle.set_auto_chartostring(False)
        variables = []
        for key, variable in handle.variables.items():
            _check_size(path, str(key), int(variable.size))
            if not isinstance(variable.dtype, np.dtype) and variable.dtype is not str:
                continue  # compound and opaque types hold no record data
            own = {str(a): _attribute(variable.getncattr(a)) for a in variable.ncattrs()}
            dims = tuple(str(d) for d in variable.dimensions)
            variables.append(StoredVariable(str(key), dims, np.asarray(variable[...]), own))
        return Container(
            {str(k): _attribute(handle.getncattr(k)) for k in handle.ncattrs()},
            {str(k): len(d) for k, d in handle.dimensions.items()},
            tuple(str(g) for g in handle.groups),
            tuple(variables),
        )


def _classic(path: Path) -> Container:
    from scipy.io import netcdf_file

    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # it warns of references to its buffer, which are copied below
        with netcdf_file(str(path), "r", mmap=False) as handle:
            records = int(handle._recs)
            dimensions = {str(k): records if n is None else int(n) for k, n in handle.dimensions.items()}
            variables = []
            for key, variable in handle.variables.items():
                values = np.array(variable.data)
                _check_size(path, str(key), int(values.size))
                dims = tuple(str(d) for d in variable.dimensions)
                if values.shape != tuple(dimensions[d] for d in dims):
                    raise RecordError(
                        f'{path.name}: variable "{key}" has shape {values.shape}, its axes say otherwise; '
                        "the file is damaged."
                    )
                own = {str(k): _attribute(v) for k, v in variable._attributes.items()}
                values = values.astype(values.dtype.newbyteorder("="))
                variables.append(StoredVariable(str(key), dims, values, own))
            attributes = {str(k): _attribute(v) for k, v in handle._attributes.items()}
            return Container(attributes, dimensions, (), tuple(variables))
