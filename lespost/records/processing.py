"""The processing chain: the same steps, in the same order, on a field record and on virtual samples.

Steps: flags to gaps, spikes to gaps, short gaps filled, block averages, rotation, fluctuations, noise
variance. What was asked for is written into attrs["chain"] (equal on both sides, or the comparison refuses);
what it did to this series into attrs["chain_results"]. The series that comes out keeps u, v, w with their
means and adds X_fluctuation, the part that second moments are formed from, and X_noise_variance.
"""

from __future__ import annotations

import json
import warnings
from typing import Any

import numpy as np
import xarray as xr

from lespost.errors import RecordError
from lespost.records.despike import median_spikes, phase_space_spikes
from lespost.records.flags import NUMBER_OF_WORD
from lespost.records.noise import lag_zero_noise_variance, plateau_noise_variance
from lespost.records.settings import ProcessingSettings
from lespost.series import DIMENSIONS

PROCESSED = ("u", "v", "w", "error_velocity", "temperature", "salinity")


def process(series: xr.Dataset, chain: ProcessingSettings) -> xr.Dataset:
    """The series after the chain; the input is left as it was.

    Returns a dataset (deployment, time, depth) with the variables of `PROCESSED` that exist, float64, NaN at
    gaps; for each its X_fluctuation and X_noise_variance (deployment, depth). Raises RecordError where the
    series is too irregular or too coarse for the averaging interval.
    """
    names = [n for n in PROCESSED if n in series]
    label = str(series.attrs.get("instrument", "series"))
    if not names:
        raise RecordError(f"{label}: holds none of {', '.join(PROCESSED)}; there is nothing to process.")
    results: dict[str, Any] = {}
    time = np.asarray(series["time"], dtype=np.float64)
    regular = bool(series.attrs.get("regular", 1))
    values: dict[str, np.ndarray] = {}
    accepted = [NUMBER_OF_WORD[w] for w in chain.flags_accepted]
    for name in names:
        data = np.moveaxis(series[name].transpose(*DIMENSIONS).values.astype(np.float64), 1, 0)  # time first
        data = np.where(np.isfinite(data), data, np.nan)
        if f"{name}_flag" in series:
            flag = np.moveaxis(series[f"{name}_flag"].transpose(*DIMENSIONS).values, 1, 0)
            data = np.where(np.isin(flag, accepted), data, np.nan)
        results[f"{name}_accepted"] = _share(data)
        spikes = _spikes(data, chain)
        data = np.where(spikes, np.nan, data)
        results[f"{name}_spikes"] = float(spikes.mean())
        if regular and chain.largest_gap_filled:
            data = fill_short_gaps(data, chain.largest_gap_filled)
        values[name] = data
    interval = float(np.median(np.diff(time))) if time.size > 1 else float("nan")
    if chain.averaging_interval is not None:
        time, values = _averaged(label, time, values, interval, chain)
        interval = chain.averaging_interval
    elif not regular:
        raise RecordError(
            f"{label}: is sampled irregularly; state an averaging_interval in [comparison.processing]."
        )
    if chain.rotate_to is not None and {"u", "v"} <= set(values):
        angle = np.deg2rad(chain.rotate_to)
        u, v = values["u"], values["v"]
        values["u"], values["v"] = (
            u * np.cos(angle) + v * np.sin(angle),
            -u * np.sin(angle) + v * np.cos(angle),
        )
    data_vars: dict[str, tuple[tuple[str, ...], np.ndarray, dict[str, str]]] = {}
    for name, data in values.items():
        attrs = {"units": str(series[name].attrs.get("units", "m s-1"))}
        fluctuation = fluctuations(data, chain, interval)
        noise = _noise(series, name, fluctuation, chain)
        data_vars[name] = (DIMENSIONS, np.moveaxis(data, 0, 1), attrs)
        data_vars[f"{name}_fluctuation"] = (DIMENSIONS, np.moveaxis(fluctuation, 0, 1), attrs)
        data_vars[f"{name}_noise_variance"] = (
            ("deployment", "depth"),
            noise,
            {"units": f"({attrs['units']})2"},
        )
        results[f"{name}_good"] = _share(data)
    out = xr.Dataset(
        data_vars,
        coords={
            "time": ("time", time, dict(series["time"].attrs)),
            **{k: v for k, v in series.coords.items() if "time" not in v.dims},
        },
        attrs=dict(series.attrs),
    )
    for key in series.data_vars:
        # what an instrument says of itself per cell (subgrid share, response) travels along
        if key not in out and "time" not in series[key].dims and not str(key).endswith("_flag"):
            out[key] = series[key]
    before = json.loads(str(series.attrs.get("chain", "[]")))
    out.attrs["chain"] = json.dumps([*before, chain.model_dump(mode="json")], sort_keys=True)
    out.attrs["chain_results"] = json.dumps(results, sort_keys=True)
    out.attrs["sampling_interval"] = interval
    return out


def _share(data: np.ndarray) -> float:
    return float(np.isfinite(data).mean()) if data.size else 0.0


def _spikes(data: np.ndarray, chain: ProcessingSettings) -> np.ndarray:
    """Spikes along axis 0 by the chain's method."""
    if chain.despike == "median":
        return median_spikes(data, chain.despike_window, chain.despike_threshold)
    if chain.despike == "phase_space":
        return phase_space_spikes(data)
    return np.zeros(data.shape, dtype=bool)


