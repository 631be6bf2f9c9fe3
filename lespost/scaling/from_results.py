"""The table of scales from results folders of `lespost run`: a row per run and window.

V is the larger of the rms crosswind and rms vertical velocity in the upper mixed-layer band of each window, as stated in the name
of the velocity; u*, u_s0, the Stokes drift of the surface layer, h and b0 are those of the window.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from lespost.errors import DataError, RequestError
from lespost.scaling.table import ScaleTable, checked

VELOCITY_NAME = "largest of the rms velocities across the axis and vertical, upper mixed layer, resolved and subgrid"


def table_from_results(folders: Sequence[Path]) -> ScaleTable:
    """A row per folder and window, from regime.csv (first band) and windows.nc.

    The variances are means over the band's levels, rotated to the axis of the band (axis_deg), with the standard errors of
    windows.nc carried as if the levels of a band were fully correlated. Rows have no time: windows of runs are separate samples.
    Raises DataError for a folder without the two files, or fewer than three rows in all; RequestError for a folder given twice.
    """
    seen: set[Path] = set()
    for folder in folders:
        if folder.resolve() in seen:
            raise RequestError(f"{folder}: this results folder is given twice; its windows would count twice, so name it once.")
        seen.add(folder.resolve())
    rows: list[dict[str, float]] = []
    for folder in folders:
        rows += _folder(folder)
    names = ("velocity", "ustar", "us0", "us_sl", "h", "b0")
    columns = {name: np.array([row[name] for row in rows]) for name in names}
    kept = {name: values for name, values in columns.items() if np.isfinite(values).any()}
    remarks = tuple(f"{name} is unknown in all runs" for name in names if name not in kept)
    errors = {"velocity": np.array([row["velocity_se"] for row in rows])}
    table = ScaleTable(kept, errors, None, VELOCITY_NAME, remarks)
    if "velocity" not in kept:
        raise DataError("none of the results has a classified layer with a velocity variance: no table of scales can be made.")
    return checked(table, "the results folders")


def _folder(folder: Path) -> list[dict[str, float]]:
    import pandas as pd
    import xarray as xr

    for name in ("regime.csv", "windows.nc"):
        if not (folder / name).is_file():
            raise DataError(f"{folder}: no {name}; give results folders that `lespost run` has finished.")
    regime = pd.read_csv(folder / "regime.csv")
    with xr.open_dataset(folder / "windows.nc") as windows:
        return [_row(windows.sel(window=str(name)), band.iloc[0].to_dict()) for name, band in regime.groupby("window", sort=False)]


def _row(window: object, band: dict) -> dict[str, float]:
    import xarray as xr

    assert isinstance(window, xr.Dataset)
    inside = window.sel(z=slice(band["z_bottom"], band["z_top"]))
    unknown = {"velocity": float("nan"), "velocity_se": float("nan")}
    # the surface-layer drift, less its reference where the run took one off, is what La_SL was made of: u*/La_SL²
    langmuir = float(band.get("la_sl", float("nan")))
    scales = {"ustar": float(band["ustar"]), "us0": float(band["us0"]), "h": float(band["h"]),
              "us_sl": float(band["ustar"]) / langmuir**2 if langmuir > 0 else float("nan"),
              "b0": float(window["surface_buoyancy_flux"]) if "surface_buoyancy_flux" in window else float("nan")}
    angle = np.radians(float(band["axis_deg"]))
    if inside.sizes["z"] == 0 or not np.isfinite(angle):
        return {**scales, **unknown}
    uu, vv, uv, ww = (_mean(inside, name) for name in ("uu", "vv", "uv", "ww"))
    cross = uu[0] * np.sin(angle) ** 2 + vv[0] * np.cos(angle) ** 2 - 2 * uv[0] * np.sin(angle) * np.cos(angle)
    cross_se = float(np.hypot(uu[1] * np.sin(angle) ** 2, vv[1] * np.cos(angle) ** 2))
    variance, error = max((cross, cross_se), ww)
    speed = float(np.sqrt(variance)) if variance > 0 else float("nan")
    return {**scales, "velocity": speed, "velocity_se": float(error / (2 * speed))}


def _mean(inside: object, name: str) -> tuple[float, float]:
    """(mean, standard error) over the levels of a band, of the total where the run has a subgrid part."""
    import xarray as xr

    assert isinstance(inside, xr.Dataset)
    chosen = f"{name}_total" if f"{name}_total" in inside else name
    error = f"{chosen}_se" if f"{chosen}_se" in inside else f"{name}_se"
    return float(inside[chosen].mean()), float(inside[error].mean()) if error in inside else float("nan")
