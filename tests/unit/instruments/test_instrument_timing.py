"""Time between snapshots: measured decorrelation, honest modes, refusals with numbers."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
import xarray as xr

from lespost.errors import DataError
from lespost.instruments.sample import sample
from lespost.instruments.settings import InstrumentSettings
from lespost.instruments.timing import TimePlan, measure_decorrelation, plan_time
from tests.unit.instruments.water import constant, means, water

DEPTHS = np.array([10.0, 15.0, 20.0])


def settings(**changes: object) -> InstrumentSettings:
    return InstrumentSettings.model_validate({"name": "p", "depth": 30.0, "cell_length": 2.0, "noise": 0.0, "quantisation": 0.0,
                                              "deployments": 3, **changes})


def evolving(correlation: float, drift: tuple[int, int] = (0, 0), count: int = 5) -> xr.Dataset:
    """Snapshots 100 s apart of smoothed noise; each is the one before, carried by `drift` cells and mixed with new noise."""
    rng = np.random.default_rng(3)
    n = 48
    fields = water(size=(n, n, 10), lengths=(2.5 * n, 2.5 * n), depth=40.0, times=100.0 * np.arange(count))
    k = np.fft.fftfreq(n) * n
    shape = np.exp(-((k[:, None] ** 2 + k[None] ** 2) / 40.0))

    def fresh() -> np.ndarray:
        noise = np.fft.ifft2(np.fft.fft2(rng.normal(size=(n, n))) * shape).real
        return np.asarray(0.02 * (noise - noise.mean()) / noise.std())

    pattern = [fresh()]
    for _ in range(count - 1):
        pattern.append(correlation * np.roll(pattern[-1], drift[::-1], (0, 1)) + np.sqrt(1 - correlation**2) * fresh())
    fields["w"] = fields["w"].copy(data=np.repeat(np.array(pattern)[:, None], 11, axis=1))
    return fields


def plan(fields: xr.Dataset, speed: float = 0.0, **changes: object) -> TimePlan:
    return plan_time(settings(**changes), fields, means(fields), DEPTHS, speed)


def test_correlation_and_drift_are_measured() -> None:
    found = measure_decorrelation(evolving(0.7, drift=(3, -2)), DEPTHS)
    assert found.interval == 100.0
    assert found.moving == pytest.approx(0.7, abs=0.12)
    assert found.velocity == pytest.approx((3 * 2.5 / 100.0, -2 * 2.5 / 100.0))
    assert found.significant
    assert found.fixed < found.moving


def test_unrelated_snapshots_are_not_taken_for_a_moving_pattern() -> None:
    fields = evolving(0.0)
    assert not measure_decorrelation(fields, DEPTHS).significant
    made = plan(fields, averaging_interval=10.0)
    assert made.mode == "frozen"
    assert "no pattern survives" in made.evidence


def test_steady_uniform_water_never_decorrelates() -> None:
    fields = water(constant(0.1), times=(0.0, 60.0))
    assert plan(fields).mode == "interpolated"
    assert plan(fields).memory == np.inf


def test_auto_interpolates_only_where_snapshots_resolve_the_eddies() -> None:
    assert plan(evolving(0.95)).mode == "interpolated"
    assert plan(evolving(0.6), averaging_interval=10.0).mode == "frozen"
    # a pattern that moves on between snapshots is not resolved in time at a fixed place, however alike it stays
    moving = plan(evolving(0.95, drift=(10, 0)))
    assert moving.mode == "frozen"
    assert moving.memory == pytest.approx(100.0 / np.log(1 / 0.95), rel=0.35)


def test_the_mode_that_would_lie_is_refused_with_numbers() -> None:
    with pytest.raises(DataError, match=r"p.*interpolated.*100 s apart correlate by 0\.\d\d.*0\.8"):
        plan(evolving(0.5), time_mode="interpolated")
    with pytest.raises(DataError, match=r"frozen.*ensemble of 600 s.*memory"):
        plan(evolving(0.5), time_mode="frozen", averaging_interval=600.0)
    with pytest.raises(DataError, match=r"neither mode.*correlate by 0\.\d\d.*ensemble of 600 s"):
        plan(evolving(0.5), averaging_interval=600.0)
    with pytest.raises(DataError, match="only one snapshot"):
        plan(evolving(0.5, count=1), time_mode="interpolated")


def test_ensembles_follow_each_other_from_snapshot_to_snapshot() -> None:
    made = plan(evolving(0.6), averaging_interval=10.0)
    np.testing.assert_allclose(np.diff(made.centres), 10.0)
    assert made.regular
    assert made.centres[0] == -45.0
    assert made.centres[-1] == 445.0
    assert np.all(np.abs(made.centres - 100.0 * made.snapshot) <= 50.0)


def test_a_pattern_that_would_pass_twice_is_cut_short() -> None:
    """The domain is 120 m wide: at 4 m/s a snapshot lasts 30 s, not 100."""
    made = plan(evolving(0.6), speed=4.0, averaging_interval=10.0)
    assert not made.regular
    assert np.abs(made.centres - 100.0 * made.snapshot).max() <= 15.0
    assert set(made.snapshot) == set(range(5))


@dataclass(frozen=True)
class Interval:
    start: float
    end: float


def test_snapshots_outside_the_windows_are_left_out() -> None:
    fields = evolving(0.6)
    windows = [Interval(100.0, 200.0), Interval(250.0, 310.0)]
    made = plan_time(settings(averaging_interval=10.0), fields, means(fields), DEPTHS, 0.0, windows)
    assert set(made.snapshot) == {1, 2, 3}


def travelling(speed: float, times: tuple[float, ...]) -> xr.Dataset:
    """u = speed + a wave of 40 m that is carried along by it."""
    return water(lambda x, y, z, t: speed + 0.05 * np.cos(2 * np.pi * (x - speed * t) / 40.0) + 0.0 * y + 0.0 * z, times=times)


def test_a_frozen_pattern_is_carried_past_as_it_would_move() -> None:
    """Between two snapshots the series continues the wave without a step, and its ensembles are damped by sinc(kUT/2)."""
    fields = travelling(0.1, (0.0, 400.0, 800.0))
    asked = settings(time_mode="frozen", interpolation="spectral", position=(7.0, 0.0), deployments=None, cell_length=0.5,
                     averaging_interval=40.0, ping_interval=1.0)
    made = sample(fields, means(fields), asked, [], np.random.default_rng(0))
    k = 2 * np.pi / 40.0
    half = (made["depth"].values - 30.0) * -np.tan(np.radians(20.0))
    cell = np.sinc(k * np.sin(np.radians(20.0)) * 0.5 / np.cos(np.radians(20.0)) / 2 / np.pi) ** 2
    damped = np.sin(40 * k * 0.05) / (40 * np.sin(k * 0.05))
    expected = 0.1 + 0.05 * cell * damped * np.cos(k * half) * np.cos(k * (7.0 - 0.1 * made["time"].values[:, None]))
    np.testing.assert_allclose(made["u"].values[0], expected, atol=1e-7)
    assert made.attrs["time_mode"] == "frozen"
    assert made.attrs["advection_u"] == pytest.approx(0.1)


def test_interpolation_in_time_is_the_mean_of_its_pings() -> None:
    """A flow linear in time between snapshots is recovered exactly, also where an ensemble straddles a snapshot."""
    fields = water(constant(0.0), times=(0.0, 100.0, 200.0))
    fields["u"] = fields["u"] + xr.DataArray([0.0, 1.0, 0.5], dims="time")
    asked = settings(time_mode="auto", averaging_interval=40.0, ping_interval=4.0)
    made = sample(fields, means(fields), asked, [], np.random.default_rng(0))
    assert made.attrs["time_mode"] == "interpolated"
    pings = made["time"].values[:, None] + 4.0 * (np.arange(10) - 4.5)
    expected = np.interp(pings, [0.0, 100.0, 200.0], [0.0, 1.0, 0.5]).mean(axis=1)
    assert made.sizes["time"] == 5
    np.testing.assert_allclose(made["u"].values, np.broadcast_to(expected[None, :, None], made["u"].shape), atol=1e-12)


def test_a_given_advection_is_used() -> None:
    fields = travelling(0.1, (0.0,))
    still = sample(fields, means(fields), settings(advection=(0.0, 0.0), averaging_interval=20.0), [], np.random.default_rng(0))
    np.testing.assert_allclose(still["u"].values, np.broadcast_to(still["u"].values[:, :1], still["u"].shape), atol=1e-12)
    carried = sample(fields, means(fields), settings(averaging_interval=20.0), [], np.random.default_rng(0))
    assert carried["u"].values.std(axis=1).max() > 0.01


def test_wrapping_acts_on_single_pings() -> None:
    """u = 1 m/s looks 0.342 m/s along beam 1; at an ambiguity of 0.2 m/s every ping wraps to -0.058, whatever the noise of the mean."""
    fields = water(constant(1.0))
    made = sample(fields, means(fields), settings(ambiguity_velocity=0.2, noise=0.01, averaging_interval=30.0, deployments=100), [],
                  np.random.default_rng(0))
    sine = np.sin(np.radians(20.0))
    assert float(made["beam_1"].mean()) == pytest.approx(sine - 0.4, abs=1e-3)
    assert float(made["beam_2"].mean()) == pytest.approx(0.4 - sine, abs=1e-3)
    assert float(made["beam_3"].std()) == pytest.approx(0.01 / np.sqrt(30), rel=0.05)
