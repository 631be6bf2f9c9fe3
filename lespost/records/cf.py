"""netCDF records: CF discrete sampling geometries and OceanSITES files, read as they are found in the world.

Values are unpacked here, one variable at a time, with each file's own scale, offset and fill. Every departure
from the conventions that was met is reported as a finding; none is silently repaired. Decoding of times is in
`time.py`.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np

from lespost.errors import RecordError
from lespost.findings import Finding
from lespost.records.container import open_container
from lespost.records.faults import convention_faults
from lespost.records.raw import RawRecord, RawVariable

#: Values beyond this are fill values whatever the attributes say (the netCDF defaults are 9.97e36).
LARGEST_VALUE = 1e30


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
    stored = open_container(path)
    variables: dict[str, RawVariable] = {}
    for v in stored.variables:
        own = dict(v.attributes)
        if v.values.dtype.kind in "OSU":
            text = _texts(v.values)
            variables[v.name] = RawVariable(v.name, v.dims[: text.ndim], text, own, "text")
        else:
            values, missing = _unpack(v.values, own, v.name, path.name)
            variables[v.name] = RawVariable(v.name, v.dims, values, own, v.values.dtype.name, missing)
    feature = str(stored.attributes.get("featureType", stored.attributes.get("cdm_data_type", "")))
    layout = f"netCDF, {stored.attributes.get('Conventions', 'no Conventions attribute')}"
    record = RawRecord(path, layout, feature, stored.dimensions, variables, stored.attributes)
    findings = convention_faults(record)
    if stored.groups:
        names = ", ".join(stored.groups[:6])
        findings.append(
            Finding(
                "groups-ignored",
                "warning",
                f"{path.name}: groups {names} were not read; only the root group is.",
            )
        )
    return replace(record, findings=tuple(findings))
