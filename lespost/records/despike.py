"""Spikes: found, never repaired. The processing chain turns them into gaps, on both sides of a comparison
alike.

Both methods clip true extremes of turbulence as well as spikes, which is why a virtual record goes through
them too.
"""

from __future__ import annotations

import warnings

import numpy as np

#: Robust standard deviation of a normal variable is this times its median absolute deviation: 1/Phi^-1(3/4).
MAD_TO_SIGMA = 1.4826


def _bridged(values: np.ndarray) -> np.ndarray:
    """The nearest earlier good value in each gap along axis 0 (the next one at the start)."""
    good = np.isfinite(values)
    rows = np.arange(values.shape[0]).reshape(-1, *([1] * (values.ndim - 1)))
    last = np.maximum.accumulate(np.where(good, rows, -1), axis=0)
    first = np.argmax(good, axis=0)
    return np.take_along_axis(values, np.where(last < 0, first[None], last), axis=0)


def moving_median(values: np.ndarray, window: int) -> np.ndarray:
    """Median over `window` (odd) samples along axis 0, gaps bridged, ends reflected; same shape."""
    half = window // 2
    filled = _bridged(values)
    if filled.shape[0] <= half:
        return np.broadcast_to(np.nanmedian(filled, axis=0), filled.shape).copy()
    padded = np.concatenate([filled[half:0:-1], filled, filled[-2 : -half - 2 : -1]], axis=0)
    out = np.empty_like(filled)
    step = max(1, int(2e6 // (window * max(1, int(np.prod(filled.shape[1:]))))))  # blocks that stay in cache
    windows = np.lib.stride_tricks.sliding_window_view(padded, window, axis=0)
    for start in range(0, filled.shape[0], step):
        part = np.ascontiguousarray(windows[start : start + step])
        out[start : start + step] = np.partition(part, half, axis=-1)[..., half]
    return out


def median_spikes(values: np.ndarray, window: int, threshold: float) -> np.ndarray:
    """True where a sample departs from the moving median by more than `threshold` robust standard deviations.

    The scale is that of the departures of the whole series (one per column): 1.4826 x their median absolute
    deviation. A series whose departures are mostly zero (coarse digits) has no scale and no spikes.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        departure = np.where(np.isfinite(values), values - moving_median(values, window), np.nan)
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", RuntimeWarning)  # columns without a single good sample
            scale = MAD_TO_SIGMA * np.nanmedian(np.abs(departure), axis=0)
        return np.asarray((np.abs(departure) > threshold * scale) & (scale > 0))


def phase_space_spikes(values: np.ndarray, rounds: int = 20) -> np.ndarray:
    """True where the phase-space threshold method finds spikes (Goring & Nikora 2002), column by column.

    A sample is a spike outside the ellipsoid spanned by the series, its first and its second difference, with
    half axes sqrt(2 ln N) standard deviations; repeated with the spikes bridged until none is new. Standard
    deviations are the robust ones (1.4826 MAD), so that large spikes do not hide small ones.
    """
    flat = np.asarray(values, dtype=np.float64).reshape(values.shape[0], -1)
    spikes = np.zeros(flat.shape, dtype=bool)
    for column in range(flat.shape[1]):
        spikes[:, column] = _phase_space_column(flat[:, column], rounds)
    return spikes.reshape(values.shape)


def _phase_space_column(series: np.ndarray, rounds: int) -> np.ndarray:
    good = np.isfinite(series)
    spikes = np.zeros(series.shape, dtype=bool)
    if good.sum() < 12:
        return spikes
    index = np.arange(series.size)
    limit = np.sqrt(2.0 * np.log(good.sum()))
    for _ in range(rounds):
        keep = good & ~spikes
        if keep.sum() < 12:
            break
        x = np.interp(index, index[keep], series[keep])
        x = x - np.median(x)
        dx = np.gradient(x)
        d2x = np.gradient(dx)
        sx, sd, s2 = (MAD_TO_SIGMA * np.median(np.abs(a - np.median(a))) for a in (x, dx, d2x))
        if min(sx, sd, s2) <= 0.0:
            break
        angle = np.arctan2(np.sum(x * d2x), np.sum(x * x))
        outside = (x / (limit * sx)) ** 2 + (dx / (limit * sd)) ** 2 > 1.0
        outside |= (dx / (limit * sd)) ** 2 + (d2x / (limit * s2)) ** 2 > 1.0
        # the ellipse of x against its second difference is turned by `angle`; its half axes solve two linear
        # equations
        c2, s2_ = np.cos(angle) ** 2, np.sin(angle) ** 2
        try:
            a2, b2 = np.linalg.solve([[c2, s2_], [s2_, c2]], [(limit * sx) ** 2, (limit * s2) ** 2])
        except np.linalg.LinAlgError:
            a2 = b2 = -1.0
        if a2 > 0 and b2 > 0:
            along = x * np.cos(angle) + d2x * np.sin(angle)
            across = -x * np.sin(angle) + d2x * np.cos(angle)
            outside |= along**2 / a2 + across**2 / b2 > 1.0
        new = _worst_of_each_run(outside & keep, np.abs(x))
        if not new.any():
            break
        spikes |= new
    return spikes


def _worst_of_each_run(flagged: np.ndarray, size: np.ndarray) -> np.ndarray:
    """Of each run of consecutive flagged samples the largest one: the differences of a spike flag its good
    neighbours too, which the next round, with the spike bridged, finds innocent."""
    out = np.zeros(flagged.shape, dtype=bool)
    edges = np.flatnonzero(np.diff(np.concatenate(([0], flagged.astype(np.int8), [0]))))
    for start, end in zip(edges[::2], edges[1::2], strict=True):
        out[start + int(np.argmax(size[start:end]))] = True
    return out
