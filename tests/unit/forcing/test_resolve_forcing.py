"""Where a run's forcing comes from: recipe before files, contradictions refused, compass turned, the unknown NaN and said."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr
from hypothesis import given
from hypothesis import strategies as st
from pydantic import ValidationError

from lespost.errors import DataError, RecipeError
from lespost.findings import Hint
from lespost.forcing.buoyancy import seawater_properties
from lespost.forcing.resolve import mean_direction, resolve_forcing, wrap_degrees
from lespost.forcing.settings import ForcingSettings, StokesSettings

TIME = np.array([0.0, 600.0, 1200.0])
FACES = np.array([-40.0, -20.0, -8.0, -2.0, 0.0])
CENTRES = 0.5 * (FACES[1:] + FACES[:-1])
HINTS = {
    "friction_velocity": Hint(np.array([0.006, 0.007, 0.008]), "m s-1", 'variable "friction_velocity"', ("time",)),
    "surface_heat_flux": Hint(-50.0, "W m-2", 'attribute "Q"'),
    "stokes_surface_speed": Hint(0.068, "m s-1", 'attribute "us0"'),
    "stokes_wavenumber": Hint(0.1047, "m-1", 'attribute "kwave"'),
    "coriolis_parameter": Hint(1e-4, "s-1", 'attribute "f"'),
    "thermal_expansion": Hint(2e-4, "K-1", 'attribute "alpha"'),
}


def resolve(forcing: dict[str, Any] | None = None, stokes: dict[str, Any] | None = None, hints: dict[str, Hint] | None = None,
            base: Path | None = None) -> xr.Dataset:
    return resolve_forcing(ForcingSettings(**(forcing or {})), StokesSettings(**(stokes or {})), hints or {}, TIME, CENTRES, FACES, base)


def decision(found: xr.Dataset, subject: str) -> dict[str, str]:
    return next(entry for entry in json.loads(found.attrs["decisions"]) if entry["subject"] == subject)


def test_files_speak_where_the_recipe_is_silent() -> None:
    found = resolve(hints=HINTS)
    assert found["friction_velocity"].values == pytest.approx([0.006, 0.007, 0.008])
    assert float(found["coriolis_parameter"]) == 1e-4
    expected = 9.81 * 2e-4 * 50 / (1025 * 3991.86795711963)
    assert found["surface_buoyancy_flux"].values == pytest.approx(np.full(3, expected), rel=1e-9)
    assert decision(found, "friction velocity")["how"] == "metadata"
    assert "0.006 to 0.008" in decision(found, "friction velocity")["choice"]


def test_recipe_wins_over_files_and_is_named() -> None:
    found = resolve({"friction_velocity": 0.01, "thermal_expansion": 1e-4}, {"surface_speed": 0.1, "wavelength": 40.0}, HINTS)
    assert found["friction_velocity"].values == pytest.approx(np.full(3, 0.01))
    assert found["us0"].values == pytest.approx(np.full(3, 0.1))
    assert found["stokes_depth"].values == pytest.approx(np.full(3, 40 / (4 * np.pi)))
    assert float(found["thermal_expansion"]) == 1e-4
    assert decision(found, "friction velocity") == {
        "subject": "friction velocity", "choice": "0.01 m s-1", "how": "recipe",
        "evidence": '[forcing].friction_velocity; the files say 0.007 m s-1 (variable "friction_velocity")'}


def test_stress_and_wind_make_friction_velocity() -> None:
    assert resolve({"stress": 0.1}, hints=HINTS)["friction_velocity"].values == pytest.approx(np.full(3, 9.877296e-3), rel=1e-6)
    wind = float(resolve({"wind_speed": "20 kt", "bulk_formula": "large_pond_1981"})["friction_velocity"][0])
    assert wind == pytest.approx(np.sqrt(1.22 * 1.2e-3 / 1025) * 20 * 1852 / 3600, rel=1e-9)  # knots are 1852 m per hour


@pytest.mark.parametrize("forcing", [
    {"friction_velocity": 0.01, "stress": 0.1}, {"stress": 0.1, "wind_speed": 8.0}, {"latitude": 45, "coriolis_parameter": 1e-4},
    {"surface_heat_flux": -50, "surface_temperature_flux": 1e-5}, {"stress_direction": 0, "wind_from_compass": 270},
    {"wind_from_compass": 270}, {"friction_velocity": 0.1}, {"latitude": 95}, {"stress": -0.1}, {"wind_speed": "3 kg"},
])
def test_contradictions_and_impossible_values_are_refused(forcing: dict[str, Any]) -> None:
    with pytest.raises(ValidationError) as error:
        ForcingSettings(**forcing)
    assert error.value.error_count() == 1


@pytest.mark.parametrize("stokes", [
    {"wavelength": 60, "wavenumber": 0.1}, {"kind": "profile"}, {"kind": "spectrum"}, {"profile_z": (-1.0, 1.0), "profile_u": (0.1, 0.2)},
    {"profile_z": (-1.0, 0.0), "profile_u": (0.1,)}, {"kind": "bulk_breivik_2016", "surface_speed": 0.2},
])
def test_contradictory_waves_are_refused(stokes: dict[str, Any]) -> None:
    with pytest.raises(ValidationError):
        StokesSettings(**stokes)


def test_waves_that_make_no_profile_are_refused_in_words() -> None:
    with pytest.raises(RecipeError, match="not how it decays"):
        resolve(stokes={"surface_speed": 0.1})
    with pytest.raises(RecipeError, match="wind_speed"):
        resolve(stokes={"kind": "theory_wave"})


def test_friction_velocity_of_the_files_that_is_a_stress_is_refused() -> None:
    with pytest.raises(RecipeError, match="hurricane"):
        resolve(hints={"friction_velocity": Hint(0.1, "m s-1", 'attribute "ustar"')})


def test_series_of_another_length_is_refused() -> None:
    with pytest.raises(DataError, match="2 values for 3 snapshots"):
        resolve(hints={"friction_velocity": Hint(np.array([0.1, 0.2]), "m s-1", 'variable "ustar"', ("time",))})


@pytest.mark.parametrize(("coming_from", "bearing", "towards"), [
    (270.0, 90.0, 0.0),  # a westerly blows east: along +x where +x is east
    (180.0, 90.0, 90.0),  # a southerly blows north
    (0.0, 90.0, -90.0), (90.0, 90.0, 180.0),
    (270.0, 0.0, -90.0),  # with +x north, +y is west: eastward is -y
    (225.0, 45.0, 0.0), (360.0, 180.0, 0.0),
])
def test_compass_winds(coming_from: float, bearing: float, towards: float) -> None:
    found = resolve({"friction_velocity": 0.01, "wind_from_compass": coming_from, "x_axis_compass_bearing": bearing})
    assert found["stress_direction"].values == pytest.approx(np.full(3, towards), abs=1e-12)


@given(st.floats(-1e4, 1e4))
def test_wrapped_angles_are_the_same_direction(angle: float) -> None:
    wrapped = float(wrap_degrees(angle))
    assert -180 < wrapped <= 180
    assert np.exp(1j * np.radians(wrapped)) == pytest.approx(np.exp(1j * np.radians(angle)), abs=1e-9)


def test_what_nobody_states_is_nan_and_said() -> None:
    found = resolve()
    for name in ("friction_velocity", "surface_temperature_flux", "surface_buoyancy_flux", "us0", "stokes_u", "stokes_u_face",
                 "stokes_depth", "significant_wave_height", "coriolis_parameter", "thermal_expansion"):
        assert np.isnan(found[name].values).all(), name
    for subject in ("friction velocity", "Stokes drift", "coriolis parameter", "thermal expansion"):
        assert decision(found, subject)["choice"] == "unknown", subject


def test_no_waves_is_zero_not_unknown() -> None:
    found = resolve(stokes={"kind": "none"}, hints=HINTS)
    assert (found["us0"].values == 0).all() and (found["stokes_u"].values == 0).all()


def test_no_flux_is_no_buoyancy_whatever_the_water() -> None:
    found = resolve({"surface_heat_flux": 0.0})
    assert np.isnan(float(found["thermal_expansion"]))
    assert (found["surface_buoyancy_flux"].values == 0).all()
    unknown = resolve({"surface_heat_flux": -100.0})
    assert np.isnan(unknown["surface_buoyancy_flux"].values).all()


def test_properties_of_water_from_its_temperature() -> None:
    found = resolve({"surface_heat_flux": -200, "temperature": 15, "evaporation_minus_precipitation": 1e-8})
    alpha, beta, _ = seawater_properties(35.0, 15.0)
    expected = 9.81 * (alpha * 200 / (1025 * 3991.86795711963) + beta * 35 * 1e-8)
    assert found["surface_buoyancy_flux"].values == pytest.approx(np.full(3, expected), rel=1e-12)


def test_stokes_profile_is_a_cell_mean_and_points_where_asked() -> None:
    found = resolve(stokes={"surface_speed": 0.068, "wavenumber": 0.1047, "direction": 30.0})
    means = 0.068 * np.diff(np.exp(2 * 0.1047 * FACES)) / (2 * 0.1047 * np.diff(FACES))
    assert np.hypot(found["stokes_u"], found["stokes_v"]).values[1] == pytest.approx(means, rel=1e-12)
    assert np.degrees(np.arctan2(found["stokes_v"], found["stokes_u"])).values == pytest.approx(np.full((3, 4), 30.0))
    assert np.hypot(found["stokes_u_face"], found["stokes_v_face"]).values[0, -1] == pytest.approx(0.068)


def test_drift_follows_a_turning_stress_unless_told_otherwise() -> None:
    turning = {**HINTS, "stress_direction": Hint(np.array([0.0, 45.0, 90.0]), "degree", 'variable "tau_dir"', ("time",))}
    found = resolve(hints=turning)
    assert found["stokes_direction"].values == pytest.approx([0.0, 45.0, 90.0])
    assert found["stokes_v_face"].values[:, -1] == pytest.approx(0.068 * np.sin(np.radians([0.0, 45.0, 90.0])), abs=1e-15)


@given(turn=st.floats(-180, 180), theta=st.floats(-90, 90))
def test_turning_the_axes_leaves_moduli(turn: float, theta: float) -> None:
    still = resolve({"friction_velocity": 0.006, "stress_direction": 0.0}, {"surface_speed": 0.07, "wavelength": 60, "direction": theta})
    turned = resolve({"friction_velocity": 0.006, "stress_direction": turn},
                     {"surface_speed": 0.07, "wavelength": 60, "direction": theta + turn})
    for name in ("friction_velocity", "us0", "stokes_depth", "stokes_transport"):
        assert turned[name].values == pytest.approx(still[name].values, rel=1e-12)
    speed = [np.hypot(found["stokes_u"].values, found["stokes_v"].values) for found in (still, turned)]
    assert speed[1] == pytest.approx(speed[0], rel=1e-12)
    between = [wrap_degrees(found["stokes_direction"].values - found["stress_direction"].values) for found in (still, turned)]
    assert np.cos(np.radians(between[1])) == pytest.approx(np.cos(np.radians(between[0])), abs=1e-9)


@given(st.floats(1.0, 25.0), st.floats(5.0, 200.0), st.floats(-500.0, 500.0))
def test_units_of_the_recipe_do_not_matter(wind: float, length: float, heat: float) -> None:
    plain = resolve({"wind_speed": wind, "surface_heat_flux": heat, "temperature": 12.0}, {"surface_speed": 0.05, "wavelength": length})
    other = resolve({"wind_speed": f"{wind * 3.6!r} km h-1", "surface_heat_flux": f"{heat / 1e3!r} kW m-2", "temperature": "285.15 K"},
                    {"surface_speed": "5 cm s-1", "wavelength": f"{length * 100!r} cm"})
    for name in ("friction_velocity", "surface_buoyancy_flux", "stokes_u", "stokes_depth"):
        assert other[name].values == pytest.approx(plain[name].values, rel=1e-9, abs=1e-20), name


def test_spectrum_without_directions_follows_the_stress(tmp_path: Path) -> None:
    (tmp_path / "waves.csv").write_text("f (Hz),E (m2/Hz)\n0.05,0.1\n0.1,4\n0.2,1\n0.4,0.05\n")
    hints = {**HINTS, "stress_direction": Hint(np.array([0.0, 90.0, 180.0]), "degree", 'variable "tau_dir"', ("time",))}
    found = resolve(stokes={"spectrum_file": "waves.csv"}, hints=hints, base=tmp_path)
    assert found["stokes_direction"].values == pytest.approx([0.0, 90.0, 180.0])
    assert found["stokes_v_face"].values[1, -1] == pytest.approx(float(found["us0"][1]))
    assert decision(found, "Stokes direction")["choice"] == "that of the stress"
    turned = resolve(stokes={"spectrum_file": "waves.csv", "direction": -20}, base=tmp_path)
    assert turned["stokes_direction"].values == pytest.approx(np.full(3, -20.0))


def test_spectrum_with_compass_directions_uses_the_bearing_of_x(tmp_path: Path) -> None:
    (tmp_path / "waves.csv").write_text("f (Hz),E (m2/Hz),direction_from (degree)\n0.1,4,270\n0.2,1,270\n0.4,0.05,270\n")
    east = resolve(stokes={"spectrum_file": "waves.csv"}, base=tmp_path)
    assert east["stokes_direction"].values == pytest.approx(np.zeros(3), abs=1e-9)  # from the west, towards +x = east
    north = resolve({"x_axis_compass_bearing": 0.0}, {"spectrum_file": "waves.csv"}, base=tmp_path)
    assert north["stokes_direction"].values == pytest.approx(np.full(3, -90.0))


def test_by_hand_and_bulk_profiles() -> None:
    hand = resolve(stokes={"profile_z": (0.0, -40.0), "profile_u": (0.08, 0.0), "profile_v": (0.0, 0.04)})
    assert hand["stokes_u_face"].values[0] == pytest.approx(0.08 * (1 + FACES / 40))
    assert hand["stokes_v"].values[0] == pytest.approx(-0.04 * CENTRES / 40)
    for kind in ("bulk_breivik_2014", "bulk_breivik_2016"):
        bulk = resolve(stokes={"kind": kind, "surface_speed": 0.2, "transport": 0.5})
        assert bulk["stokes_transport"].values == pytest.approx(np.full(3, 0.5))
        assert np.all(np.diff(bulk["stokes_u"].values[0]) > 0)


def test_files_of_the_shared_runs_state_their_forcing(shared: Path) -> None:
    with xr.open_dataset(shared / "fields" / "langmuir.nc") as fields:
        given_numbers = {name: float(fields.attrs[name]) for name in ("ustar", "us0", "kwave")}
    found = resolve({"friction_velocity": given_numbers["ustar"]},
                    {"surface_speed": given_numbers["us0"], "wavenumber": given_numbers["kwave"]})
    la_t = float(np.sqrt(found["friction_velocity"] / found["us0"])[0])
    assert 0.25 < la_t < 0.35  # the Langmuir regime, about 0.3 (Li, Garrett & Skyllingstad 2005)


def test_directions_are_averaged_round_the_circle() -> None:
    """179 and -179 degrees: the mean is 180, not 0 (exact)."""
    assert abs(mean_direction([179.0, -179.0])) == pytest.approx(180.0)
    assert mean_direction([10.0, 30.0]) == pytest.approx(20.0)
    assert np.isnan(mean_direction([np.nan, 1.0]))
