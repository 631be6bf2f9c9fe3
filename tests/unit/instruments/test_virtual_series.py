"""The series of virtual deployments: contents, flags, noise, determinism, the file, and its agreement with the water."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from lespost.errors import DataError
from lespost.instruments.cautions import PLANNING_CAUTION
from lespost.instruments.doppler_profiler import DopplerProfiler
from lespost.instruments.moments import beam_stress, noise_corrected_variances
from lespost.instruments.sample import sample, subgrid_share
from lespost.instruments.settings import InstrumentSettings
from lespost.records.read import read_record
from lespost.records.settings import RecordSettings
from lespost.records.write import write_series
from tests.unit.instruments.water import constant, means, water


def settings(**changes: object) -> InstrumentSettings:
    asked: dict[str, object] = {"name": "p", "depth": 30.0, "cell_length": 2.0, "averaging_interval": 20.0, "deployments": 6}
    return InstrumentSettings.model_validate(asked | changes)


def waves(times: tuple[float, ...] = (0.0,), staggered: bool = False) -> xr.Dataset:
    return water(lambda x, y, z, t: 0.1 + 0.05 * np.cos(2 * np.pi * (x / 40.0 + y / 80.0)) + 0.0 * z, constant(-0.02),
                 lambda x, y, z, t: 0.03 * np.sin(2 * np.pi * y / 40.0) * np.sin(np.pi * z / 40.0) + 0.0 * x, times=times,
                 staggered=staggered, dtype=np.float32)


def take(fields: xr.Dataset, asked: InstrumentSettings, seed: int = 0) -> xr.Dataset:
    return sample(fields, means(fields), asked, [], np.random.default_rng(seed))


def test_the_series_is_canonical() -> None:
    made = take(waves(), settings())
    for name in ("u", "v", "w", "error_velocity", "beam_1", "beam_4", "u_flag"):
        assert made[name].dims == ("deployment", "time", "depth"), name
    assert np.all(np.diff(made["depth"].values) > 0)
    assert made.sizes["deployment"] == 6
    assert made.attrs["featureType"] == "timeSeriesProfile"
    assert made.attrs["chain"] == "[]"
    assert made.attrs["averaging_interval"] == 20.0
    assert made["time"].attrs["time_origin"] == "run"
    assert made["u"].attrs["units"] == "m s-1"
    assert set(np.unique(made["u_flag"])) == {1}
    # every choice is there to be read
    assert InstrumentSettings.model_validate(json.loads(made.attrs["settings"])) == settings()
    for key in ("time_mode", "snapshot_correlation", "pattern_memory_evidence", "interpolation", "advection_u", "beam_sign"):
        assert key in made.attrs
    assert all(isinstance(value, str | int | float) for value in made.attrs.values())


def test_the_same_seed_gives_the_same_bytes_and_another_another() -> None:
    fields = waves(times=(0.0, 60.0))
    one, two, three = take(fields, settings(), 4), take(fields, settings(), 4), take(fields, settings(), 5)
    assert one.identical(two)
    assert not np.array_equal(one["u"], three["u"])


def test_noise_is_what_the_attributes_state() -> None:
    still = water(times=(0.0, 6000.0))
    asked = settings(noise=0.08, deployments=40, quantisation=0.01, heading=30.0)
    made = take(still, asked)
    # two thirds of a percent for some 10^5 values; quantisation adds step²/12
    for name in ("u", "v", "w", "error_velocity"):
        assert float(made[name].std()) == pytest.approx(made.attrs[f"{name}_noise_standard_deviation"], rel=0.01), name
    assert made.attrs["beam_noise_standard_deviation"] == pytest.approx(np.sqrt(0.08**2 / 20 + 1e-4 / 12))
    steps = made["beam_1"].values / 0.01
    np.testing.assert_allclose(steps, np.round(steps), atol=1e-9)
    corrected = noise_corrected_variances(made)
    for name in ("uu", "vv", "ww", "error_velocity_variance"):
        assert abs(float(corrected[name].mean())) < 0.02 * float(made["u"].var())


def test_horizontal_noise_is_translated() -> None:
    beam = DopplerProfiler.place(settings(noise=0.1), waves()).noise.deviation
    horizontal = DopplerProfiler.place(settings(noise=0.1, noise_of="horizontal"), waves()).noise.deviation
    assert beam == 0.1
    assert horizontal == pytest.approx(0.1 * np.sqrt(2) * np.sin(np.radians(20.0)))


def test_spoilt_cells_fail_and_lost_ones_are_missing() -> None:
    made = take(waves(), settings(cells=14, noise=0.0))
    spoilt = made["depth"].values < 30.0 * (1 - np.cos(np.radians(20.0))) + 3.0
    assert spoilt.any()
    np.testing.assert_array_equal(made["u_flag"].values, np.broadcast_to(np.where(spoilt, 4, 1), made["u_flag"].shape))
    tilted = take(waves(), settings(pitch=8.0, noise=0.0))
    # next to the head only the beam that stands up is missing, and three beams give a velocity but no error velocity;
    # three beams do not reach the height of the farthest cell
    np.testing.assert_array_equal(np.isfinite(tilted["u"].values[0, 0]), np.arange(tilted.sizes["depth"]) > 0)
    assert np.isnan(tilted["error_velocity"].values[..., -1]).all()
    np.testing.assert_array_equal(tilted["error_velocity_flag"].values == 9, np.isnan(tilted["error_velocity"].values))
    np.testing.assert_array_equal(tilted["u_flag"].values == 9, np.isnan(tilted["u"].values))
    unmapped = take(waves(), settings(pitch=8.0, noise=0.0, bin_mapping=False))
    assert np.isfinite(unmapped["error_velocity"].values).all()


@pytest.mark.parametrize("changes", [{}, {"looking": "down", "depth": 4.0}, {"heading": 77.0}, {"pitch": 4.0, "roll": -3.0},
                                     {"beam_azimuths": (45.0, 225.0, 135.0, 315.0)}, {"beam_azimuths": (10.0, 100.0, 190.0, 300.0)}])
def test_uniform_water_is_read_as_it_is(changes: dict[str, object]) -> None:
    fields = water(constant(0.2), constant(-0.1), constant(0.01))
    made = take(fields, settings(noise=0.0, quantisation=0.0, **changes))
    for name, value in (("u", 0.2), ("v", -0.1), ("w", 0.01)):
        np.testing.assert_allclose(made[name][..., 1:-1], value, atol=1e-12)
        if "pitch" not in changes:  # the beams of a tilted instrument do not all reach its first and last cells
            np.testing.assert_allclose(made[name], value, atol=1e-12)
    error = made["error_velocity"].values
    np.testing.assert_allclose(error[np.isfinite(error)], 0.0, atol=1e-12)
    assert made.attrs["opposing_pairs"] == int("beam_azimuths" not in changes)


@pytest.mark.parametrize("staggered", [False, True])
def test_the_mean_of_many_deployments_approaches_the_mean_of_the_level(staggered: bool) -> None:
    fields = waves(staggered=staggered)
    few, many = (take(fields, settings(deployments=n, noise=0.0, quantisation=0.0)) for n in (9, 900))
    level = np.interp(-many["depth"].values, fields["z"].values, means(fields)["u"].values[0])
    np.testing.assert_allclose(many["u"].mean(("deployment", "time")).values, level, atol=6e-4)
    assert np.abs(many["u"].mean(("deployment", "time")) - level).max() < np.abs(few["u"].mean(("deployment", "time")) - level).max()


def test_variance_method_on_water_of_known_stress() -> None:
    """Homogeneous correlated noise, ⟨uw⟩ known from the grid itself; the error is that of 900 places, from their own scatter."""
    rng = np.random.default_rng(12)
    n = 32
    k = np.hypot(*np.meshgrid(np.fft.fftfreq(n) * n, np.fft.fftfreq(n) * n))
    shape = np.where(k < n / 2 - 1, np.exp(-(k**2) / 60.0), 0.0)
    a, b, c = (np.fft.ifft2(np.fft.fft2(rng.normal(size=(n, n))) * shape).real for _ in range(3))
    u, v, w = 0.1 * a, 0.1 * c, -0.06 * a + 0.05 * c + 0.02 * b
    u, v, w = (part - part.mean() for part in (u, v, w))
    fields = water(size=(n, n, 20), lengths=(80.0, 80.0))
    for name, part in (("u", u), ("v", v), ("w", w)):
        fields[name] = fields[name].copy(data=np.broadcast_to(part, fields[name].shape))
    thin = {"cell_length": 0.01, "blank": 14.0, "cells": 1, "quantisation": 0.0, "interpolation": "spectral", "averaging_interval": 1.0}
    for changes in ({}, {"heading": 50.0}, {"looking": "down", "depth": 5.0}):
        made = take(fields, settings(deployments=900, noise=0.01, **(thin | changes))).isel(time=slice(0, 1))
        got = beam_stress(made, about="ensemble")
        for name, other in (("uw", u), ("vw", v)):
            scatter = float(got[name].std()) / 30.0
            truth = float((other * w).mean())
            assert abs(float(got[name].mean()) - truth) < 3 * scatter, (name, changes)
            assert abs(truth) > 5 * scatter, "the test would not see a wrong sign"


def test_the_file_passes_the_cf_checker_and_is_read_back(tmp_path: Path) -> None:
    checker = pytest.importorskip("compliance_checker.runner")
    made = take(waves(times=(0.0, 60.0)), settings(noise=0.01))
    path = write_series(made, tmp_path / "p.nc")
    assert [item.name for item in tmp_path.iterdir()] == ["p.nc"]
    checker.CheckSuite.load_all_available_checkers()
    _, errors = checker.ComplianceChecker.run_checker(str(path), ["cf:1.8"], 0, "normal", output_filename=str(tmp_path / "report.json"),
                                                      output_format="json")
    report = json.loads((tmp_path / "report.json").read_text())["cf:1.8"]
    assert not errors
    findings = [message for priority in ("high_priorities", "medium_priorities") for item in report[priority] for message in item["msgs"]]
    assert findings == []
    with xr.open_dataset(path, decode_times=False) as stored:
        for name in ("u", "v", "w", "error_velocity", "beam_1", "beam_4"):
            np.testing.assert_array_equal(stored[name].values, made[name].values)
        np.testing.assert_array_equal(stored["time"].values, made["time"].values)
        np.testing.assert_allclose(stored["deployment_x"], made["deployment_x"])
        assert stored.attrs["settings"] == made.attrs["settings"]
        np.testing.assert_array_equal(stored["wavelength"], made["wavelength"])
        np.testing.assert_array_equal(stored["response_pair"], made["response_pair"])
    back = read_record(RecordSettings(name="back", path=str(path), station="2", x_axis_compass_bearing=90.0), tmp_path)
    np.testing.assert_allclose(back["u"].values[0], made["u"].values[2], atol=1e-12)


def test_the_subgrid_share_comes_from_the_files_only() -> None:
    profiles = means(waves())
    assert subgrid_share(profiles, np.array([10.0])) is None
    for name in ("uu", "vv", "ww"):
        profiles[f"{name}_sgs"] = profiles[name] * 0.25
    np.testing.assert_allclose(subgrid_share(profiles, np.array([10.0, 20.0])), 0.2)


def test_profiles_of_other_snapshots_are_refused() -> None:
    with pytest.raises(DataError, match="not those of the fields"):
        sample(waves(times=(0.0, 60.0)), means(waves()), settings(), [], np.random.default_rng(0))


def test_the_series_carries_its_response() -> None:
    """cos ks, -cot θ sin ks with s = h tan θ (derived), in the order of the depths of the series."""
    made = take(waves(), settings())
    wavelengths = made["wavelength"].values
    assert wavelengths[[0, -1]] == pytest.approx([10.0, 80.0])
    phase = 2 * np.pi / wavelengths[:, None] * (30.0 - made["depth"].values) * np.tan(np.radians(20.0))
    np.testing.assert_allclose(made["response_pair"], np.cos(phase), atol=1e-12)
    np.testing.assert_allclose(made["response_leak"], -np.sin(phase) / np.tan(np.radians(20.0)), atol=1e-12)
    # horizontal wave along the slanted cell: wavenumber k sin θ, length L/cos θ
    cell = np.sinc(np.tan(np.radians(20.0)) * 2.0 / wavelengths) ** 2
    np.testing.assert_allclose(made["response_cell"], np.broadcast_to(cell[:, None], made["response_cell"].shape), atol=1e-12)
    averaging = np.sinc(0.1020 * 20.0 / wavelengths)  # |(0.1, -0.02)| m/s for 20 s; 20 pings are close to a boxcar
    np.testing.assert_allclose(made["response_averaging"][:, 0], averaging, atol=1e-3)
    assert made["response_interpolation"].values[0] == pytest.approx(np.sqrt(0.86138), abs=1e-5)  # cubic, four cells


def test_real_water_is_read_with_its_means_and_the_leak_of_w(shared: Path) -> None:
    """On a Langmuir run: means as the levels', time frozen because snapshots are unlike at a place; horizontal variance far above
    the water's, as w leaks in by cot θ, which is why it must never be compared with point variances."""
    raw = xr.open_dataset(shared / "fields" / "langmuir.nc", decode_times=False)[["u", "v", "w"]].rename(z_w="z_face")
    profiles = means(raw)
    made = sample(raw, profiles, settings(deployments=25, noise=0.0, cell_length=1.0), [], np.random.default_rng(1))
    assert made.attrs["time_mode"] == "frozen"
    assert made.attrs["snapshot_correlation"] < 0.3 < made.attrs["snapshot_correlation_moving"]
    depths = made["depth"].values
    for name in ("u", "v"):
        level = np.interp(-depths, raw["z"].values, profiles[name].values.mean(axis=0))
        np.testing.assert_allclose(made[name].mean(("deployment", "time")), level, atol=4e-3)
        variance = np.interp(-depths, raw["z"].values, profiles[name + name].values.mean(axis=0))
        near = depths < 15.0
        assert np.all(made[name].var(("deployment", "time")).values[near] > 2.0 * variance[near])
    sampled_w = made["w"].var(("deployment", "time")).values
    assert np.all(sampled_w < np.interp(-depths, raw["z"].values, profiles["ww"].values.mean(axis=0)))


def test_the_caution_defers_to_rules_and_licensed_practice() -> None:
    for word in ("local rules", "notices to mariners", "licensed"):
        assert word in PLANNING_CAUTION
