"""Second moments from the series of a profiler: noise-corrected variances, and the stress from the variances of opposing beams.

A variance of a component is taken from beams metres apart and is not the water's (response.py); the difference of the variances of
opposing beams is, where the statistics are horizontally homogeneous and the instrument level.
"""

from __future__ import annotations

from typing import Literal

import numpy as np
import xarray as xr

from lespost.errors import DataError

About = Literal["deployment", "ensemble"]


def variance_method(first: np.ndarray, second: np.ndarray, beam_angle: float) -> np.ndarray:
    """⟨u'w'⟩ [m2 s-2] from the variances of two opposing upward-looking beams: (⟨b1²⟩ - ⟨b2²⟩)/(4 sin θ cos θ) (Stacey, Monismith & Burau
    1999; Lu & Lueck 1999). Noise of the same variance in both drops out."""
    theta = np.radians(beam_angle)
    return np.asarray((first - second) / (4.0 * np.sin(theta) * np.cos(theta)))


def tilted_stress(uw: float, uu: float, ww: float, tilt: float) -> float:
    """What the variance method reads [m2 s-2] at a tilt φ [degree] in the plane of the beams, towards beam 1:
    ⟨uw⟩ cos 2φ + ½(⟨uu⟩ - ⟨ww⟩) sin 2φ (derived; exact for homogeneous statistics)."""
    phi = np.radians(tilt)
    return float(uw * np.cos(2 * phi) + 0.5 * (uu - ww) * np.sin(2 * phi))


def five_beam_kinetic_energy(beams: np.ndarray, vertical: np.ndarray, beam_angle: float) -> np.ndarray:
    """Turbulent kinetic energy [m2 s-2] from the noise-corrected variances (..., 4) of inclined beams and of a vertical one:
    ½[(Σb² - 4 cos²θ ⟨b5²⟩)/(2 sin²θ) + ⟨b5²⟩] (Lu & Lueck 1999, from memory)."""
    theta = np.radians(beam_angle)
    horizontal = (beams.sum(axis=-1) - 4.0 * np.cos(theta) ** 2 * vertical) / (2.0 * np.sin(theta) ** 2)
    return np.asarray(0.5 * (horizontal + vertical))


def stress_deviation(beam_noise: float, beam_angle: float, samples: int) -> float:
    """Standard deviation of the variance-method stress from noise alone [m2 s-2]: 2 σ²/(4 sin θ cos θ √(N - 1))."""
    theta = np.radians(beam_angle)
    return float(2.0 * beam_noise**2 / (4.0 * np.sin(theta) * np.cos(theta) * np.sqrt(samples - 1.0)))


def fluctuation_variance(series: xr.Dataset, name: str, about: About = "deployment") -> xr.DataArray:
    """Variance (deployment, depth) of variable `name` about the time mean of each deployment (over times less one), or about the mean
    over all deployments and times."""
    values = series[name]
    if about == "deployment":
        return values.var("time", ddof=1, skipna=True)
    mean = values.mean(("deployment", "time"), skipna=True)
    return ((values - mean) ** 2).mean("time", skipna=True)


def noise_corrected_variances(series: xr.Dataset, about: About = "deployment") -> xr.Dataset:
    """uu, vv, ww, and the error velocity's variance (deployment, depth) [m2 s-2] less the noise that the instrument states.

    Raises DataError if the series states no noise. A difference below zero is left as it is: it says that noise is all there is.
    """
    out = {}
    for name, label in (("u", "uu"), ("v", "vv"), ("w", "ww"), ("error_velocity", "error_velocity_variance")):
        key = f"{name}_noise_standard_deviation"
        if key not in series.attrs:
            raise DataError(f'series of {series.attrs.get("instrument", "an instrument")}: no attribute {key}; state the noise.')
        out[label] = fluctuation_variance(series, name, about) - float(series.attrs[key]) ** 2
        out[label].attrs = {"units": "m2 s-2", "long_name": f"variance of {name} as sampled, noise removed"}
    return xr.Dataset(out)


def beam_stress(series: xr.Dataset, about: About = "deployment") -> xr.Dataset:
    """uw, vw (deployment, depth) [m2 s-2, upward flux, axes of the simulation] by the variance method from a profiler's series.

    Needs beam_1 .. beam_4 as two opposing pairs at right angles and the attributes beam_angle, heading, looking; ignores tilt
    (`tilted_stress` says what it does). Raises DataError where they are missing.
    """
    label = series.attrs.get("instrument", "an instrument")
    names = [f"beam_{beam}" for beam in range(1, 5)]
    if any(n not in series for n in names) or not {"beam_angle", "heading", "looking"} <= set(series.attrs):
        raise DataError(f"series of {label}: the variance method needs beam_1 to beam_4 and the attributes beam_angle, heading, looking.")
    if not series.attrs.get("opposing_pairs", 1):
        raise DataError(f"series of {label}: the variance method needs two opposing pairs of beams at right angles.")
    one, two, three, four = (fluctuation_variance(series, n, about) for n in names)
    sign = 1.0 if series.attrs["looking"] == "up" else -1.0
    angle = float(series.attrs["beam_angle"])
    along = sign * variance_method(one.values, two.values, angle)
    across = sign * variance_method(three.values, four.values, angle)
    cosine, sine = np.cos(np.radians(series.attrs["heading"])), np.sin(np.radians(series.attrs["heading"]))
    attrs = {"units": "m2 s-2", "comment": "variance method (Stacey, Monismith & Burau 1999; Lu & Lueck 1999)"}
    return xr.Dataset({"uw": one.copy(data=along * cosine - across * sine).assign_attrs(attrs),
                       "vw": one.copy(data=along * sine + across * cosine).assign_attrs(attrs)})
