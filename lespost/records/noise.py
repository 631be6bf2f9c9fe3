"""Noise variance of a series from the series itself: extrapolation of the autocovariance to lag zero,
spectral plateau.

Instrument noise is white between samples, turbulence is not: it vanishes from the autocovariance at every lag
but zero, and it makes the spectrum flat where turbulence has died out. Both estimates need turbulence that is
resolved by the sampling. Method of the lag-zero extrapolation: Lenschow, Wulfmeyer & Senff 2000 (from
memory); the two closed forms are derived here: a parabola through lags 1 and 2 with zero slope at lag 0 gives
(4 R1 - R2)/3, the inertial-range form R0 - C lag^(2/3) gives (2^(2/3) R1 - R2)/(2^(2/3) - 1).
"""

from __future__ import annotations

import numpy as np

from lespost.errors import DataError


def autocovariances(values: np.ndarray, lags: int) -> np.ndarray:
    """Autocovariance at lags 0..`lags` along axis 0, means of the available pairs; shape (lags + 1, ...). NaN
    are gaps."""
    x = np.asarray(values, dtype=np.float64)
    good = np.isfinite(x)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.where(good, x, 0.0).sum(axis=0) / good.sum(axis=0)
        d = np.where(good, x - mean, 0.0)
        out = []
        for lag in range(lags + 1):
            n = x.shape[0] - lag
            if n <= 0:
                out.append(np.full(x.shape[1:], np.nan))
                continue
            pairs = (good[lag:] & good[:n]).sum(axis=0)
            out.append((d[lag:] * d[:n]).sum(axis=0) / pairs)
    result = np.stack(out)
    return np.where(np.isfinite(result), result, np.nan)


def lag_zero_noise_variance(values: np.ndarray, shape: str = "inertial") -> np.ndarray:
    """Noise variance along axis 0: variance minus the autocovariance extrapolated to lag zero, never below
    zero.

    shape: "inertial" (R0 - C lag^(2/3)) or "parabola". NaN where fewer than 3 samples. Raises DataError on
    another shape.
    """
    r0, r1, r2 = autocovariances(values, 2)
    if shape == "parabola":
        signal = (4.0 * r1 - r2) / 3.0
    elif shape == "inertial":
        signal = (2.0 ** (2.0 / 3.0) * r1 - r2) / (2.0 ** (2.0 / 3.0) - 1.0)
    else:
        raise DataError(f'lag-zero extrapolation: shape "{shape}" is neither "inertial" nor "parabola".')
    return np.asarray(np.clip(r0 - signal, 0.0, r0))


def plateau_noise_variance(values: np.ndarray, share: float = 0.1) -> np.ndarray:
    """Noise variance along axis 0 from the spectrum near the Nyquist frequency: the median level of its
    highest `share` taken over all frequencies. The median of an exponential variable is ln 2 of its mean,
    which is divided out.

    Gaps are bridged linearly (they are short after the processing chain); series with over 20 % gaps give
    NaN. It is an upper bound where turbulence reaches the Nyquist frequency.
    """
    x = np.asarray(values, dtype=np.float64)
    flat = x.reshape(x.shape[0], -1)
    count = flat.shape[0]
    out = np.full(flat.shape[1], np.nan)
    good = np.isfinite(flat)
    usable = (good.mean(axis=0) >= 0.8) if count >= 16 else np.zeros(flat.shape[1], dtype=bool)
    if usable.any():
        block = flat[:, usable].copy()
        index = np.arange(count)
        for column in np.flatnonzero(~good[:, usable].all(axis=0)):
            known = np.isfinite(block[:, column])
            block[:, column] = np.interp(index, index[known], block[known, column])
        block -= block.mean(axis=0)
        power = np.abs(np.fft.rfft(block, axis=0)) ** 2 / count  # mean over frequencies is the variance
        first = max(1, int(np.floor((1.0 - share) * (power.shape[0] - 1))))
        last = (
            power.shape[0] - 1 if count % 2 == 0 else power.shape[0]
        )  # the Nyquist line has one degree of freedom
        tail = power[first:last] if last > first else power[first:]
        out[usable] = np.median(tail, axis=0) / np.log(2.0)
    return out.reshape(x.shape[1:])
