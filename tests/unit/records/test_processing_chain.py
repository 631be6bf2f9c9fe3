"""The chain does the same to record and samples: each step against a closed form."""

from __future__ import annotations

import json

import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.signal import lfilter

from lespost.errors import RecordError
from lespost.records.despike import median_spikes, moving_median, phase_space_spikes
from lespost.records.noise import autocovariances, lag_zero_noise_variance, plateau_noise_variance
from lespost.records.processing import fill_short_gaps, process
from lespost.records.settings import ProcessingSettings
from lespost.series import make_series

PLAIN = ProcessingSettings(despike="none", detrend="mean", largest_gap_filled=0)


def series_of(u: np.ndarray, step: float = 1.0, **more: object) -> xr.Dataset:
    return make_series(
        {"u": u}, step * np.arange(u.shape[-2]), 1.0 + np.arange(u.shape[-1]), instrument="p", **more
    )  # type: ignore[arg-type]


def autoregressive(rng: np.random.Generator, phi: float, count: int, columns: int) -> np.ndarray:
    """Unit variance AR(1) columns."""
    x = lfilter([1.0], [1.0, -phi], rng.standard_normal((count + 200, columns)), axis=0)[200:]
    return np.asarray(x * np.sqrt(1.0 - phi**2))


def test_rejected_flags_become_gaps_and_only_they() -> None:
    rng = np.random.default_rng(0)
    u = rng.normal(size=(2, 30, 3))
    flags = rng.choice([1, 2, 3, 4, 9], u.shape).astype(np.int8)
    out = process(series_of(u, flags={"u": flags}), PLAIN)
    assert (np.isfinite(out["u"].values) == np.isin(flags, (1, 2))).all()
    strict = process(series_of(u, flags={"u": flags}), PLAIN.model_copy(update={"flags_accepted": ("pass",)}))
    assert (np.isfinite(strict["u"].values) == (flags == 1)).all()
    np.testing.assert_array_equal(strict["u"].values[flags == 1], u[flags == 1])


def test_the_input_is_left_alone_and_the_chain_is_written_down() -> None:
    u = np.random.default_rng(0).normal(size=(1, 30, 3))
    given_series = series_of(u)
    before = given_series.copy(deep=True)
    out = process(given_series, ProcessingSettings())
    assert given_series.identical(before)
    assert json.loads(out.attrs["chain"]) == [json.loads(ProcessingSettings().model_dump_json())]
    assert process(series_of(u * 3.0), ProcessingSettings()).attrs["chain"] == out.attrs["chain"]
    assert process(series_of(u), PLAIN).attrs["chain"] != out.attrs["chain"]


def test_block_averages_are_means_of_their_blocks() -> None:
    u = np.arange(20.0).reshape(1, 20, 1)
    u[0, 5:8] = np.nan
    out = process(series_of(u, step=2.0), PLAIN.model_copy(update={"averaging_interval": 8.0}))
    # blocks of four samples; the second holds 4 and gaps (a quarter good: a gap by default), the time is that
    # of the centre
    np.testing.assert_allclose(out["u"].values.ravel(), [1.5, np.nan, 9.5, 13.5, 17.5])
    np.testing.assert_allclose(out["time"].values, [3.0, 11.0, 19.0, 27.0, 35.0])


def test_averaging_of_an_advected_mode_follows_the_boxcar_response() -> None:
    # sin(N x)/(N sin x), x = omega dt/2, of N discrete samples (instruments sheet J34: 20 samples 3 s apart,
    # period 150 s: 0.757325)
    count, step, period = 20, 3.0, 150.0
    time = step * np.arange(50 * 1000)
    u = np.sin(2 * np.pi * time / period)[None, :, None]
    out = process(series_of(u, step), PLAIN.model_copy(update={"averaging_interval": count * step}))
    x = np.pi * step / period
    response = np.sin(count * x) / (count * np.sin(x))
    assert response == pytest.approx(0.757325, abs=1e-6)
    assert np.sqrt(2.0 * np.mean(out["u"].values ** 2)) == pytest.approx(response, rel=2e-3)


def test_averages_are_refused_where_they_cannot_be_formed() -> None:
    u = np.zeros((1, 20, 1))
    with pytest.raises(RecordError, match="coarser"):
        process(series_of(u, step=60.0), PLAIN.model_copy(update={"averaging_interval": 10.0}))
    with pytest.raises(RecordError, match="too short"):
        process(series_of(u), PLAIN.model_copy(update={"averaging_interval": 15.0}))


