"""The canonical series: what record and virtual samples have in common before they are compared.

Dimensions (deployment, time, depth); a record is one deployment. Velocities u, v, w lie in the simulation's
axes [m s-1], depth is positive down [m], time is seconds since `time.attrs["time_origin"]` (an ISO date, or
"run"). Every variable X may have X_flag (int8, QARTOD). `read.py` makes the series of a file,
`lespost.instruments` that of a virtual instrument.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import xarray as xr

from lespost.errors import DataError

FLAG_VALUES = (1, 2, 3, 4, 9)
FLAG_MEANINGS = "pass not_evaluated suspect fail missing"
DIMENSIONS = ("deployment", "time", "depth")


@dataclass(frozen=True)
class SeriesVariable:
    """Unit and names of a variable of the series."""

    units: str
    long_name: str
    standard_name: str | None


SERIES_VARIABLES: Mapping[str, SeriesVariable] = {
    "u": SeriesVariable("m s-1", "velocity along x of the simulation", "sea_water_x_velocity"),
    "v": SeriesVariable("m s-1", "velocity along y of the simulation", "sea_water_y_velocity"),
    "w": SeriesVariable("m s-1", "upward velocity", "upward_sea_water_velocity"),
    "error_velocity": SeriesVariable(
        "m s-1",
        "error velocity of opposing beam pairs",
        "indicative_error_from_multibeam_acoustic_doppler_velocity_profiler_in_sea_water",
    ),
    "temperature": SeriesVariable("degC", "sea water temperature", "sea_water_temperature"),
    "salinity": SeriesVariable("1", "sea water practical salinity", "sea_water_practical_salinity"),
}


def make_series(
    variables: Mapping[str, np.ndarray],
    time: np.ndarray,
    depth: np.ndarray,
    *,
    instrument: str,
    time_origin: str = "run",
    flags: Mapping[str, np.ndarray] | None = None,
    averaging_interval: float = float("nan"),
    noise_standard_deviation: float = float("nan"),
    provenance: str = "",
) -> xr.Dataset:
    """A canonical series from arrays (deployment, time, depth), or (time, depth) for one deployment.

    time: seconds since `time_origin`, increasing. depth: cell centres [m, positive down]. flags: QARTOD
    numbers by variable. averaging_interval [s], noise_standard_deviation [m s-1]: NaN where unknown. Raises
    DataError on shapes that do not fit.
    """
    time = np.asarray(time, dtype=np.float64)
    depth = np.atleast_1d(np.asarray(depth, dtype=np.float64))
    data: dict[str, tuple[tuple[str, ...], np.ndarray, dict[str, object]]] = {}
    count = None
    for name, values in variables.items():
        array = np.asarray(values)
        array = array[None] if array.ndim == 2 else array
        if array.ndim != 3 or array.shape[1:] != (time.size, depth.size):
            raise DataError(
                f'series of {instrument}: "{name}" has shape {np.shape(values)}; expected (deployment, '
                f"{time.size} times, "
                f"{depth.size} depths)."
            )
        if count not in (None, array.shape[0]):
            raise DataError(
                f'series of {instrument}: "{name}" has {array.shape[0]} deployments, others {count}.'
            )
        count = array.shape[0]
        known = SERIES_VARIABLES.get(name)
        attrs: dict[str, object] = {"units": known.units, "long_name": known.long_name} if known else {}
        data[name] = (DIMENSIONS, array, attrs)
    for name, values in (flags or {}).items():
        array = np.asarray(values, dtype=np.int8)
        array = array[None] if array.ndim == 2 else array
        if name not in data or array.shape != data[name][1].shape:
            raise DataError(f'series of {instrument}: flags of "{name}" do not have the shape of the data.')
        data[f"{name}_flag"] = (
            DIMENSIONS,
            array,
            {
                "standard_name": "quality_flag",
                "flag_values": np.array(FLAG_VALUES, dtype=np.int8),
                "flag_meanings": FLAG_MEANINGS,
            },
        )
    out = xr.Dataset(
        data,
        coords={
            "time": ("time", time, {"units": "s", "long_name": "time", "time_origin": time_origin}),
            "depth": (
                "depth",
                depth,
                {"units": "m", "positive": "down", "long_name": "depth of cell centre"},
            ),
            "deployment": ("deployment", np.arange(count or 0)),
        },
        attrs={
            "instrument": instrument,
            "featureType": "timeSeriesProfile",
            "averaging_interval": float(averaging_interval),
            "noise_standard_deviation": float(noise_standard_deviation),
            "chain": "[]",
            "provenance": provenance,
        },
    )
    return out


def compass_to_simulation(
    east: np.ndarray, north: np.ndarray, x_axis_compass_bearing: float
) -> tuple[np.ndarray, np.ndarray]:
    """(u, v) along the simulation's x and y from eastward and northward components.

    x_axis_compass_bearing: direction of +x, degrees clockwise from true north; +y lies 90 degrees
    counter-clockwise of it. For a bearing of 90, u is east and v north. Derived here.
    """
    bearing = np.deg2rad(x_axis_compass_bearing)
    # rounded to 15 digits, so that quarter turns are exact and a component at rest stays at zero
    sine, cosine = np.round(np.sin(bearing), 15), np.round(np.cos(bearing), 15)
    return east * sine + north * cosine, -east * cosine + north * sine


def magnetic_to_true(
    east: np.ndarray, north: np.ndarray, declination: float
) -> tuple[np.ndarray, np.ndarray]:
    """True east and north components from components along magnetic axes; declination in degrees, positive
    east.

    A vector at magnetic bearing b lies at true bearing b + declination. Derived here.
    """
    angle = np.deg2rad(declination)
    return east * np.cos(angle) + north * np.sin(angle), -east * np.sin(angle) + north * np.cos(angle)
