"""A small results folder with known contents, for the tests of figures and page."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd
import xarray as xr

REGIME_ROWS = [
    {"window": "whole", "t_start": 25200.0, "t_end": 28200.0, "z_bottom": -16.0, "z_top": -4.0, "regime": "langmuir",
     "p_shear": 0.01, "p_convective": 0.02, "p_langmuir": 0.97, "fraction_along": 0.2, "fraction_cross": 0.35,
     "fraction_vertical": 0.45, "axis_deg": -8.0, "axis_kind": "cell", "ustar": 0.0061, "wstar": np.nan, "us0": 0.068,
     "la_t": 0.2995, "la_sl": 0.41, "la_proj": 0.3, "hoenikker": 0.02, "h": 33.0, "h_over_l_langmuir": 0.03,
     "forcing_regime": "langmuir", "agreement": "variances, forcing", "note": ""},
    {"window": "whole", "t_start": 25200.0, "t_end": 28200.0, "z_bottom": -30.0, "z_top": -16.0, "regime": "undetermined",
     "p_shear": 0.3, "p_convective": 0.1, "p_langmuir": 0.4, "fraction_along": 0.33, "fraction_cross": 0.34,
     "fraction_vertical": 0.33, "axis_deg": -8.0, "axis_kind": "cell", "ustar": 0.0061, "wstar": np.nan, "us0": 0.068,
     "la_t": 0.2995, "la_sl": 0.41, "la_proj": 0.3, "hoenikker": 0.02, "h": 33.0, "h_over_l_langmuir": 0.03,
     "forcing_regime": "langmuir", "agreement": "", "note": "two variances are equal within their errors"},
]


def make_results(folder: Path, title: str = "Demo", with_comparison: bool = True) -> Path:
    """Writes run.json, profiles.zarr, windows.nc, regime.csv, plan_views.nc and comparison.csv into `folder`."""
    folder.mkdir(parents=True, exist_ok=True)
    z = np.linspace(-39.5, -0.5, 40)
    shape = np.exp(z / 15.0)
    names = {"u": 0.02, "v": -0.03, "theta": 15.0, "uu": 1e-4, "vv": 2e-4, "ww": 1.5e-4, "uv": 1e-5, "uw": -3e-5, "vw": 1e-5,
             "wtheta": 1e-6, "uw_sgs": -4e-6, "uw_total": -3.4e-5, "vw_sgs": 1e-6, "vw_total": 1.1e-5}
    windows = xr.Dataset(coords={"z": z, "window": ["whole"]})
    for name, size in names.items():
        windows[name] = (("window", "z"), (size * shape)[None])
        windows[f"{name}_se"] = (("window", "z"), (0.05 * abs(size) * shape)[None])
        windows[f"{name}_neff"] = (("window", "z"), np.full((1, z.size), 12.0))
    windows["theta"].attrs["units"] = "degC"
    windows["snapshots"] = ("window", [6])
    windows.to_netcdf(folder / "windows.nc")
    xr.Dataset({"uu": (("time", "z"), 1e-4 * shape[None])}, coords={"time": [0.0], "z": z}).to_zarr(
        folder / "profiles.zarr", mode="w", consolidated=False)
    x = np.arange(16) * 2.5
    wave = 0.01 * np.sin(2 * np.pi * x / 40.0)
    xr.Dataset({"w": (("window", "y", "x"), np.broadcast_to(wave[None, :, None], (1, 16, 16)))},
               coords={"window": ["whole"], "x": x, "y": x, "depth": ("window", [3.75]),
                       "view_time": ("window", [28200.0])}).to_netcdf(folder / "plan_views.nc")
    pd.DataFrame(REGIME_ROWS).to_csv(folder / "regime.csv", index=False)
    if with_comparison:
        rows = [{"instrument": "profiler", "record": "mooring", "quantity": quantity, "units": units, "depth": depth,
                 "window": "whole", "record_value": value, "record_se": 0.1 * value, "record_neff": 20.0,
                 "model_value": 1.05 * value, "model_se": 0.05 * value, "model_neff": 90.0, "difference": 0.05 * value,
                 "difference_low": -0.2 * value, "difference_high": 0.3 * value, "ratio": 1.05, "ratio_low": 0.8,
                 "ratio_high": 1.35, "p_value": 0.4, "p_adjusted": 0.5, "verdict": verdict, "note": "rank 7 of 16"}
                for quantity, units, value in (("uu", "m2 s-2", 1e-4), ("u_mean", "m s-1", 0.02))
                for depth, verdict in ((5.0, "agrees"), (10.0, "differs"), (15.0, "cannot tell"))]
        pd.DataFrame(rows).to_csv(folder / "comparison.csv", index=False)
    run = {"title": title, "recipe": {"fields": {"path": "x.nc"}}, "recipe_path": "demo.toml",
           "versions": {"lespost": "0.1.0", "numpy": "2"}, "created": "2026-12-01T00:00:00Z",
           "input": {"paths": ["x.nc"], "fingerprint": "abc"},
           "decisions": [{"subject": "w position", "choice": "z faces", "how": "detected", "evidence": "margin 900"}],
           "findings": [{"code": "domain-narrow", "severity": "warning", "message": "the domain is 4 layer depths wide"}],
           "timings": {"profiles": 1.0}, "directions": {"whole": {"wind": 0.0, "waves": 0.0, "axis": -8.0}}, "cautions": []}
    (folder / "run.json").write_text(json.dumps(run))
    return folder
