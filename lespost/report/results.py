"""Reads a results folder for the figures and the page: the files of the contract, opened once, nothing recomputed."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd
import xarray as xr

from lespost.errors import DataError


@dataclass(frozen=True)
class Results:
    """What a results folder holds; parts that the run did not make are None.

    windows: dims (window, z), each variable X with X_se and X_neff; profiles: dims (time, z);
    views: near-surface plan views, dims (window, y, x).
    """

    folder: Path
    run: dict[str, Any]
    profiles: xr.Dataset
    windows: xr.Dataset
    regime: pd.DataFrame
    views: xr.Dataset | None
    comparison: pd.DataFrame | None


def read_results(folder: Path) -> Results:
    """Opens the results folder `folder`. Raises DataError if it is not one, or is not complete."""
    if not (folder / "run.json").is_file():
        raise DataError(f"{folder} is not a results folder (no run.json in it); give the folder that `lespost run` wrote.")
    missing = [name for name in ("profiles.zarr", "windows.nc", "regime.csv") if not (folder / name).exists()]
    if missing:
        raise DataError(f"results folder {folder} is not complete: {', '.join(missing)} missing; run its recipe again.")
    try:
        run = json.loads((folder / "run.json").read_text(encoding="utf-8"))
        profiles = xr.open_zarr(folder / "profiles.zarr", consolidated=False, decode_times=False).load()
        windows = _load(folder / "windows.nc")
        regime = pd.read_csv(folder / "regime.csv", keep_default_na=True)
        views = _load(folder / "plan_views.nc") if (folder / "plan_views.nc").exists() else None
        comparison = pd.read_csv(folder / "comparison.csv") if (folder / "comparison.csv").exists() else None
    except (OSError, ValueError, KeyError) as error:
        raise DataError(f"results folder {folder} cannot be read ({error}); run its recipe again with --fresh.") from None
    return Results(folder, run, profiles, windows, regime, views, comparison)


def _load(path: Path) -> xr.Dataset:
    with xr.open_dataset(path, decode_times=False) as dataset:
        return dataset.load()
