"""Means over gaps, integral scales and effective sample sizes of correlated series.

The closed forms of sampling error are those of Lenschow, Mann & Kristensen (1994), as restated in the tests.
"""

from __future__ import annotations

import numpy as np


def finite_mean(values: np.ndarray, axis: int | tuple[int, ...]) -> np.ndarray:
    """Mean of the finite values, NaN where there are none, without warnings."""
    good = np.isfinite(values)
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(np.where(good, values, 0.0).sum(axis=axis) / good.sum(axis=axis))


def effective_samples(values: np.ndarray) -> np.ndarray:
    """n_eff = n / (1 + 2 sum r_k) along axis 0 of (time, column), the sum up to the first zero crossing of r.

    The autocorrelation is corrected once for the removal of the sample mean, which lowers every r_k by
    1/n_eff (to first order; derived here). NaN are gaps: lags are averaged over the pairs there are. At least
    1, at most the number of good samples.
    """
    count = values.shape[0]
    good = np.isfinite(values)
    number = good.sum(axis=0)
    departure = np.where(good, values - finite_mean(values, 0), 0.0)
    size = 2 * count
    covariance = np.fft.irfft(np.abs(np.fft.rfft(departure, size, axis=0)) ** 2, size, axis=0)[:count]
    pairs = np.fft.irfft(np.abs(np.fft.rfft(good.astype(np.float64), size, axis=0)) ** 2, size, axis=0)[
        :count
    ]
    with np.errstate(invalid="ignore", divide="ignore"):
        r = np.where(pairs > 0.5, covariance / np.round(np.maximum(pairs, 1.0)), 0.0)
        r = r / r[0]
    r = np.where(np.isfinite(r), r, 0.0)
    # far lags rest on few pairs; a crossing is looked for in the first half only
    first = _sum_to_crossing(r[: max(2, count // 2)])
    with np.errstate(invalid="ignore", divide="ignore"):
        lost = np.clip(first / number, 0.0, 0.5)
    corrected = (r + lost) / (1.0 + lost)
    corrected[0] = 1.0
    # the correction must not keep a dead autocorrelation above zero for ever: it is summed to the crossing of
    # the raw one
    factor = _sum_to_crossing(corrected[: max(2, count // 2)], r[: max(2, count // 2)])
    with np.errstate(invalid="ignore", divide="ignore"):
        result = number / np.maximum(factor, 1e-12)
    constant = covariance[0] <= 0
    return np.asarray(np.where(number > 0, np.where(constant, number, np.clip(result, 1.0, number)), 0.0))


def _sum_to_crossing(r: np.ndarray, crossing_of: np.ndarray | None = None) -> np.ndarray:
    """1 + 2 sum of r_k for k >= 1 up to the first non-positive value."""
    below = (r if crossing_of is None else crossing_of) <= 0
    first = np.where(below.any(axis=0), np.argmax(below, axis=0), r.shape[0])
    inside = np.arange(r.shape[0])[:, None] < first
    return np.asarray(2.0 * np.where(inside, r, 0.0).sum(axis=0) - 1.0)


def integral_scale(values: np.ndarray, interval: float) -> np.ndarray:
    """Integral time scale along axis 0 of (time, column), `interval` between samples: n interval / (2 n_eff), same unit."""
    number = np.isfinite(values).sum(axis=0)
    return np.asarray(number * interval / (2.0 * effective_samples(values)))


def mean_error_variance(record_length: float, scale: float) -> float:
    """Error variance of a time mean over the variance of the series (exponential autocorrelation of integral scale `scale`).

    (2 scale / T) [1 - (scale / T)(1 - exp(-T / scale))] (Lenschow, Mann & Kristensen 1994; form from memory).
    """
    ratio = scale / record_length
    return float(2.0 * ratio * (1.0 - ratio * -np.expm1(-1.0 / ratio)))


def variance_relative_error(record_length: float, scale: float) -> float:
    """Relative standard error of a variance: (2 scale / T)^(1/2), Gaussian, exponential (Lenschow et al. 1994)."""
    return float(np.sqrt(2.0 * scale / record_length))


def flux_relative_error(record_length: float, scale: float, correlation: float) -> float:
    """Relative standard error of a flux: (2 scale / T)^(1/2) ((1 + r²) / r²)^(1/2) (Lenschow et al. 1994)."""
    return float(np.sqrt(2.0 * scale / record_length) * np.sqrt((1.0 + correlation**2) / correlation**2))


def lag_one_pooled(values: np.ndarray) -> float:
    """Lag-one autocorrelation along axis 0 of (time, column), pooled over columns, bias-corrected, within 0 and 0.95.

    For a handful of snapshots no single level can tell it; the pooled value can. NaN columns are left out; 0 for fewer than
    three times.
    """
    count = values.shape[0]
    if count < 3:
        return 0.0
    columns = values[:, np.isfinite(values).all(axis=0)]
    departure = columns - columns.mean(axis=0)
    total = (departure**2).sum()
    if not total > 0:
        return 0.0
    raw = float((departure[1:] * departure[:-1]).sum() / total)
    # A sample mean removed from n values lowers every lag by about 1/n (derived to first order).
    return float(np.clip((raw * count / (count - 1) + 1.0 / count) / (1.0 - 1.0 / count), 0.0, 0.95))
