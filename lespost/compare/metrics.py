"""Every compared quantity as the time mean of one contribution per sample, so that all share one treatment of
uncertainty.

A mean velocity has the velocity as its contribution, a variance the squared fluctuation, a covariance the
product of two. The mean of the contributions over time is the quantity, their integral scale gives its
standard error.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
import xarray as xr

from lespost.records.noise import lag_zero_noise_variance, plateau_noise_variance


@dataclass(frozen=True)
class Metric:
    """How a quantity is formed from a processed series.

    kind: "mean" (a component of a vector, or a temperature), "positive" (a variance or speed: compared by its
    ratio), "covariance". needs: variables of the series. units: of the quantity.
    """

    name: str
    kind: Literal["mean", "positive", "covariance"]
    needs: tuple[str, ...]
    units: str


METRICS: Mapping[str, Metric] = {
    m.name: m
    for m in (
        Metric("u_mean", "mean", ("u",), "m s-1"),
        Metric("v_mean", "mean", ("v",), "m s-1"),
        Metric("w_mean", "mean", ("w",), "m s-1"),
        Metric("speed", "positive", ("u", "v"), "m s-1"),
        Metric("temperature_mean", "mean", ("temperature",), "degC"),
        Metric("uu", "positive", ("u", "u"), "m2 s-2"),
        Metric("vv", "positive", ("v", "v"), "m2 s-2"),
        Metric("ww", "positive", ("w", "w"), "m2 s-2"),
        Metric("uv", "covariance", ("u", "v"), "m2 s-2"),
        Metric("uw", "covariance", ("u", "w"), "m2 s-2"),
        Metric("vw", "covariance", ("v", "w"), "m2 s-2"),
        Metric("tke", "positive", ("u", "v", "w"), "m2 s-2"),
        Metric("error_velocity_variance", "positive", ("error_velocity", "error_velocity"), "m2 s-2"),
        Metric("temperature_variance", "positive", ("temperature", "temperature"), "K2"),
    )
}


def missing_variables(metric: Metric, series: xr.Dataset) -> tuple[str, ...]:
    """Variables the metric needs and the series lacks (or holds without one finite value)."""
    return tuple(
        n for n in dict.fromkeys(metric.needs) if n not in series or not np.isfinite(series[n].values).any()
    )


def is_second_moment(metric: Metric) -> bool:
    """Whether the metric is formed from fluctuations."""
    return metric.kind == "covariance" or (metric.kind == "positive" and metric.name != "speed")


def contributions(metric: Metric, series: xr.Dataset) -> np.ndarray:
    """Contribution of each sample to the quantity, (deployment, time, depth), noise variance taken off; NaN
    at gaps.

    series: as `lespost.records.processing.process` returns it.
    """
    if metric.name == "speed":
        return np.asarray(np.hypot(series["u"].values, series["v"].values))
    if metric.kind == "mean":
        return np.asarray(series[metric.needs[0]].values)
    if metric.name == "tke":
        return np.asarray(0.5 * sum(_product(series, n, n) for n in metric.needs))
    return _product(series, *metric.needs)


def _product(series: xr.Dataset, first: str, second: str) -> np.ndarray:
    product = series[f"{first}_fluctuation"].values * series[f"{second}_fluctuation"].values
    if first == second:
        product = product - series[f"{first}_noise_variance"].values[:, None, :]
    return np.asarray(product)


def noise_variance_removed(metric: Metric, series: xr.Dataset) -> np.ndarray:
    """Noise variance that the chain took off the quantity, by depth (mean over deployments)."""
    depth = np.zeros(series.sizes["depth"])
    if not is_second_moment(metric) or metric.kind == "covariance":
        return depth
    names = metric.needs if metric.name == "tke" else metric.needs[:1]
    scale = 0.5 if metric.name == "tke" else 1.0
    for name in names:
        depth = depth + scale * series[f"{name}_noise_variance"].values.mean(axis=0)
    return depth


def noise_estimate(metric: Metric, series: xr.Dataset) -> np.ndarray:
    """Noise variance still in the quantity, estimated from the series, by depth: the smaller of the lag-zero
    and plateau estimates (each is an upper bound where turbulence is not resolved), less what was removed;
    NaN where it cannot be known.
    """
    count = series.sizes["depth"]
    if not is_second_moment(metric) or metric.kind == "covariance" or series.sizes["time"] < 16:
        return np.full(count, np.nan)
    names = metric.needs if metric.name == "tke" else metric.needs[:1]
    scale = 0.5 if metric.name == "tke" else 1.0
    total = np.zeros(count)
    for name in names:
        values = np.moveaxis(series[f"{name}_fluctuation"].values, 1, 0)
        smaller = np.fmin(lag_zero_noise_variance(values), plateau_noise_variance(values))
        known = np.isfinite(smaller)
        with np.errstate(invalid="ignore", divide="ignore"):
            total = total + scale * np.where(known, smaller, 0.0).sum(axis=0) / known.sum(axis=0)
    return np.asarray(np.clip(total - noise_variance_removed(metric, series), 0.0, None))
