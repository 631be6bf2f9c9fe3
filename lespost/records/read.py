"""From a file of a field record to the canonical series: dispatch by kind, then one road for all kinds.

`cf.py` and `csv_table.py` say what a file holds, `roles.py` which variable is which, `vertical.py` where the
cells lie, `flags.py` what is good. This module puts them together and refuses what cannot be read safely.
"""

from __future__ import annotations

import json
from dataclasses import replace
from datetime import UTC, timedelta
from pathlib import Path

import numpy as np
import xarray as xr

from lespost.errors import RecordError
from lespost.findings import Finding
from lespost.records import fold
from lespost.records.axes import simulation_components, unit_mixture
from lespost.records.cf import read_netcdf
from lespost.records.csv_table import read_csv
from lespost.records.gather import Gathered, gather_variable
from lespost.records.raw import RawRecord
from lespost.records.roles import Found, find_role, roles_of, velocity_roles
from lespost.records.settings import RecordSettings
from lespost.records.time import TimeAxis, check_order, iso, numeric_times, parse_iso, sampling, text_times
from lespost.records.vertical import CellDepths, cell_depths, onto_fixed_depths
from lespost.series import make_series

_MAGIC = (b"CDF", b"\x89HDF")


def open_raw(path: Path, kind: str = "auto") -> RawRecord:
    """What the file holds, without any decision. Raises RecordError if it is absent or cannot be read."""
    if not path.exists():
        raise RecordError(
            f"{path}: no such file; check the path (paths in a recipe are relative to the recipe)."
        )
    if path.is_dir():
        raise RecordError(f"{path}: is a folder; name one file of the record.")
    if kind == "auto":
        with path.open("rb") as handle:
            start = handle.read(4)
        if not start:
            raise RecordError(f"{path.name}: is empty (0 bytes); copy it again.")
        kind = "netcdf" if start.startswith(_MAGIC) else "csv"
        if kind == "csv" and path.suffix.lower() in (".nc", ".nc4", ".cdf", ".h5", ".hdf5"):
            raise RecordError(
                f"{path.name}: is named like netCDF but does not begin like it; the file is damaged or was "
                "not transferred whole."
            )
    return read_netcdf(path) if kind == "netcdf" else read_csv(path)


def time_axis(record: RawRecord, found: Found, settings: RecordSettings | None = None) -> TimeAxis:
    """The times of a record in file order. Raises RecordError (see `time.py`)."""
    variable = found.variable
    where = f'{record.path.name}, "{variable.name}"'
    if variable.values.ndim > 1:
        raise RecordError(f"{where}: times have {variable.values.ndim} axes; one time per profile is needed.")
    values = np.atleast_1d(variable.values)
    if variable.is_text:
        return text_times(values, where)
    units = (settings.column_units if settings else {}).get(variable.name, variable.units)
    calendar = str(variable.attributes.get("calendar", "standard"))
    return numeric_times(values, units, calendar, where, variable.stored_dtype)


def read_record(settings: RecordSettings, base: Path) -> xr.Dataset:
    """The canonical series of a field record (one deployment), on a regular time axis, velocities in
    simulation axes.

    attrs["decisions"] and attrs["findings"] are JSON lists of what was decided and what was found wrong.
    Raises RecordError where the record has no velocities, or cannot be read without guessing.
    """
    path = Path(settings.path)
    record = open_raw(path if path.is_absolute() else base / path, settings.kind)
    file = record.path.name
    columns = {str(k): v for k, v in settings.columns.items()}
    if (
        record.feature_type.lower().startswith(("trajectory", "profile"))
        or record.feature_type.lower() == "point"
    ):
        raise RecordError(
            f"{file}: is a {record.feature_type} record; only fixed instruments (timeSeries, "
            "timeSeriesProfile) can be compared "
            "with virtual samples. `lespost record` describes it."
        )
    record = fold.select_station(record, settings.station)
    record = fold.unfold_ragged(record)
    found = roles_of(record, columns)
    if "time" not in found:
        raise RecordError(f"{file}: no time axis was found; name it with columns.time.")
    if not velocity_roles(found):
        have = ", ".join(v.name for v in record.variables.values() if not v.is_quality)
        raise RecordError(
            f"{file}: holds no water velocity that is recognised (it holds {have}), so it cannot be "
            "compared; name the columns, "
            'for example columns = { eastward = "u1" }. `lespost record` describes it.'
        )
    record = fold.fold_table(record, found)
    found = {role: Found(record.variables[f.variable.name], f.how, f.evidence) for role, f in found.items()}
    axis = time_axis(record, found["time"], settings)
    gathered, depths = _gather(record, found, settings, axis)
    gathered, axis, depths = _cut(gathered, axis, depths, settings, file)
    check_order(axis, f'{file}, "{found["time"].variable.name}"')
    return _assemble(record, found, settings, axis, gathered, depths)


