"""Sampling errors of time series (Lenschow, Mann & Kristensen 1994; closed forms from memory, the abstract was seen).

Golden numbers: τ = 60 s, T = 3600 s, flux correlation 0.4. The forms are also checked against simulated series.
"""

from __future__ import annotations

import numpy as np
import pytest

from lespost.statistics import samples


def test_golden_numbers() -> None:
    assert samples.variance_relative_error(3600.0, 60.0) == pytest.approx(0.1825742, rel=1e-6)
    assert samples.mean_error_variance(3600.0, 60.0) == pytest.approx(0.0327778, rel=1e-5)
    assert samples.flux_relative_error(3600.0, 60.0, 0.4) == pytest.approx(0.4915960, rel=1e-6)


def autoregressive(count: int, length: int, scale: float, rng: np.random.Generator) -> np.ndarray:
    """(length, count) unit-variance series with correlation exp(-lag / scale)."""
    memory = np.exp(-1.0 / scale)
    out = np.empty((length, count))
    out[0] = rng.standard_normal(count)
    kicks = np.sqrt(1 - memory**2) * rng.standard_normal((length, count))
    for step in range(1, length):
        out[step] = memory * out[step - 1] + kicks[step]
    return out


def test_the_error_of_a_mean_is_that_of_simulated_series() -> None:
    """2000 series of 40 integral scales: the scatter of their means, against the closed form (2 standard errors ~ 3 %)."""
    series = autoregressive(2000, 400, 10.0, np.random.default_rng(1))
    assert series.mean(axis=0).var() == pytest.approx(samples.mean_error_variance(400.0, 10.0), rel=0.08)


def test_integral_scale_of_simulated_series() -> None:
    """An exponential correlation of 10 steps has integral scale 10 (exactly 10.008 by the sum over steps)."""
    series = autoregressive(40, 4000, 10.0, np.random.default_rng(2))
    assert np.median(samples.integral_scale(series, 1.0)) == pytest.approx(10.0, rel=0.15)


def test_white_noise_has_as_many_samples_as_values() -> None:
    noise = np.random.default_rng(3).standard_normal((2000, 20))
    assert np.median(samples.effective_samples(noise)) == pytest.approx(2000, rel=0.15)


def test_pooled_correlation_of_short_windows() -> None:
    """Six snapshots of 400 independent levels with lag-one correlation 0.6: the pooled estimate finds it."""
    memory = 0.6
    series = autoregressive(4000, 6, -1.0 / np.log(memory), np.random.default_rng(4))
    assert samples.lag_one_pooled(series) == pytest.approx(memory, abs=0.2)
    assert samples.lag_one_pooled(np.random.default_rng(5).standard_normal((6, 4000))) < 0.1
