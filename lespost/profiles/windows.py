"""Averages over windows, each with its standard error and effective sample size, honest down to a single snapshot.

Two things limit a window mean: few independent snapshots, and a domain that holds few eddies. The scatter between snapshots
speaks of the first (widened for their correlation), the scatter between tiles of the domain, averaged over the window, of
both; the larger of the two is the standard error. With one snapshot only the tiles are left, and the result says so.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import xarray as xr

from lespost.errors import DataError
from lespost.profiles.settings import WindowsSettings
from lespost.statistics.bootstrap import design_effect
from lespost.statistics.samples import lag_one_pooled


@dataclass(frozen=True)
class Window:
    """An averaging window in run time [s]; snapshots with start <= time <= end belong to it."""

    name: str
    start: float
    end: float

    def members(self, time: np.ndarray) -> np.ndarray:
        """Indices of the snapshots at `time` [s] inside the window."""
        return np.flatnonzero((time >= self.start) & (time <= self.end))


def resolve_windows(settings: WindowsSettings, time: np.ndarray) -> list[Window]:
    """The windows of a run with snapshots at `time` [s]. Raises DataError if none of them holds a snapshot."""
    windows = [Window(item.name, item.start, item.end) for item in settings.over([float(t) for t in time])]
    empty = [window.name for window in windows if not window.members(time).size]
    if not windows or empty:
        which = f'window "{empty[0]}" holds' if empty else f"after a spin-up of {settings.spin_up:g} s there is"
        raise DataError(f"{which} no snapshot; the fields cover {time[0]:g} to {time[-1]:g} s: change [windows].")
    return windows


def average_windows(profiles: xr.Dataset, windows: Sequence[Window]) -> xr.Dataset:
    """Means over each window: dims (window, z) or (window, z_face), each variable X with X_se and X_neff.

    X_se: standard error of the window mean, in the units of X; NaN where nothing tells it (one snapshot, no tiles).
    X_neff: number of independent samples behind it; a sample is one tile of one snapshot where tiles exist, else one
    snapshot. Tile variables themselves are averaged in time only, without errors. Variable `snapshots`: how many.
    """
    time = profiles["time"].values
    parts = [_average(profiles.isel(time=window.members(time))) for window in windows]
    result = xr.concat(parts, dim="window", coords="minimal", compat="override", join="exact")
    result = result.assign_coords(
        window=("window", [window.name for window in windows]),
        window_start=("window", [window.start for window in windows], {"units": "s"}),
        window_end=("window", [window.end for window in windows], {"units": "s"}),
    )
    result["snapshots"] = ("window", [window.members(time).size for window in windows],
                           {"units": "1", "long_name": "snapshots in the window"})
    result.attrs = {**profiles.attrs, "standard_error": "larger of the scatter between snapshots (widened for their correlation) "
                    "and between tiles; a window of one snapshot is one realisation and tells its spatial scatter only"}
    return result


def _average(profiles: xr.Dataset) -> xr.Dataset:
    out: dict[str, xr.DataArray] = {}
    for key in profiles.data_vars:
        name = str(key)
        variable = profiles[name]
        if "time" not in variable.dims:
            continue
        mean = variable.mean("time", keep_attrs=True)
        out[name] = mean
        if name.endswith("_tile") or variable.ndim != 2:
            continue
        tiles = _tiles_of(name, profiles)
        error, samples = _error(variable.values, None if tiles is None else profiles[tiles].values)
        units = variable.attrs.get("units", "1")
        out[f"{name}_se"] = mean.copy(data=error).assign_attrs(
            units=units, long_name=f"standard error of {name}", cell_methods="area: time: standard_error")
        out[f"{name}_neff"] = mean.copy(data=samples).assign_attrs(
            units="1", long_name=f"effective sample size of {name}", cell_methods="")
    return xr.Dataset(out, coords={axis: profiles[axis] for axis in ("z", "z_face") if axis in profiles.coords})


def _tiles_of(name: str, profiles: xr.Dataset) -> str | None:
    """The tile variable that tells the spatial scatter of `name`: its own, or that of its resolved part."""
    for candidate in (f"{name}_tile", f"{name.removesuffix('_total')}_tile"):
        if candidate in profiles:
            return candidate
    return None


def _error(values: np.ndarray, tiles: np.ndarray | None) -> tuple[np.ndarray, np.ndarray]:
    """(standard error, effective samples) by level of the mean of `values` (time, level); tiles (time, level, ty, tx)."""
    count, levels = values.shape
    in_time, samples = np.full(levels, np.nan), np.full(levels, np.nan)
    if count > 1:
        correlation = lag_one_pooled(values)
        effective = max(1.0, count * (1 - correlation) / (1 + correlation))
        in_time = values.std(axis=0, ddof=1) / np.sqrt(effective)
        samples = np.full(levels, effective)
    if tiles is None or tiles.shape[2] * tiles.shape[3] < 2:
        return in_time, samples
    number = tiles.shape[2] * tiles.shape[3]
    over_time = tiles.mean(axis=0)
    effect = np.array([design_effect(level) for level in over_time])
    in_space = over_time.reshape(levels, number).std(axis=1, ddof=1) * np.sqrt(effect / number)
    error = np.fmax(in_time, in_space)
    scatter = tiles.transpose(1, 0, 2, 3).reshape(levels, -1).var(axis=1)
    with np.errstate(invalid="ignore", divide="ignore"):
        independent = np.where(error > 0, scatter / error**2, np.nan)
    return error, np.clip(independent, 1.0, float(count * number))
