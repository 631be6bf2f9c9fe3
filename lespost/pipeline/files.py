"""Writes the files of the results folder: each appears whole under its name or not at all."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from lespost.engine.atomic import replace_directory, replace_file


def write_json(path: Path, content: dict[str, Any]) -> None:
    """`content` as JSON; NaN and infinities become null, numpy numbers plain ones, paths text."""
    with replace_file(path) as part:
        part.write_text(json.dumps(plain(content), indent=1, ensure_ascii=False, allow_nan=False), encoding="utf-8")


def write_netcdf(path: Path, dataset: xr.Dataset) -> None:
    """`dataset` as netCDF-4, float64 kept; empty values are NaN."""
    with replace_file(path) as part:
        clean = dataset.copy()
        for name in clean.variables:
            clean[name].encoding = {}
        clean.to_netcdf(part, engine="netcdf4", format="NETCDF4")


def write_zarr(path: Path, dataset: xr.Dataset) -> None:
    """`dataset` as one zarr v3 store; each variable is one chunk, so that the store holds few files."""
    with replace_directory(path) as part:
        clean = dataset.copy()
        for name in clean.variables:
            clean[name].encoding = {}
        clean.to_zarr(part, mode="w", consolidated=False, zarr_format=3)


def write_csv(path: Path, table: pd.DataFrame) -> None:
    """`table` as CSV, full precision, empty cells for what is not known."""
    with replace_file(path) as part:
        table.to_csv(part, index=False)


def plain(value: Any) -> Any:
    """`value` with only what JSON knows."""
    if isinstance(value, dict):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    if isinstance(value, np.ndarray):
        return plain(value.tolist())
    if isinstance(value, np.generic):
        return plain(value.item())
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, Path):
        return str(value)
    return value
