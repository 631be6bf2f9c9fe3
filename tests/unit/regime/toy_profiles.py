"""Profiles and forcing with prescribed variances, for the tests of the classifier; no fields behind them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import xarray as xr

FACES = np.linspace(-60.0, 0.0, 41)
Z = 0.5 * (FACES[1:] + FACES[:-1])


@dataclass(frozen=True)
class Truth:
    """Expected variances along, cross, vertical [m2 s-2], direction of along [degree], productions [m2 s-3], samples."""

    along: float = 1e-4
    cross: float = 2e-4
    vertical: float = 2e-4
    angle: float = 0.0
    shear: float = 1e-8
    stokes: float = 1e-7
    buoyancy: float = 0.0
    scatter: float = 0.1
    snapshots: int = 6
    coherent: bool = True


def make_profiles(truth: Truth, rng: np.random.Generator) -> xr.Dataset:
    """Profiles (time, z) and tiles (time, z, 4, 4): every tile of every snapshot is an independent draw about the truth."""
    times = np.arange(truth.snapshots) * 600.0
    shape = (truth.snapshots, 1, 4, 4)
    draws = {name: value * (1 + truth.scatter * rng.standard_normal(shape)) * np.ones((1, Z.size, 1, 1))
             for name, value in (("along", truth.along), ("cross", truth.cross), ("ww", truth.vertical))}
    c, s = np.cos(np.radians(truth.angle)), np.sin(np.radians(truth.angle))
    tiles = {"uu": c * c * draws["along"] + s * s * draws["cross"], "vv": s * s * draws["along"] + c * c * draws["cross"],
             "ww": draws["ww"], "uv": s * c * (draws["along"] - draws["cross"])}
    data = {f"{name}_tile": (("time", "z", "tile_y", "tile_x"), values) for name, values in tiles.items()}
    data |= {name: (("time", "z"), values.mean((-2, -1))) for name, values in tiles.items()}
    flat = np.ones((truth.snapshots, Z.size))
    # gradients of w point across the axis; without an axis they are alike in all directions
    across = (s * s, -s * c, c * c) if truth.coherent else (0.5, 0.0, 0.5)
    for name, value in zip(("dwdx_dwdx", "dwdx_dwdy", "dwdy_dwdy"), across, strict=True):
        data[name] = (("time", "z"), value * 1e-6 * flat)
    for name in ("shear", "stokes", "buoyancy"):
        data[f"tke_{name}"] = (("time", "z"), getattr(truth, name) * flat)
    theta = 15.0 + np.tanh((Z + 40.0) / 3.0)
    data |= {"theta": (("time", "z"), theta * flat), "u": (("time", "z"), 0.0 * flat), "v": (("time", "z"), 0.0 * flat)}
    for name in ("uw", "vw"):
        data[name] = (("time", "z"), -3e-5 * np.clip(1 + Z / 40.0, 0, None) * flat * (name == "uw"))
    return xr.Dataset(data, coords={"time": times, "z": Z, "z_face": FACES})


def make_forcing(truth: Truth, us0: float = 0.068, b0: float = 0.0, wind: float | None = None, waves: float | None = None,
                 ustar: float = 0.0061) -> xr.Dataset:
    """A steady forcing with one deep-water wave (k = 0.105 m-1); wind and waves default to the truth's axis."""
    times = np.arange(truth.snapshots) * 600.0
    wind = truth.angle if wind is None else wind
    waves = truth.angle if waves is None else waves
    steady = {"friction_velocity": ustar, "stress_direction": wind, "surface_buoyancy_flux": b0, "surface_temperature_flux": 0.0,
              "us0": us0, "stokes_direction": waves if us0 > 0 else np.nan, "stokes_depth": 4.76 if us0 > 0 else np.nan,
              "significant_wave_height": np.nan}
    data: dict[str, tuple[object, object]] = {name: ("time", np.full(times.size, value)) for name, value in steady.items()}
    for name, part in (("stokes_u", np.cos(np.radians(waves))), ("stokes_v", np.sin(np.radians(waves)))):
        data[name] = (("time", "z"), us0 * part * np.exp(0.21 * Z) * np.ones((times.size, 1)))
    scalars = {"gravity": 9.81, "reference_density": 1025.0, "specific_heat": 3990.0, "thermal_expansion": 2e-4, "shortwave": np.nan}
    data |= {name: ((), value) for name, value in scalars.items()}
    return xr.Dataset(data, coords={"time": times, "z": Z, "z_face": FACES}, attrs={"water_type": "I", "mixed_layer_depth": np.nan})