@given(st.floats(-720.0, 720.0).filter(lambda a: -360 <= a <= 360), st.integers(0, 1000))
@settings(max_examples=30, deadline=None)
def test_rotation_keeps_trace_and_determinant(angle: float, seed: int) -> None:
    rng = np.random.default_rng(seed)
    u, v = rng.normal(size=(2, 1, 50, 2))
    series = make_series({"u": u, "v": v}, np.arange(50.0), [1.0, 2.0], instrument="p")
    invariants = []
    for chain in (PLAIN, PLAIN.model_copy(update={"rotate_to": angle})):
        out = process(series, chain)
        a, b = out["u_fluctuation"].values, out["v_fluctuation"].values
        uu, vv, uv = ((a * a).mean(1), (b * b).mean(1), (a * b).mean(1))
        invariants.append(np.array([uu + vv, uu * vv - uv**2]))
    np.testing.assert_allclose(invariants[0], invariants[1], rtol=1e-9)


def test_rotation_direction() -> None:
    series = make_series(
        {"u": np.zeros((1, 4, 1)), "v": np.ones((1, 4, 1))}, np.arange(4.0), [1.0], instrument="p"
    )
    out = process(series, PLAIN.model_copy(update={"rotate_to": 90.0}))
    np.testing.assert_allclose(out["u"].values, 1.0)
    np.testing.assert_allclose(out["v"].values, 0.0, atol=1e-12)


def test_linear_trend_goes_with_gaps_in_the_series() -> None:
    trend = 3.0 + 0.2 * np.arange(40.0)
    u = np.where(np.isin(np.arange(40), (3, 4, 17)), np.nan, trend)[None, :, None]
    out = process(series_of(u), PLAIN.model_copy(update={"detrend": "linear"}))
    good = np.isfinite(u)
    np.testing.assert_allclose(out["u_fluctuation"].values[good], 0.0, atol=1e-12)
    np.testing.assert_array_equal(out["u"].values[good], u[good])  # the mean quantity keeps its trend


def test_moving_mean_removes_slow_motion_and_keeps_fast() -> None:
    time = np.arange(4000.0)
    slow, fast = np.sin(2 * np.pi * time / 2000.0), np.sin(2 * np.pi * time / 20.0)
    out = process(series_of((slow + fast)[None, :, None]), PLAIN.model_copy(update={"longest_period": 200.0}))
    inner = out["u_fluctuation"].values[0, 300:-300, 0]
    np.testing.assert_allclose(inner, fast[300:-300], atol=0.03)


@pytest.mark.parametrize(("gap", "filled"), [(1, True), (3, True), (4, False)])
def test_short_gaps_are_filled_linearly_longer_ones_stay(gap: int, filled: bool) -> None:
    line = np.arange(20.0)[:, None] * 2.0
    holed = line.copy()
    holed[8 : 8 + gap] = np.nan
    holed[0] = holed[-1] = np.nan
    out = fill_short_gaps(holed, 3)
    assert np.isfinite(out[8 : 8 + gap]).all() == filled
    assert np.isnan(out[[0, -1]]).all()
    np.testing.assert_allclose(out[np.isfinite(out)], line[np.isfinite(out)])


def test_moving_median_by_definition() -> None:
    x = np.random.default_rng(1).normal(size=(25, 2))
    out = moving_median(x, 5)
    for i in range(2, 23):
        np.testing.assert_allclose(out[i], np.median(x[i - 2 : i + 3], axis=0))


@pytest.mark.parametrize("method", ["median", "phase_space"])
def test_planted_spikes_are_found_and_turbulence_is_left(method: str) -> None:
    rng = np.random.default_rng(4)
    x = autoregressive(rng, 0.9, 4000, 3)
    spiked = x.copy()
    at = rng.choice(np.arange(20, 3980, 10), 30, replace=False)
    spiked[at] += 15.0 * rng.choice([-1.0, 1.0], (30, 3))
    spiked[100:104] = np.nan
    found = median_spikes(spiked, 7, 6.0) if method == "median" else phase_space_spikes(spiked)
    planted = np.zeros(x.shape, bool)
    planted[at] = True
    planted[100:104] = False
    assert found[planted].all()
    assert found[~planted].mean() < 0.005


def test_robust_scale_of_a_normal_series() -> None:
    # a threshold of 3 in units of 1.4826 MAD cuts 0.27 % of a normal series whose departures are the series
    # itself
    x = np.random.default_rng(0).normal(size=(200_000, 1))
    share = median_spikes(x, 501, 3.0).mean()
    assert share == pytest.approx(0.0027, rel=0.15)