def _gather(
    record: RawRecord, found: dict[str, Found], settings: RecordSettings, axis: TimeAxis
) -> tuple[dict[str, Gathered], CellDepths]:
    """Every velocity and its companions as (time, level) with flags, and where the cells lie."""
    file = record.path.name
    time_variable = found["time"].variable
    time_dim = time_variable.dims[0] if time_variable.dims else "time"
    wanted = [
        *velocity_roles(found),
        *(r for r in ("direction_to", "error_velocity", "temperature", "salinity") if r in found),
    ]
    main = found[velocity_roles(found)[0]].variable
    level_dim = _level_dimension(record, main.name, main.dims, time_dim)
    gathered: dict[str, Gathered] = {}
    for role in wanted:
        hit = found[role]
        own = _level_dimension(record, hit.variable.name, hit.variable.dims, time_dim)
        if own != level_dim:
            if role in velocity_roles(found):
                raise RecordError(
                    f'{file}: "{hit.variable.name}" and "{main.name}" do not lie on the same cells.'
                )
            continue  # a companion on other axes, such as the temperature at the head
        gathered[role] = gather_variable(record, role, hit.variable, time_dim, level_dim, settings)
    depths = cell_depths(record, settings, found, main.dims, time_dim, level_dim)
    return gathered, depths


def _level_dimension(record: RawRecord, name: str, dims: tuple[str, ...], time_dim: str) -> str | None:
    """The one axis besides time that is longer than 1, or the vertical one of length 1; None for a single
    level."""
    if time_dim not in dims:
        raise RecordError(
            f'{record.path.name}: "{name}" has no time axis "{time_dim}" (its axes: '
            f"{', '.join(dims) or 'none'})."
        )
    others = [d for d in dims if d != time_dim]
    long = [d for d in others if record.dimensions[d] > 1]
    if len(long) > 1:
        raise RecordError(
            f'{record.path.name}: "{name}" has the axes {", ".join(dims)}; a record needs time and at most '
            "one axis of cells."
        )
    if long:
        return long[0]
    vertical = [d for d in others if d.lower() in ("depth", "z", "height", "level", "range", "bin")]
    return vertical[0] if vertical else None


def _cut(
    gathered: dict[str, Gathered], axis: TimeAxis, depths: CellDepths, settings: RecordSettings, file: str
) -> tuple[dict[str, Gathered], TimeAxis, CellDepths]:
    """Only the samples inside time_window; the origin moves to the first of them."""
    if settings.time_window is None:
        return gathered, axis, depths
    origin = parse_iso(axis.origin, file)
    start, end = ((parse_iso(t, "time_window") - origin).total_seconds() for t in settings.time_window)
    keep = (axis.seconds >= start) & (axis.seconds < end)
    if not keep.any():
        last = (origin + timedelta(seconds=float(axis.seconds.max()))).astimezone(UTC).isoformat()
        raise RecordError(
            f"{file}: time_window {settings.time_window[0]} to {settings.time_window[1]} holds no sample; "
            "the record runs from "
            f"{axis.origin} to {last}."
        )
    seconds = axis.seconds[keep]
    first = origin + timedelta(seconds=float(seconds[0]))
    cut = {role: g.at(keep) for role, g in gathered.items()}
    if depths.values.ndim == 2:
        depths = replace(depths, values=depths.values[keep])
    return cut, TimeAxis(seconds - seconds[0], iso(first), axis.findings), depths


def _assemble(
    record: RawRecord,
    found: dict[str, Found],
    settings: RecordSettings,
    axis: TimeAxis,
    gathered: dict[str, Gathered],
    depths: CellDepths,
) -> xr.Dataset:
    """Rotation into the simulation's axes, fixed depths, a regular time axis, and the attributes."""
    file = record.path.name
    findings = [*record.findings, *axis.findings, *depths.findings]
    decisions = [found[r].decision(r) for r in ("time", *gathered)] + [depths.decision]
    for item in gathered.values():
        findings += item.findings
        decisions += item.decisions
    findings += unit_mixture(record, gathered)
    values, flags = simulation_components(record, settings, gathered, findings, decisions)
    target, values, flags = _fixed_depths(settings, file, depths, values, flags, findings)
    grid = sampling(axis.seconds)
    seconds = axis.seconds
    if grid.regular and grid.gaps:
        count = int(grid.index[-1]) + 1
        if count > 20 * seconds.size:
            raise RecordError(
                f"{file}: gaps make up {100 * (1 - seconds.size / count):.0f} % of the record; choose a part "
                "with time_window."
            )
        findings.append(
            Finding(
                "time-gaps",
                "note",
                f"{file}: {grid.gaps} gaps in time, {count - seconds.size} samples missing.",
                float(count - seconds.size),
            )
        )
        seconds = np.interp(np.arange(count), grid.index, seconds)
        values = {k: fold.spread(v, grid.index, count, np.nan) for k, v in values.items()}
        flags = {k: fold.spread(v, grid.index, count, 9) for k, v in flags.items()}
    elif not grid.regular:
        findings.append(
            Finding(
                "time-irregular",
                "warning",
                f"{file}: steps depart by up to {100 * grid.jitter:.0f} % from multiples of the median step "
                f"{grid.interval:g} s; "
                "the series can only be used with an averaging_interval.",
                grid.jitter,
                0.1,
            )
        )
    series = make_series(
        values,
        seconds,
        target,
        instrument=settings.name,
        time_origin=axis.origin,
        flags=flags,
        averaging_interval=fold.averaging_interval(record, found, grid.interval),
        noise_standard_deviation=np.nan
        if settings.noise_standard_deviation is None
        else settings.noise_standard_deviation,
        provenance=f"field record {file}",
    )
    for role in ("latitude", "longitude"):
        hit = found.get(role) or find_role(record, role)
        if hit is not None and not hit.variable.is_text and hit.variable.values.size:
            place = float(np.nanmedian(hit.variable.values.astype(np.float64)))
            series = series.assign_coords({role: ((), place)})
    series.attrs.update(
        kind="record",
        regular=int(grid.regular),
        decisions=json.dumps([d.to_dict() for d in decisions]),
        findings=json.dumps([f.to_dict() for f in findings]),
    )
    return series


