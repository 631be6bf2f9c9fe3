"""Small record files with known contents, written the way instruments' files are."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np

QARTOD = {
    "flag_values": np.array([1, 2, 3, 4, 9], "i1"),
    "flag_meanings": "pass not_evaluated suspect fail missing",
}

NAMES = {
    "u": "eastward_sea_water_velocity",
    "v": "northward_sea_water_velocity",
    "w": "upward_sea_water_velocity",
}


def moored_profiler(
    path: Path,
    values: Mapping[str, np.ndarray],
    *,
    time: np.ndarray | None = None,
    depth: np.ndarray | None = None,
    flags: Mapping[str, np.ndarray] | None = None,
    flag_attributes: Mapping[str, Any] | None = None,
    units: Mapping[str, str | None] | None = None,
    attributes: Mapping[str, Any] | None = None,
    variable_attributes: Mapping[str, Mapping[str, Any]] | None = None,
    time_units: str = "seconds since 2026-01-01T00:00:00Z",
    time_type: str = "f8",
    depth_attributes: Mapping[str, Any] | None = None,
    fletcher32: bool = False,
) -> Path:
    """A timeSeriesProfile file of (time, depth) arrays called u, v, w; returns its path."""
    first = next(iter(values.values()))
    time = np.arange(first.shape[0]) * 60.0 if time is None else time
    depth = 5.0 + 2.0 * np.arange(first.shape[1]) if depth is None else depth
    with netCDF4.Dataset(path, "w") as f:
        f.setncatts({"Conventions": "CF-1.8", "featureType": "timeSeriesProfile", **(attributes or {})})
        f.createDimension("time", len(time))
        f.createDimension("depth", len(depth))
        t = f.createVariable("time", time_type, ("time",), fletcher32=fletcher32)
        t.setncatts({"standard_name": "time", "units": time_units, "axis": "T"})
        t[:] = time
        z = f.createVariable("depth", "f4", ("depth",))
        z.setncatts(
            {
                "standard_name": "depth",
                "units": "m",
                "positive": "down",
                "axis": "Z",
                **(depth_attributes or {}),
            }
        )
        z[:] = depth
        for name, data in values.items():
            unit = (units or {}).get(name, "m s-1")
            x = f.createVariable(
                name, "f4", ("time", "depth"), fill_value=np.float32(-9999), fletcher32=fletcher32
            )
            if name in NAMES:
                x.standard_name = NAMES[name]
            if unit is not None:
                x.units = unit
            if flags and name in flags:
                x.ancillary_variables = f"{name}_qc"
                q = f.createVariable(f"{name}_qc", "i1", ("time", "depth"), fill_value=np.int8(-127))
                q.setncatts(dict(QARTOD if flag_attributes is None else flag_attributes))
                q[:] = flags[name]
            x[:] = np.where(np.isfinite(data), data, -9999.0)
            x.setncatts(dict((variable_attributes or {}).get(name, {})))
    return path