def test_constant_series_have_no_spikes() -> None:
    assert not median_spikes(np.ones((50, 2)), 7, 6.0).any()
    assert not phase_space_spikes(np.ones((50, 2))).any()


@pytest.mark.parametrize("shape", ["parabola", "inertial"])
def test_lag_zero_extrapolation_is_exact_for_its_own_shape(shape: str) -> None:
    # closed form: R(lag) = 1 - C lag^p for p = 2 (parabola) or 2/3 (inertial), plus white noise of variance
    # 0.3 at lag 0
    power = 2.0 if shape == "parabola" else 2.0 / 3.0
    r = [1.0 - 0.05 * lag**power for lag in (0, 1, 2)]
    signal = (
        (4 * r[1] - r[2]) / 3 if shape == "parabola" else (2 ** (2 / 3) * r[1] - r[2]) / (2 ** (2 / 3) - 1)
    )
    assert signal == pytest.approx(1.0, abs=1e-12)
    # and the estimator uses that form: a spectrum-built periodic series with that autocovariance
    lags = np.minimum(np.arange(512), 512 - np.arange(512)).astype(float)
    target = np.where(
        lags <= 2, 1.0 - 0.05 * lags**power, (1.0 - 0.05 * 2**power) * np.exp(-(lags - 2) / 20.0)
    )
    spectrum = np.clip(np.fft.rfft(target).real, 0.0, None)
    rng = np.random.default_rng(0)
    phases = np.exp(2j * np.pi * rng.random((257, 400)))
    phases[[0, -1]] = 1.0
    x = np.fft.irfft(np.sqrt(spectrum * 512)[:, None] * phases, axis=0)
    noisy = x + np.sqrt(0.3) * rng.standard_normal(x.shape)
    r0, r1, r2 = (autocovariances(noisy, 2)).mean(axis=1)
    form = (4 * r1 - r2) / 3 if shape == "parabola" else (2 ** (2 / 3) * r1 - r2) / (2 ** (2 / 3) - 1)
    assert float(lag_zero_noise_variance(noisy, shape).mean()) == pytest.approx(r0 - form, rel=0.02)


@pytest.mark.parametrize("noise", [0.05, 0.3])
def test_noise_variance_is_found_under_a_resolved_signal(noise: float) -> None:
    rng = np.random.default_rng(7)
    smooth = lfilter([0.05], [1.0, -0.95], autoregressive(rng, 0.95, 20_000, 6), axis=0)
    smooth = smooth / smooth.std(axis=0)
    noisy = smooth + np.sqrt(noise) * rng.standard_normal(smooth.shape)
    assert plateau_noise_variance(noisy).mean() == pytest.approx(noise, rel=0.05)
    assert lag_zero_noise_variance(noisy, "parabola").mean() == pytest.approx(noise, rel=0.05)


def test_the_chain_takes_noise_off_both_ways() -> None:
    rng = np.random.default_rng(7)
    smooth = lfilter([0.05], [1.0, -0.95], autoregressive(rng, 0.95, 20_000, 2), axis=0)
    smooth = 0.1 * smooth / smooth.std(axis=0)
    noisy = (smooth + 0.05 * rng.standard_normal(smooth.shape))[None]
    for how in ("plateau", "stated"):
        series = series_of(noisy, noise_standard_deviation=0.05)
        out = process(series, PLAIN.model_copy(update={"noise_variance": how}))
        np.testing.assert_allclose(out["u_noise_variance"].values, 0.0025, rtol=0.1)
        raw = (out["u_fluctuation"].values ** 2).mean(axis=1)
        np.testing.assert_allclose(raw - out["u_noise_variance"].values, 0.01, rtol=0.06)
    with pytest.raises(RecordError, match="no noise_standard_deviation"):
        process(series_of(noisy), PLAIN.model_copy(update={"noise_variance": "stated"}))


@given(st.integers(0, 10_000))
@settings(max_examples=20, deadline=None)
def test_deployments_do_not_see_each_other(seed: int) -> None:
    rng = np.random.default_rng(seed)
    u = rng.normal(size=(3, 60, 2))
    u[rng.random(u.shape) < 0.1] = np.nan
    together = process(series_of(u), ProcessingSettings())
    for d in range(3):
        alone = process(series_of(u[d : d + 1]), ProcessingSettings())
        np.testing.assert_array_equal(alone["u_fluctuation"].values[0], together["u_fluctuation"].values[d])
