"""Two realisations of one process whose variance, correlation and effective sample size are known in closed form."""

from __future__ import annotations

import numpy as np
import xarray as xr
from scipy.signal import lfilter

from lespost.series import make_series


def autoregressive(
    rng: np.random.Generator, phi: float, deployments: int, times: int, depths: int, deviation: float = 1.0
) -> np.ndarray:
    """AR(1) series (deployment, time, depth) of standard deviation `deviation`, independent between depths."""
    noise = rng.standard_normal((deployments, times + 300, depths))
    x = lfilter([1.0], [1.0, -phi], noise, axis=1)[:, 300:]
    return np.asarray(deviation * np.sqrt(1.0 - phi**2) * x)


def effective_samples_of_mean(phi: float, times: int) -> float:
    """n (1 - phi)/(1 + phi): n over 1 + 2 sum phi^k (closed form)."""
    return times * (1.0 - phi) / (1.0 + phi)


def effective_samples_of_variance(phi: float, times: int) -> float:
    """The squares of a normal AR(1) series have the autocorrelation phi^(2k) (closed form)."""
    return effective_samples_of_mean(phi**2, times)


def toy(
    rng: np.random.Generator, name: str, phi: float, deployments: int, times: int, depths: int, deviation: float = 1.0
) -> xr.Dataset:
    """A canonical series with u only, 1 s sampling, cells 1 m apart."""
    u = autoregressive(rng, phi, deployments, times, depths, deviation)
    return make_series({"u": u}, np.arange(times) * 1.0, 1.0 + np.arange(depths), instrument=name)
