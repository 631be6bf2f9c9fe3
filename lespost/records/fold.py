"""Shapes of records that are not (time, level): several stations, ragged profiles, tables of rows.

Each function returns a record of the plain shape, or raises RecordError saying what to choose. Ragged layouts
follow the CF conventions, chapter 9 (contiguous and indexed ragged arrays).
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from lespost.errors import RecordError
from lespost.records.raw import RawRecord, RawVariable
from lespost.records.roles import Found


def _take(variable: RawVariable, dim: str, rows: np.ndarray | int, new_dim: str | None) -> RawVariable:
    """The variable at `rows` along `dim`; an integer drops the axis."""
    axis = variable.dims.index(dim)
    values = np.take(variable.values, rows, axis=axis)
    dims = list(variable.dims)
    if new_dim is None:
        dims.pop(axis)
    else:
        dims[axis] = new_dim
    return replace(variable, dims=tuple(dims), values=np.asarray(values))


def select_station(record: RawRecord, station: str | None) -> RawRecord:
    """The record of one station, where a file holds several along an axis of its own or in a column of names.

    Raises RecordError naming the stations where there is a choice and none was made, or where the name is
    unknown.
    """
    file = record.path.name
    ids = [v for v in record.variables.values() if str(v.attributes.get("cf_role", "")) == "timeseries_id"]
    ids = ids or [
        v
        for v in record.variables.values()
        if v.dims == ("row",) and v.name.lower() in ("station", "platform_code", "station_id")
    ]
    if not ids or not ids[0].dims:
        return record
    names = np.array([str(v) for v in np.ravel(ids[0].values)], dtype=object)
    choices = sorted(set(names))
    if station is None and len(choices) > 1:
        raise RecordError(
            f"{file}: holds {len(choices)} stations ({', '.join(choices[:8])}); choose one: station = "
            f'"{choices[0]}".'
        )
    if station is not None and station not in choices:
        raise RecordError(f'{file}: has no station "{station}"; it holds {", ".join(choices[:8])}.')
    chosen = choices[0] if station is None else station
    dim = ids[0].dims[0]
    index_of = [
        v for v in record.variables.values() if str(v.attributes.get("instance_dimension", "")) == dim
    ]
    if index_of:
        # indexed ragged array: each sample names its station by index
        index = index_of[0]
        rows = np.flatnonzero(index.values == int(np.flatnonzero(names == chosen)[0]))
        record = _restrict(record, index.dims[0], rows)
        names = np.array([chosen], dtype=object)
    if dim == "row":
        return _restrict(record, "row", np.flatnonzero(names == chosen))
    # an axis of length 1 stays where it is: later steps drop it
    if record.dimensions[dim] == 1:
        return record
    where = int(np.flatnonzero(np.array([str(v) for v in np.ravel(ids[0].values)]) == chosen)[0])
    counts = [v for v in record.variables.values() if "sample_dimension" in v.attributes and v.dims == (dim,)]
    if counts:
        sizes = counts[0].values.astype(np.int64)
        start = int(sizes[:where].sum())
        record = _restrict(
            record, str(counts[0].attributes["sample_dimension"]), np.arange(start, start + int(sizes[where]))
        )
    variables = {n: _take(v, dim, where, None) if dim in v.dims else v for n, v in record.variables.items()}
    return replace(
        record, variables=variables, dimensions={k: n for k, n in record.dimensions.items() if k != dim}
    )


def _restrict(record: RawRecord, dim: str, rows: np.ndarray) -> RawRecord:
    if rows.size == 0 or rows.max() >= record.dimensions.get(dim, 0):
        raise RecordError(f'{record.path.name}: the counts of its ragged arrays do not fit the axis "{dim}".')
    variables = {n: _take(v, dim, rows, dim) if dim in v.dims else v for n, v in record.variables.items()}
    return replace(record, variables=variables, dimensions={**record.dimensions, dim: int(rows.size)})


def unfold_ragged(record: RawRecord) -> RawRecord:
    """Contiguous ragged profiles (a count of samples per profile) as a rectangle (profile, sample), padded
    with NaN."""
    counts = [
        v for v in record.variables.values()
        if str(v.attributes.get("sample_dimension", "")) in record.dimensions and len(v.dims) == 1
    ]  # fmt: skip
    if not counts:
        return record
    count = counts[0]
    sample, profile = str(count.attributes["sample_dimension"]), count.dims[0]
    sizes = count.values.astype(np.float64)
    if not np.isfinite(sizes).all() or sizes.min() < 0 or int(sizes.sum()) != record.dimensions[sample]:
        raise RecordError(
            f'{record.path.name}: the counts in "{count.name}" sum to {np.nansum(sizes):g}, its axis '
            f'"{sample}" has '
            f"{record.dimensions[sample]} samples; the file is damaged."
        )
    numbers = sizes.astype(np.int64)
    row = np.repeat(np.arange(numbers.size), numbers)
    column = np.arange(numbers.sum()) - np.repeat(np.cumsum(numbers) - numbers, numbers)
    longest = int(numbers.max())
    variables = {}
    for name, v in record.variables.items():
        if v.dims != (sample,) or v.is_text:
            variables[name] = v
            continue
        filled = np.full((numbers.size, longest), np.nan)
        filled[row, column] = v.values
        variables[name] = replace(v, dims=(profile, "level"), values=filled)
    variables.pop(count.name)
    return replace(record, variables=variables, dimensions={**record.dimensions, "level": longest})


def fold_table(record: RawRecord, found: Mapping[str, Found]) -> RawRecord:
    """Rows of a table with several depths per time as (time, level); other records pass unchanged.

    Raises RecordError where a time and depth appear twice.
    """
    if "row" not in record.dimensions or "depth" not in found or found["time"].variable.dims != ("row",):
        return record
    file = record.path.name
    depth = found["depth"].variable.values
    if depth.dtype.kind not in "fiu" or np.unique(depth[np.isfinite(depth.astype(float))]).size <= 1:
        value = depth[:1] if depth.dtype.kind in "fiu" else depth
        scalar = replace(
            found["depth"].variable, dims=(), values=np.asarray(value).reshape(-1)[0:1].reshape(())
        )
        return replace(record, variables={**record.variables, scalar.name: scalar})
    if not np.isfinite(depth).all():
        raise RecordError(
            f"{file}: {int((~np.isfinite(depth)).sum())} rows have no depth in "
            f'"{found["depth"].variable.name}".'
        )
    times = found["time"].variable.values
    levels, level_of = np.unique(depth, return_inverse=True)
    _, first, time_of = np.unique(
        times.astype(str) if times.dtype.kind == "O" else times, return_index=True, return_inverse=True
    )
    # keep the file's order of first appearance, so that a time axis that goes back is seen as such
    rank = np.argsort(np.argsort(first))
    time_of = rank[time_of]
    if np.unique(time_of * levels.size + level_of).size < depth.size:
        raise RecordError(
            f"{file}: some time and depth appear in more than one row; remove the duplicates or choose a "
            "station."
        )
    if first.size * levels.size > 4 * depth.size:
        raise RecordError(
            f"{file}: {depth.size} rows hold {first.size} times and {levels.size} depths: no profiles at "
            "common depths; it is the "
            "table of a moving instrument."
        )
    shape = (first.size, levels.size)
    variables: dict[str, RawVariable] = {}
    for name, v in record.variables.items():
        if name == found["time"].variable.name:
            variables[name] = replace(v, dims=("time",), values=v.values[np.sort(first)])
        elif name == found["depth"].variable.name:
            variables[name] = replace(v, dims=("level",), values=levels.astype(np.float64))
        elif v.is_text:
            variables[name] = replace(v, dims=("time",), values=v.values[np.sort(first)])
        else:
            folded = np.full(shape, np.nan)
            folded[time_of, level_of] = v.values
            variables[name] = replace(v, dims=("time", "level"), values=folded)
    return replace(record, variables=variables, dimensions={"time": shape[0], "level": shape[1]})


def spread(values: np.ndarray, index: np.ndarray, count: int, fill: float) -> np.ndarray:
    """Rows of `values` (time, level) at `index` of a longer time axis of `count`, the rest `fill`."""
    out = np.full((count, *values.shape[1:]), fill, dtype=values.dtype)
    out[index] = values
    return out


def averaging_interval(record: RawRecord, found: Mapping[str, Found], interval: float) -> float:
    """Averaging interval that cell_methods state ("time: mean (interval: 1 s)" is the sampling inside the
    mean), else NaN.

    A bare "time: mean" means that each value is the mean over the sampling interval.
    """
    for role in ("eastward", "northward", "upward", "x", "y"):
        if role in found:
            text = str(found[role].variable.attributes.get("cell_methods", ""))
            if re.search(r"time:\s*mean", text, re.IGNORECASE):
                return interval
            if re.search(r"time:\s*point", text, re.IGNORECASE):
                return 0.0
    return float("nan")
