"""The checks find each mistake planted in otherwise sound profiles, name it, and stay silent on sound ones."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from lespost.findings import Finding
from lespost.profiles import checks
from lespost.profiles.closure import (
    Declared,
    check_momentum_flux,
    check_stokes_direction,
    check_stress_direction,
    check_temperature_flux,
    surface_flux,
)
from lespost.profiles.one_pass import profile_statistics
from lespost.profiles.settings import IntervalSettings, ProfilesSettings
from tests.unit.profiles.synthetic import dataset, from_functions, random_arrays

USTAR, HEAT = 0.01, 2e-6
DENSITY, SPECIFIC_HEAT = 1025.0, 3991.86795711963


def stress_profiles(direction: float = 0.0, subgrid: bool = True, ustar: float = USTAR, heat: float = HEAT) -> xr.Dataset:
    """Profiles whose total stress is u*^2 (1 + z / 50 m) towards `direction`, half of it subgrid; heat flux likewise."""
    faces = np.linspace(-100.0, 0.0, 51)
    shape = np.clip(1.0 + faces / 50.0, 0.0, None)
    angle = np.radians(direction)
    flux = {"uw": -(ustar**2) * np.cos(angle) * shape, "vw": -(ustar**2) * np.sin(angle) * shape, "wtheta": heat * shape}
    data = {f"{name}_face": (("time", "z_face"), np.tile(0.5 * values, (2, 1))) for name, values in flux.items()}
    if subgrid:
        data |= {f"{name}_total_face": (("time", "z_face"), np.tile(values, (2, 1))) for name, values in flux.items()}
        for name in flux:
            data[f"{name}_total_face"][1][:, [0, -1]] = np.nan
    return xr.Dataset(data, {"time": [0.0, 600.0], "z_face": faces})


def only(findings: list[Finding], code: str, *words: str) -> Finding:
    assert [finding.code for finding in findings] == [code]
    for word in words:
        assert word in findings[0].message
    return findings[0]


def test_linear_stress_is_continued_to_the_surface_exactly() -> None:
    flux, subgrid = surface_flux(stress_profiles(), "uw")
    assert subgrid
    assert flux == pytest.approx(-(USTAR**2), rel=1e-12)


def test_silent_when_the_flux_closes() -> None:
    profiles = stress_profiles(direction=40.0)
    declared = Declared(USTAR, 40.0, HEAT, 40.0, 0.06)
    assert not check_momentum_flux(profiles, declared)
    assert not check_temperature_flux(profiles, declared)
    assert not check_stress_direction(profiles, declared)
    assert not check_stokes_direction(declared)
    # resolved part alone is half: less than the total is no fault where the files hold no subgrid flux
    assert not check_momentum_flux(stress_profiles(40.0, subgrid=False), declared)


def test_what_is_not_declared_is_not_checked() -> None:
    for check in (check_momentum_flux, check_temperature_flux, check_stress_direction):
        assert not check(stress_profiles(), Declared())


@pytest.mark.parametrize(
    ("factor", "words"),
    [
        (DENSITY, "a stress in N m-2 stands"), (1.0 / DENSITY, "divided by it once too often"), (1.22, "the density of air"),
        (1.0 / 1.22, "it was left out"), (DENSITY / 1.22, "friction velocity of the air side"),
    ],
)  # fmt: skip
def test_factors_of_the_stress_are_named(factor: float, words: str) -> None:
    declared = Declared(USTAR * np.sqrt(factor))
    finding = only(check_momentum_flux(stress_profiles(), declared), "momentum-flux", words)
    assert finding.severity == "error"
    assert finding.value == pytest.approx(factor, rel=1e-9)


def test_a_mismatch_without_a_name_is_a_warning() -> None:
    finding = only(check_momentum_flux(stress_profiles(), Declared(USTAR * np.sqrt(1.5))), "momentum-flux", "1.5 times less")
    assert finding.severity == "warning"


def test_heat_flux_in_watts_and_with_the_wrong_sign() -> None:
    watts = Declared(surface_temperature_flux=-HEAT * DENSITY * SPECIFIC_HEAT)
    only(check_temperature_flux(stress_profiles(), watts), "temperature-flux", "W m-2", "opposite sign")
    wrong_sign = check_temperature_flux(stress_profiles(), Declared(surface_temperature_flux=-HEAT))
    finding = only(wrong_sign, "temperature-flux", "opposite sign")
    assert finding.severity == "error"


@pytest.mark.parametrize(
    ("found", "declared", "words"),
    [
        (30.0, 210.0, "comes from"), (120.0, np.radians(120.0), "radians"), (0.0, 90.0, "compass bearing"),
        (200.0, -110.0, "compass bearing"), (10.0, 80.0, "compass bearing"), (300.0, 350.0, "points to 300.0 degree"),
    ],
)  # fmt: skip
def test_slips_of_direction_are_named(found: float, declared: float, words: str) -> None:
    finding = only(check_stress_direction(stress_profiles(found), Declared(USTAR, declared)), "stress-direction", words)
    assert finding.severity == "error"


def test_thirty_degrees_are_allowed() -> None:
    assert not check_stress_direction(stress_profiles(350.0), Declared(USTAR, 15.0))
    assert check_stress_direction(stress_profiles(350.0), Declared(USTAR, 25.0))


def test_misaligned_waves_must_be_meant() -> None:
    only(check_stokes_direction(Declared(USTAR, 0.0, stokes_direction=60.0, us0=0.07)), "stokes-direction", "60.0")
    assert not check_stokes_direction(Declared(USTAR, 0.0, stokes_direction=60.0, us0=0.07, misaligned=True))
    assert not check_stokes_direction(Declared(USTAR, 0.0, stokes_direction=60.0, us0=0.0))


def turbulent(times: int = 1, **replace: object) -> xr.Dataset:
    arrays = random_arrays(np.random.default_rng(0), (8, 16, 16), times)
    for name in ("u", "v", "w", "theta"):  # smooth: the mean of neighbours, and no mean w
        values = arrays[name].astype(float)
        values -= values.mean(axis=(2, 3), keepdims=True)
        for _ in range(2):
            for axis in (2, 3):
                values = 0.5 * (values + np.roll(values, 1, axis))
        arrays[name] = values
    arrays |= replace  # type: ignore[arg-type]
    return profile_statistics(dataset(arrays, staggered=False, vertical=True, lengths=(400.0, 400.0, 50.0)), ProfilesSettings())


def test_sound_profiles_have_few_findings() -> None:
    """One snapshot, and w independent from level to level, of which averaging takes half (closed form for white noise)."""
    found = checks.check_profiles(turbulent(), Declared(), 30.0, [IntervalSettings(name="all", start=0.0, end=1e9)])
    assert [finding.code for finding in found] == ["centring-loss", "single-snapshot"]
    assert found[0].value == pytest.approx(0.5, abs=0.06)


def test_missing_values() -> None:
    arrays = random_arrays(np.random.default_rng(0), (8, 16, 16))
    arrays["u"][0, 3, 2, 2] = np.nan
    profiles = turbulent(u=arrays["u"])
    only(checks.check_missing_values(profiles), "missing-values", "1 values", "snapshot 1")


def test_constant_levels() -> None:
    arrays = random_arrays(np.random.default_rng(0), (8, 16, 16))
    arrays["v"][0, 2] = 0.25
    only(checks.check_constant_levels(turbulent(v=arrays["v"])), "constant-level", "v has one value only on 1 of 8 levels")


def test_mean_w() -> None:
    arrays = random_arrays(np.random.default_rng(0), (8, 16, 16))
    w = arrays["w"] - arrays["w"].mean(axis=(2, 3), keepdims=True, dtype=np.float64)
    assert not checks.check_mean_w(turbulent(w=w))
    rms = float(np.sqrt((w[0, 4] ** 2).mean()))
    assert only(checks.check_mean_w(turbulent(w=w + 1e-4 * rms)), "mean-w").severity == "note"
    assert only(checks.check_mean_w(turbulent(w=w + 0.1 * rms)), "mean-w").severity == "warning"


def test_noise_at_the_grid_scale() -> None:
    rng = np.random.default_rng(1)
    finding = only(checks.check_grid_scale(turbulent(w=rng.standard_normal((1, 9, 16, 16)))), "grid-scale-energy")
    assert finding.value == pytest.approx(0.5, abs=0.03)  # white noise, closed form


def test_centring_loss_of_a_wave_of_four_levels() -> None:
    """cos^2(pi / 4) = 1/2 of the variance is lost at a vertical wavelength of four levels (closed form)."""
    zero = lambda x, y, z: 0.0 * (x + y + z)  # noqa: E731
    wave = lambda x, y, z: np.sin(2 * np.pi * z / 8.0) * np.cos(2 * np.pi * x / 100.0) + 0 * y  # noqa: E731
    functions = {"u": zero, "v": zero, "w": wave}
    fields = from_functions(functions, (32, 8, 16), staggered=False, vertical=True, lengths=(100.0, 80.0, 64.0))
    finding = only(checks.check_centring(profile_statistics(fields, ProfilesSettings())), "centring-loss", "50 %")
    assert finding.value == pytest.approx(0.5, abs=1e-12)


def test_divergence_on_a_staggered_grid() -> None:
    fields = dataset(random_arrays(np.random.default_rng(3), (6, 12, 12)), staggered=True, vertical=True)
    only(checks.check_divergence(profile_statistics(fields, ProfilesSettings())), "divergence", "not solenoidal")


def test_snapshots_close_and_far() -> None:
    profiles = turbulent(3)
    turnover = checks.turnover_time(profiles, 30.0)
    inside = profiles["z"].values > -30.0
    assert turnover == pytest.approx(30.0 / np.sqrt(profiles["ww"].values[:, inside].mean()))
    close = profiles.assign_coords(time=turnover * 0.2 * np.arange(3))
    far = profiles.assign_coords(time=turnover * 20.0 * np.arange(3))
    right = profiles.assign_coords(time=turnover * 2.0 * np.arange(3))
    only(checks.check_snapshots(close, 30.0), "snapshots-close", "span 0.4 turnover times")
    only(checks.check_snapshots(far, 30.0), "snapshots-far")
    assert not checks.check_snapshots(right, 30.0)


def test_narrow_domain() -> None:
    only(checks.check_domain_width(turbulent(), 100.0), "narrow-domain", "4 layer depths")
    assert not checks.check_domain_width(turbulent(), 80.0)
    assert not checks.check_domain_width(turbulent(), float("nan"))


def test_drift_within_a_window() -> None:
    profiles = turbulent(8)
    window = IntervalSettings(name="all", start=0.0, end=1e9)
    assert not checks.check_drift(profiles, window, 30.0)
    growth = xr.DataArray(np.linspace(0.5, 1.5, 8), dims="time")
    growing = profiles.assign({name: profiles[name] * growth for name in ("uu", "vv", "ww")})
    only(checks.check_drift(growing, window, 30.0), "drift", "grows")


def test_negative_subgrid_energy() -> None:
    names = ("u", "v", "w", "tke_sgs")
    arrays = random_arrays(np.random.default_rng(0), (4, 8, 8), names=names)
    arrays["tke_sgs"] = -np.abs(arrays["tke_sgs"])
    profiles = profile_statistics(dataset(arrays, staggered=False, vertical=True), ProfilesSettings())
    finding = only(checks.check_negative_variances(profiles), "negative-variance", "uu_sgs")
    assert finding.severity == "error"


@pytest.mark.parametrize(("case", "codes"), [("langmuir", ["snapshots-close"]), ("shear", ["snapshots-close", "drift"])])
def test_real_runs(shared: Path, case: str, codes: list[str]) -> None:
    """What the two real runs deserve: their snapshots are 0.1 turnover times apart, and the sheared one is decaying."""
    with xr.open_dataset(shared / "fields" / f"{case}.nc", decode_times=False) as raw:
        fields = raw.rename(z_w="z_face").load()
    attrs = fields.attrs
    profiles = profile_statistics(fields, ProfilesSettings(prandtl_number=float(attrs["pr"])))
    heat = -attrs["Q"] / (attrs["rho0"] * attrs["cp"])
    declared = Declared(attrs["ustar"], attrs["tau_dir"], heat, attrs["us_dir"], attrs["us0"])
    found = checks.check_profiles(profiles, declared, attrs["h0"], [IntervalSettings(name="all", start=0.0, end=1e9)])
    assert [finding.code for finding in found] == codes