def fill_short_gaps(data: np.ndarray, largest: int) -> np.ndarray:
    """Gaps of at most `largest` samples along axis 0, filled linearly between good neighbours; longer ones
    and ends stay."""
    good = np.isfinite(data)
    count = data.shape[0]
    rows = np.arange(count).reshape(-1, *([1] * (data.ndim - 1)))
    before = np.maximum.accumulate(np.where(good, rows, -1), axis=0)
    after = np.flip(np.minimum.accumulate(np.flip(np.where(good, rows, count), axis=0), axis=0), axis=0)
    short = ~good & (before >= 0) & (after < count) & (after - before - 1 <= largest)
    if not short.any():
        return data
    low = np.take_along_axis(data, np.clip(before, 0, None), axis=0)
    high = np.take_along_axis(data, np.clip(after, None, count - 1), axis=0)
    weight = (rows - before) / np.maximum(after - before, 1)
    return np.where(short, low + (high - low) * weight, data)


def _averaged(
    label: str, time: np.ndarray, values: dict[str, np.ndarray], interval: float, chain: ProcessingSettings
) -> tuple[np.ndarray, dict[str, np.ndarray]]:
    """Block averages over averaging_interval, the blocks counted from the first sample; centres as times."""
    width = float(chain.averaging_interval or interval)
    per_block = width / interval
    if per_block < 1.0 - 1e-6:
        raise RecordError(
            f"{label}: is sampled every {interval:g} s, coarser than the averaging_interval of {width:g} s."
        )
    if abs(per_block - 1.0) < 0.01:
        return time, values
    # a sample stands for the interval centred on it: blocks start half an interval before the first one
    start = time[0] - 0.5 * interval
    block = np.floor((time - start) / width + 1e-9).astype(np.int64)
    count = int(np.floor((time[-1] + 0.5 * interval - start) / width + 1e-6))
    if count < 2:
        raise RecordError(
            f"{label}: lasts {time[-1] - time[0]:g} s, too short for averages over {width:g} s."
        )
    inside = block < count
    starts = np.flatnonzero(np.diff(block[inside], prepend=-1))  # times increase, so every block is one run
    present = block[inside][starts]
    expected = max(1.0, np.floor(per_block + 1e-6))
    out = {}
    for name, data in values.items():
        good = np.isfinite(data[inside])
        total = np.zeros((count, *data.shape[1:]))
        number = np.zeros((count, *data.shape[1:]))
        total[present] = np.add.reduceat(np.where(good, data[inside], 0.0), starts, axis=0)
        number[present] = np.add.reduceat(good.astype(np.float64), starts, axis=0)
        with np.errstate(invalid="ignore", divide="ignore"):
            out[name] = np.where(number >= chain.smallest_good_fraction * expected, total / number, np.nan)
    return start + (np.arange(count) + 0.5) * width, out


def fluctuations(data: np.ndarray, chain: ProcessingSettings, interval: float) -> np.ndarray:
    """Departures from the mean or linear trend of each deployment and depth along axis 0, then from the
    moving mean."""
    good = np.isfinite(data)
    number = good.sum(axis=0)
    rows = np.arange(data.shape[0], dtype=np.float64).reshape(-1, *([1] * (data.ndim - 1)))
    with np.errstate(invalid="ignore", divide="ignore"):
        out = data
        if chain.detrend in ("mean", "linear"):
            out = data - np.where(good, data, 0.0).sum(axis=0) / number
        if chain.detrend == "linear":
            at = np.where(good, rows - np.where(good, rows, 0.0).sum(axis=0) / number, 0.0)
            slope = (at * np.where(good, out, 0.0)).sum(axis=0) / (at * at).sum(axis=0)
            out = out - np.where(number > 2, slope, 0.0) * (
                rows - np.where(good, rows, 0.0).sum(axis=0) / number
            )
        if chain.longest_period is not None:
            half = max(1, round(0.5 * chain.longest_period / interval))
            out = out - _moving_mean(out, half)
    return np.asarray(np.where(good, out, np.nan))


def _moving_mean(data: np.ndarray, half: int) -> np.ndarray:
    """Mean over 2 half + 1 samples along axis 0, shortened at the ends, gaps left out."""
    good = np.isfinite(data)
    zero = np.zeros((1, *data.shape[1:]))
    total = np.concatenate([zero, np.cumsum(np.where(good, data, 0.0), axis=0)])
    number = np.concatenate([zero, np.cumsum(good, axis=0)])
    rows = np.arange(data.shape[0])
    high = np.minimum(rows + half + 1, data.shape[0])
    low = np.maximum(rows - half, 0)
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray((total[high] - total[low]) / (number[high] - number[low]))


def _noise(series: xr.Dataset, name: str, fluctuation: np.ndarray, chain: ProcessingSettings) -> np.ndarray:
    """Noise variance (deployment, depth) to be removed from the variance of `name`; zero where the chain
    keeps the noise."""
    shape = fluctuation.shape[1:]
    if chain.noise_variance == "keep" or name in ("temperature", "salinity"):
        return np.zeros(shape)
    if chain.noise_variance == "stated":
        key = f"{name}_noise_standard_deviation"
        stated = float(series.attrs.get(key, series.attrs.get("noise_standard_deviation", np.nan)))
        if not np.isfinite(stated):
            raise RecordError(
                f'{series.attrs.get("instrument")}: noise_variance = "stated" but no '
                "noise_standard_deviation is stated; give it, or "
                'use "lag_zero" or "plateau".'
            )
        samples = 1.0
        if chain.averaging_interval is not None and series.sizes["time"] > 1:
            samples = max(1.0, chain.averaging_interval / float(np.median(np.diff(series["time"].values))))
        return np.full(shape, stated**2 / samples)
    # one level for all deployments: noise belongs to the instrument, and single deployments are short
    estimate = lag_zero_noise_variance if chain.noise_variance == "lag_zero" else plateau_noise_variance
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", RuntimeWarning)  # depths without a single good sample
        level = np.nanmean(estimate(fluctuation), axis=0)
    return np.broadcast_to(np.nan_to_num(level, nan=0.0), shape).copy()
