"""Writing a series, recorded or virtual, as CF discrete sampling geometry (timeSeriesProfile, orthogonal in
time and depth).

One station per deployment. Files carry checksums of their data (fletcher32), so that damage is an error on
reading and never a number. `read.read_series` reads them back.
"""

from __future__ import annotations

import os
from collections.abc import Mapping
from pathlib import Path

import numpy as np
import xarray as xr

from lespost import __version__
from lespost.errors import RecordError
from lespost.series import FLAG_MEANINGS, FLAG_VALUES, SERIES_VARIABLES

_REQUIRED_ATTRIBUTES = ("instrument", "chain")


def write_series(series: xr.Dataset, path: Path, attributes: Mapping[str, str] | None = None) -> Path:
    """Write a canonical series to `path` (netCDF-4), atomically; returns the path.

    attributes: further global attributes (title, summary, history ...). Raises RecordError if the series
    lacks the canonical dimensions or attributes.
    """
    for name in ("deployment", "time", "depth"):
        if name not in series.dims:
            raise RecordError(f"series has no dimension {name}; it cannot be written as timeSeriesProfile.")
    for name in _REQUIRED_ATTRIBUTES:
        if name not in series.attrs:
            raise RecordError(f"series has no attribute {name}; it cannot be written.")
    out = xr.Dataset(attrs=dict(series.attrs))
    out.attrs.update(
        Conventions="CF-1.8, ACDD-1.3",
        featureType="timeSeriesProfile",
        cdm_data_type="TimeSeriesProfile",
    )
    out.attrs.setdefault("title", f"Velocity series of {series.attrs['instrument']}")
    out.attrs.setdefault(
        "summary", "Velocity series in the axes of the simulation, one station per deployment"
    )
    recorded = out.attrs.get("kind") == "record"
    depths = np.asarray(series["depth"], dtype=np.float64)
    defaults = {
        "history": f"written by lespost {__version__}",
        "source": "field record" if recorded else "virtual instrument in a large-eddy simulation",
        "keywords": "ocean turbulence, velocity profiles",
        "standard_name_vocabulary": "CF Standard Name Table v93",
        "geospatial_vertical_min": float(depths.min()),
        "geospatial_vertical_max": float(depths.max()),
        "geospatial_vertical_positive": "down",
    }
    for name, value in defaults.items():
        out.attrs.setdefault(name, value)
    out.attrs.update(attributes or {})
    origin = str(series["time"].attrs.get("time_origin", "run"))
    out.attrs["time_origin"] = origin
    reference = "1970-01-01T00:00:00Z" if origin == "run" else origin
    out["time"] = (
        "time",
        np.asarray(series["time"], dtype=np.float64),
        {
            "standard_name": "time",
            "long_name": "time since the start of the run" if origin == "run" else "time of measurement",
            "units": f"seconds since {reference}",
            "calendar": "standard",
            "axis": "T",
        },
    )
    out["depth"] = (
        "depth",
        np.asarray(series["depth"], dtype=np.float64),
        {
            "standard_name": "depth",
            "long_name": "depth of cell centre",
            "units": "m",
            "positive": "down",
            "axis": "Z",
        },
    )
    count = series.sizes["deployment"]
    labels = (
        [str(v) for v in series["deployment"].values]
        if "deployment" in series.coords
        else [str(i) for i in range(count)]
    )
    out["deployment_name"] = (
        "deployment",
        np.array(labels, dtype=object),
        {"cf_role": "timeseries_id", "long_name": "name of the deployment"},
    )
    positions = _positions(series, count)
    for place, position in positions.items():
        out[place] = position
    # axes of what an instrument says of itself, such as the wavelengths of its response
    further = [str(d) for d in series.dims if d not in ("deployment", "time", "depth") and d in series.coords]
    for axis in further:
        out[axis] = (axis, np.asarray(series[axis], dtype=np.float64), dict(series[axis].attrs))
    coordinates = " ".join(["time", "depth", *positions, "deployment_name"])
    encoding: dict[str, dict[str, object]] = {
        "time": {"_FillValue": None},
        "depth": {"_FillValue": None},
        **{name: {"_FillValue": None} for name in (*positions, *further)},
    }
    for data_name, variable in series.data_vars.items():
        key = str(data_name)
        if key.endswith("_flag"):
            out[key] = (
                variable.dims,
                variable.values.astype(np.int8),
                {
                    "standard_name": "quality_flag",
                    "long_name": f"quality flag of {key.removesuffix('_flag')}",
                    "flag_values": np.array(FLAG_VALUES, dtype=np.int8),
                    "flag_meanings": FLAG_MEANINGS,
                    "units": "1",
                },
            )
            encoding[key] = {"_FillValue": None, "zlib": True, "complevel": 1, "fletcher32": True}
            continue
        known = SERIES_VARIABLES.get(key)
        attrs = {k: v for k, v in variable.attrs.items() if k != "coordinates"}
        if known is not None:
            attrs = {"units": known.units, "long_name": known.long_name, **attrs}
            attrs["coverage_content_type"] = "physicalMeasurement" if recorded else "modelResult"
            if known.standard_name:
                attrs["standard_name"] = known.standard_name
        if f"{key}_flag" in series:
            attrs["ancillary_variables"] = f"{key}_flag"
        out[key] = (variable.dims, variable.values, attrs)
        if variable.dims == ("deployment", "time", "depth"):
            out[key].encoding["coordinates"] = coordinates
        if variable.dtype.kind == "f" and variable.ndim:
            fill = np.array(-9999.0, dtype=variable.dtype)
            encoding[key] = {"_FillValue": fill, "zlib": True, "complevel": 1, "fletcher32": True}
    path = Path(path)
    partial = path.with_name(path.name + ".part")
    out.to_netcdf(partial, engine="netcdf4", format="NETCDF4", encoding=encoding)
    os.replace(partial, path)
    return path


def _positions(
    series: xr.Dataset, count: int
) -> dict[str, tuple[tuple[str, ...], np.ndarray, dict[str, str]]]:
    """Horizontal positions of the deployments: latitude and longitude of a record, x and y of a virtual
    instrument."""
    known = {
        "latitude": {"standard_name": "latitude", "long_name": "latitude", "units": "degrees_north"},
        "longitude": {"standard_name": "longitude", "long_name": "longitude", "units": "degrees_east"},
        "deployment_x": {
            "standard_name": "projection_x_coordinate",
            "long_name": "position along x in the simulation's domain",
            "units": "m",
        },
        "deployment_y": {
            "standard_name": "projection_y_coordinate",
            "long_name": "position along y in the simulation's domain",
            "units": "m",
        },
    }
    out: dict[str, tuple[tuple[str, ...], np.ndarray, dict[str, str]]] = {}
    for name, attrs in known.items():
        if name in series.coords and series[name].dims in ((), ("deployment",)):
            values = np.broadcast_to(np.asarray(series[name], dtype=np.float64), (count,)).copy()
            if np.isfinite(values).all():
                out[name] = (("deployment",), values, attrs)
    return out
