"""netCDF records: CF discrete sampling geometries and OceanSITES files, read as they are found in the world.

Values are unpacked here, one variable at a time, with each file's own scale, offset and fill. Every departure
from the conventions that was met is reported as a finding; none is silently repaired. Decoding of times is in
`time.py`.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np

from lespost.errors import RecordError
from lespost.findings import Finding
from lespost.records.raw import RawRecord, RawVariable

#: Values beyond this are fill values whatever the attributes say (the netCDF defaults are 9.97e36).
LARGEST_VALUE = 1e30

#: A record larger than this many values per variable is no moored record, or its header is damaged.
MOST_VALUES = 2_000_000_000


def _attribute(value: Any) -> Any:
    """A plain Python or numpy value of an attribute, texts with their NULs removed."""
    if isinstance(value, bytes):
        value = value.decode("utf-8", "replace")
    return value.replace("\x00", "") if isinstance(value, str) else value


def _texts(values: np.ndarray) -> np.ndarray:
    """An object array of str; character arrays are joined along their last axis."""
    if values.dtype.kind == "S" and values.dtype.itemsize == 1 and values.ndim > 0:
        joined = np.array([b"".join(row) for row in values.reshape(-1, values.shape[-1])], dtype=object)
        values = joined.reshape(values.shape[:-1])
    flat = [v.decode("utf-8", "replace") if isinstance(v, bytes) else str(v) for v in np.ravel(values)]
    out = np.empty(len(flat), dtype=object)
    out[:] = [t.replace("\x00", "").strip() for t in flat]
    return out.reshape(values.shape)


def _unpack(values: np.ndarray, attributes: dict[str, Any], name: str, file: str) -> tuple[np.ndarray, int]:
    """Physical values and the count of missing ones. Integers without packing and without fill stay
    integers."""
    if str(attributes.get("_Unsigned", "")).lower() == "true" and values.dtype.kind == "i":
        values = values.view(values.dtype.str.replace("i", "u"))
    missing = np.zeros(values.shape, dtype=bool)
    for key in ("_FillValue", "missing_value"):
        if key not in attributes:
            continue
        for fill in np.atleast_1d(np.asarray(attributes[key])):
            if not isinstance(fill, np.number):
                continue
            missing |= np.isnan(values) if values.dtype.kind == "f" and np.isnan(fill) else values == fill
    if values.dtype.kind == "f":
        with np.errstate(invalid="ignore"):
            missing |= ~np.isfinite(values) | (np.abs(values) > LARGEST_VALUE)
    else:
        defaults = {
            "i2": -32767,
            "i4": -2147483647,
            "i8": -9223372036854775806,
            "u2": 65535,
            "u4": 4294967295,
        }
        default = defaults.get(values.dtype.str[1:])
        if default is not None and "_FillValue" not in attributes:
            missing |= values == default
    packed = "scale_factor" in attributes or "add_offset" in attributes
    if packed:
        try:
            scale, offset = (
                float(attributes.get("scale_factor", 1.0)),
                float(attributes.get("add_offset", 0.0)),
            )
        except (TypeError, ValueError):
            raise RecordError(f'{file}: scale_factor or add_offset of "{name}" is not one number.') from None
        if not (np.isfinite(scale) and np.isfinite(offset)) or scale == 0.0:
            raise RecordError(
                f'{file}: scale_factor {scale} and add_offset {offset} of "{name}" cannot be used.'
            )
        values = values.astype(np.float64) * scale + offset
    if missing.any() and values.dtype.kind != "f":
        values = values.astype(np.float64)
    if missing.any():
        values = np.where(missing, values.dtype.type(np.nan), values)
    return values, int(missing.sum())


def read_netcdf(path: Path) -> RawRecord:
    """A netCDF file as a `RawRecord`. Raises RecordError if it cannot be opened or read to the end."""
    import netCDF4

    name = path.name
    try:
        with netCDF4.Dataset(str(path)) as handle:
            handle.set_auto_maskandscale(False)
            handle.set_auto_chartostring(False)
            attributes = {str(k): _attribute(handle.getncattr(k)) for k in handle.ncattrs()}
            dimensions = {str(k): len(d) for k, d in handle.dimensions.items()}
            groups = [str(g) for g in handle.groups]
            variables: dict[str, RawVariable] = {}
            for key, variable in handle.variables.items():
                if variable.size > MOST_VALUES:
                    raise RecordError(
                        f'{name}: variable "{key}" claims {variable.size} values; the header is damaged.'
                    )
                own = {str(a): _attribute(variable.getncattr(a)) for a in variable.ncattrs()}
                if not isinstance(variable.dtype, np.dtype) and variable.dtype is not str:
                    continue  # compound and opaque types hold no record data
                try:
                    raw = np.asarray(variable[...])
                except MemoryError:
                    raise RecordError(
                        f'{name}: variable "{key}" claims {variable.size} values, more than memory.'
                    ) from None
                dims = tuple(str(d) for d in variable.dimensions)
                if raw.dtype.kind in "OSU":
                    text = _texts(raw)
                    variables[str(key)] = RawVariable(str(key), dims[: text.ndim], text, own, "text")
                else:
                    values, missing = _unpack(raw, own, str(key), name)
                    variables[str(key)] = RawVariable(str(key), dims, values, own, raw.dtype.name, missing)
    except RecordError:
        raise
    except Exception as error:  # the netCDF and HDF5 libraries raise many kinds for a damaged file
        size = path.stat().st_size if path.exists() else 0
        reason = " ".join(str(error).split())[:160] or type(error).__name__
        raise RecordError(
            f"{name}: cannot be read as netCDF ({reason}; {size} bytes): the file is truncated, damaged or "
            "of another kind. "
            "Copy it again and compare its size with the original."
        ) from None
    feature = str(attributes.get("featureType", attributes.get("cdm_data_type", "")))
    record = RawRecord(
        path,
        f"netCDF, {attributes.get('Conventions', 'no Conventions attribute')}",
        feature,
        dimensions,
        variables,
        attributes,
    )
    findings = _faults(record)
    if groups:
        findings.append(
            Finding(
                "groups-ignored",
                "warning",
                f"{name}: groups {', '.join(groups[:6])} were not read; only the root group is.",
            )
        )
    return RawRecord(path, record.layout, feature, dimensions, variables, attributes, tuple(findings))


#: Spellings that UDUNITS or the CF tables do not have, and what they stand for.
ODD_UNITS = {
    "psu": "1", "pss-78": "1", "decibar": "dbar", "decibars": "dbar", "degree_north": "degrees_north",
    "degree_east": "degrees_east", "meter/second": "m s-1", "meters/second": "m s-1", "meter": "m",
    "meters": "m", "deg c": "degree_Celsius",
}  # fmt: skip

#: Plausible range of sea water values in SI; outside it a unit label is suspected (common practice, no
#: source).
PLAUSIBLE = {
    "sea_water_electrical_conductivity": ("S m-1", 0.0, 10.0),
    "sea_water_temperature": ("degC", -3.0, 45.0),
}


def _faults(record: RawRecord) -> list[Finding]:
    """The departures from CF and OceanSITES that real files show, each as a finding."""
    file, out = record.path.name, []

    def add(code: str, message: str, severity: str = "note", **numbers: float) -> None:
        out.append(Finding(code, severity, f"{file}: {message}", **numbers))  # type: ignore[arg-type]

    if "featureType" not in record.attributes:
        add("feature-type-absent", "no featureType attribute; the layout was taken from the dimensions.")
    duration = str(record.attributes.get("time_coverage_duration", ""))
    if "nan" in duration.lower():
        add("duration-not-a-number", f'time_coverage_duration is "{duration}".')
    looking = {
        str(v).lower()
        for k, v in record.attributes.items()
        if "orientation" in k.lower() and isinstance(v, str)
    }
    if {"up", "down"} <= looking:
        add(
            "orientation-contradicts",
            "attributes call the instrument both up- and down-looking; check the depths of its cells.",
            "warning",
        )
    title = str(record.attributes.get("title", ""))
    for variable in record.variables.values():
        name, own = variable.name, variable.attributes
        if variable.is_quality:
            if variable.stored_dtype.startswith("float"):
                add("flags-not-integers", f'quality flags "{name}" are stored as {variable.stored_dtype}.')
            if "flag_meanings" not in own and not variable.is_text:
                add("flag-meanings-absent", f'quality flags "{name}" have no flag_meanings.', "warning")
            if (variable.units or "1") not in ("1", ""):
                add("flags-with-units", f'quality flags "{name}" carry the unit "{variable.units}".')
            continue
        if variable.dims == (name,) and "_FillValue" in own:
            add("fill-on-coordinate", f'coordinate "{name}" has a _FillValue, which CF forbids.')
        if str(own.get("axis", "")) in ("x", "y", "z", "t"):
            add("axis-lower-case", f'axis of "{name}" is "{own["axis"]}"; CF writes capitals.')
        if variable.units is not None and variable.units.strip().lower() in ODD_UNITS:
            meant = ODD_UNITS[variable.units.strip().lower()]
            add("unit-spelling", f'unit "{variable.units}" of "{name}" was read as "{meant}".')
        for companion in str(own.get("ancillary_variables", "")).split():
            if companion not in record.variables:
                twins = [v for v in record.variables if v.lower() == companion.lower()]
                what = f'"{twins[0]}", which differs in case, was taken' if twins else "no such variable"
                add(
                    "ancillary-name",
                    f'ancillary variable "{companion}" of "{name}": {what}.',
                    "note" if twins else "warning",
                )
        _range_faults(record, variable, add)
        if "velocity" in variable.standard_name and "ctd" in title.lower():
            add("title-misleads", f'title "{title}" speaks of a CTD but the file holds velocities.')
            title = ""
    return out


def _range_faults(record: RawRecord, variable: RawVariable, add: Any) -> None:
    """Values outside their declared or plausible range, which betray a wrong unit label."""
    from lespost.units import convert, convertible

    values = variable.values
    if (
        variable.is_text
        or values.size == 0
        or values.dtype.kind not in "fiu"
        or not np.isfinite(values).any()
    ):
        return
    low, high = _valid_range(variable)
    finite = values[np.isfinite(values)]
    outside = float(np.mean((finite < low) | (finite > high)))
    if outside > 0:
        add(
            "outside-valid-range",
            f'{100 * outside:.1f} % of "{variable.name}" lie outside its valid range {low:g} to {high:g}'
            + ("; the range or the unit label is wrong." if outside > 0.5 else "."),
            "warning" if outside > 0.5 else "note",
            value=outside,
            limit=0.0,
        )
    if variable.standard_name in PLAUSIBLE and variable.units:
        unit, least, most = PLAUSIBLE[variable.standard_name]
        if convertible(variable.units, unit):
            median = float(np.median(convert(finite.astype(np.float64), variable.units, unit)))
            if not least <= median <= most:
                add(
                    "unit-implausible",
                    f'median of "{variable.name}" is {median:g} {unit} by its unit "{variable.units}", '
                    f"outside {least:g} to "
                    f"{most:g}; the label is probably wrong.",
                    "warning",
                    value=median,
                    limit=most,
                    units=unit,
                )


def _valid_range(variable: RawVariable) -> tuple[float, float]:
    """The declared valid range in unpacked units; infinite where none is declared or the values were
    packed."""
    own = variable.attributes
    if "scale_factor" in own or "add_offset" in own:
        return -np.inf, np.inf  # CF states it in packed units, files in either: not safe to use
    try:
        if "valid_range" in own:
            low, high = (float(v) for v in np.atleast_1d(own["valid_range"]))
        else:
            low, high = float(own.get("valid_min", -np.inf)), float(own.get("valid_max", np.inf))
    except (TypeError, ValueError):
        return -np.inf, np.inf
    return (low, high) if low <= high else (-np.inf, np.inf)