def _fixed_depths(
    settings: RecordSettings,
    file: str,
    depths: CellDepths,
    values: dict[str, np.ndarray],
    flags: dict[str, np.ndarray],
    findings: list[Finding],
) -> tuple[np.ndarray, dict[str, np.ndarray], dict[str, np.ndarray]]:
    """Cells on fixed depths, ascending; moving cells are interpolated to their median depths as the settings
    say."""
    if depths.values.ndim == 1:
        target = depths.values
    else:
        moving = depths.values
        with np.errstate(all="ignore"):
            target = np.nanmedian(moving, axis=0)
            excursion = float(np.nanmax(moving - target) - np.nanmin(moving - target))
        step = float(np.median(np.abs(np.diff(target)))) if target.size > 1 else float("nan")
        if excursion > 0.01 * step or (target.size == 1 and excursion > 0.5):
            message = f"{file}: cells move over {excursion:.2f} m (median spacing {step:.2f} m)"
            if settings.moving_depths == "refuse":
                raise RecordError(
                    f'{message}; moving_depths = "interpolate" puts every profile on the median depths.'
                )
            done = "interpolated to their median depths from samples flagged pass or not evaluated"
            if target.size == 1 or settings.moving_depths == "nominal":
                done = "taken at their median depths"
            else:
                for name in values:
                    good = np.isin(flags[name], (1, 2))
                    kept = onto_fixed_depths(np.where(good, values[name], np.nan), moving, target)
                    values[name] = kept
                    # a profile with samples nobody checked stays "not evaluated" as a whole
                    level = np.where((flags[name] == 2).any(axis=1), 2, 1)[:, None]
                    flags[name] = np.where(np.isfinite(kept), level, 9).astype(np.int8)
            findings.append(
                Finding("cells-move", "warning", f"{message}; they were {done}.", excursion, 0.01 * step, "m")
            )
    order = np.argsort(target)
    if np.unique(target).size < target.size:
        raise RecordError(f"{file}: two cells share a depth; name the right coordinate with columns.depth.")
    values = {k: v[:, order] for k, v in values.items()}
    flags = {k: v[:, order] for k, v in flags.items()}
    return target[order], values, flags


def read_series(path: Path) -> xr.Dataset:
    """A series written by `write.write_series`, with all its deployments. Raises RecordError if it is not
    one."""
    record = open_raw(path)
    file = path.name
    missing = [n for n in ("time", "depth") if n not in record.variables]
    if missing or "instrument" not in record.attributes or "time_origin" not in record.attributes:
        raise RecordError(
            f"{file}: is no series written by this package (no "
            f"{', '.join(missing) or 'instrument or time_origin'})."
        )
    dims = ("deployment", "time", "depth")
    values, flags = {}, {}
    for name, v in record.variables.items():
        if v.dims != dims:
            continue
        if name.endswith("_flag"):
            flags[name.removesuffix("_flag")] = v.values
        else:
            values[name] = v.values
    if not values:
        raise RecordError(f"{file}: holds no series over deployment, time and depth.")
    axis = numeric_times(
        record.variables["time"].values, record.variables["time"].units, "standard", f"{file}, time"
    )
    check_order(axis, f"{file}, time")
    seconds = np.asarray(record.variables["time"].values, dtype=np.float64)
    series = make_series(
        values,
        seconds,
        record.variables["depth"].values,
        instrument=str(record.attributes["instrument"]),
        time_origin=str(record.attributes["time_origin"]),
        flags=flags,
    )
    for name, v in record.variables.items():
        if v.dims == dims or name in ("time", "depth"):
            continue
        if v.dims in ((), ("deployment",)) and name in (
            "latitude",
            "longitude",
            "deployment_x",
            "deployment_y",
        ):
            series = series.assign_coords({name: (v.dims, v.values)})
        elif v.dims == ("deployment",) and name == "deployment_name":
            series = series.assign_coords(deployment=("deployment", v.values.astype(str)))
        elif not v.is_text and set(v.dims) <= set(dims):
            series[name] = (
                v.dims,
                v.values,
                {k: a for k, a in v.attributes.items() if k in ("units", "long_name")},
            )
    kept = {
        k: a for k, a in record.attributes.items() if k not in ("time_origin", "Conventions", "cdm_data_type")
    }
    series.attrs.update(kept)
    return series
