"""What must hold for every forcing: rotation of the axes, change of units, the same numbers by every road."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import pytest
import xarray as xr
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from lespost.findings import Hint
from lespost.forcing import stokes as forms
from lespost.forcing.buoyancy import temperature_flux
from lespost.forcing.langmuir import cell_axis_angle, projected
from lespost.forcing.one_forcing import one_forcing
from lespost.forcing.regimes import dissipation_from_scales, dissipation_terms
from lespost.forcing.resolve import resolve_forcing, wrap_degrees
from lespost.forcing.scales import scales
from lespost.forcing.settings import ForcingSettings, StokesSettings
from lespost.forcing.spectrum import Spectrum, stokes_drift, summary

FACES = -60.0 * np.linspace(1.0, 0.0, 41) ** 1.3
CENTRES = 0.5 * (FACES[1:] + FACES[:-1])
ANGLES = st.floats(-180.0, 180.0)
FLUX = st.one_of(st.just(0.0), st.floats(1e-12, 5e-7), st.floats(-5e-7, -1e-12))
USTAR, US0, DEPTH = st.floats(1e-3, 0.05), st.floats(5e-3, 0.6), st.floats(5.0, 150.0)


def resolve(
    forcing: dict[str, Any], stokes: dict[str, Any], hints: dict[str, Hint] | None = None, times: int = 1
) -> xr.Dataset:
    clock = 60.0 * np.arange(times)
    return resolve_forcing(ForcingSettings(**forcing), StokesSettings(**stokes), hints or {}, clock, CENTRES, FACES)


@given(angle=ANGLES, turn=ANGLES, ustar=USTAR, us0=US0)
@settings(max_examples=40, deadline=None)
def test_rotation_turns_vectors_and_leaves_moduli(angle: float, turn: float, ustar: float, us0: float) -> None:
    before = resolve({"friction_velocity": ustar, "stress_direction": 0.0},
                     {"surface_speed": us0, "wavenumber": 0.1, "direction": turn})
    after = resolve({"friction_velocity": ustar, "stress_direction": angle},
                    {"surface_speed": us0, "wavenumber": 0.1, "direction": float(wrap_degrees(turn + angle))})
    drift = before["stokes_u"].values + 1j * before["stokes_v"].values
    turned = after["stokes_u"].values + 1j * after["stokes_v"].values
    np.testing.assert_allclose(turned, drift * np.exp(1j * np.radians(angle)), rtol=0, atol=1e-13)
    for name in ("us0", "friction_velocity", "stokes_transport"):
        np.testing.assert_allclose(after[name], before[name], rtol=1e-13)


@given(turn=st.floats(-135.0, 135.0), ustar=USTAR, us0=US0, h=DEPTH, height=st.floats(0.1, 8.0))
@settings(max_examples=100, deadline=None)
def test_mirror_image_mirrors_the_axis(turn: float, ustar: float, us0: float, h: float, height: float) -> None:
    left, right = (float(cell_axis_angle(ustar, us0, sign * turn, h, height)) for sign in (1.0, -1.0))
    assert left == pytest.approx(-right, abs=1e-12)
    # the axis lies between the stress and the waves
    assert -1e-9 <= left * np.sign(turn) <= abs(turn) + 1e-9 or turn == 0.0
    assert projected(0.3, left, turn) == pytest.approx(float(projected(0.3, right, -turn)), rel=1e-12)


@given(ustar=USTAR, us0=US0, k=st.floats(0.02, 1.0), h=DEPTH, b0=FLUX)
@settings(max_examples=100, deadline=None)
def test_dimensionless_numbers_do_not_know_the_units(ustar: float, us0: float, k: float, h: float, b0: float) -> None:
    def numbers(length: float, time: float) -> dict[str, float | str]:
        speed = length / time
        return scales(
            friction_velocity=ustar * speed, buoyancy_flux=b0 * length**2 / time**3, surface_stokes_drift=us0 * speed,
            stokes_depth=length / (2 * k), layer_depth=h * length,
            surface_layer_drift=speed * forms.surface_layer_mean_exponential(us0, k, h),
            base_drift=us0 * speed * np.exp(-2 * k * h),
        ).to_dict()

    metric, other = numbers(1.0, 1.0), numbers(3.28084, 0.5)
    for name in ("la_t", "la_sl", "la_proj", "alpha_deg", "hoenikker", "h_over_l_langmuir", "dissipation_shear",
                 "dissipation_langmuir", "dissipation_convective"):
        assert other[name] == pytest.approx(metric[name], rel=1e-9, nan_ok=True), name
    assert other["forcing_regime"] == metric["forcing_regime"]
    assert other["obukhov"] == pytest.approx(3.28084 * metric["obukhov"], rel=1e-9, nan_ok=True)  # type: ignore[operator]


@given(ustar=USTAR, us0=US0, k=st.floats(0.02, 1.0), h=DEPTH, b0=st.floats(1e-12, 5e-7))
@settings(max_examples=100, deadline=None)
def test_identities_between_the_numbers(ustar: float, us0: float, k: float, h: float, b0: float) -> None:
    found = scales(
        friction_velocity=ustar, buoyancy_flux=b0, surface_stokes_drift=us0, stokes_depth=1 / (2 * k), layer_depth=h
    )
    # derived in closed form: -h/L = 0.4 (w*/u*)³; h/L_L = Ho h / (4 delta); La_t^-2 = us0/u*
    assert -h / found.obukhov == pytest.approx(0.4 * (found.wstar / ustar) ** 3, rel=1e-10)
    assert found.h_over_l_langmuir == pytest.approx(found.hoenikker * h * 2 * k / 4, rel=1e-10)
    assert found.la_t**-2 == pytest.approx(us0 / ustar, rel=1e-12)
    # two forms of the same published estimate
    terms = dissipation_terms(found.la_t, found.h_over_l_langmuir)
    parts = (terms.shear, terms.langmuir, terms.convective)
    assert parts == pytest.approx(dissipation_from_scales(ustar, us0, b0, h), rel=1e-9)
    assert sum(terms.share()) == pytest.approx(1.0)


@given(ustar=st.floats(2e-3, 0.05), us0=US0, k=st.floats(0.02, 1.0), h=DEPTH)
@settings(max_examples=20, deadline=None)
def test_units_written_out_change_nothing(ustar: float, us0: float, k: float, h: float) -> None:
    plain = one_forcing({"friction_velocity": ustar, "surface_speed": us0, "wavenumber": k, "mixed_layer_depth": h,
                         "surface_heat_flux": "-100", "temperature": "15", "direction": "60"})
    written = one_forcing({"friction_velocity": f"{100 * ustar!r} cm s-1", "surface_speed": f"{3.6 * us0!r} km h-1",
                           "wavenumber": f"{k / 100!r} cm-1", "mixed_layer_depth": f"{h / 1000!r} km",
                           "surface_heat_flux": "-0.1 kW m-2", "temperature": "288.15 K", "direction": f"{np.pi / 3!r} rad"})
    for name, value in plain.scales.to_dict().items():
        if name != "forcing_regime":
            assert written.scales.to_dict()[name] == pytest.approx(value, rel=1e-9, nan_ok=True), name


@given(ustar=USTAR, density=st.floats(1000.0, 1040.0))
@settings(max_examples=20, deadline=None)
def test_stress_and_friction_velocity_say_the_same(ustar: float, density: float) -> None:
    assume(ustar**2 * density > 1e-3)
    direct = resolve({"friction_velocity": ustar, "reference_density": density}, {"kind": "none"})
    by_stress = resolve({"stress": ustar**2 * density, "reference_density": density}, {"kind": "none"})
    np.testing.assert_allclose(direct["friction_velocity"], by_stress["friction_velocity"], rtol=1e-12)


@given(heat=st.floats(-800.0, 800.0))
@settings(max_examples=30, deadline=None)
def test_heat_and_temperature_flux_say_the_same(heat: float) -> None:
    base = {"reference_density": 1026.0, "specific_heat": 3990.0, "thermal_expansion": 2e-4}
    by_heat = resolve({**base, "surface_heat_flux": heat}, {"kind": "none"})
    by_flux = resolve({**base, "surface_temperature_flux": float(temperature_flux(heat, 1026.0, 3990.0))}, {"kind": "none"})
    b0 = by_heat["surface_buoyancy_flux"]
    np.testing.assert_allclose(b0, by_flux["surface_buoyancy_flux"], rtol=1e-12, atol=1e-20)
    # closed form: cooling of Q makes g alpha Q / (rho c)
    np.testing.assert_allclose(b0, -9.81 * 2e-4 * heat / (1026.0 * 3990.0), rtol=1e-12, atol=1e-20)


@given(bearing=st.floats(0.0, 360.0), wind_from=st.floats(0.0, 360.0))
@settings(max_examples=50, deadline=None)
def test_compass_and_mathematical_directions(bearing: float, wind_from: float) -> None:
    wind = {"friction_velocity": 0.01, "wind_from_compass": wind_from, "x_axis_compass_bearing": bearing}
    found = resolve(wind, {"kind": "none"})
    angle = np.radians(float(found["stress_direction"][0]))
    # in east and north: +x; +y is +x turned a quarter counter-clockwise; the stress points away from where the wind is from
    east_x, north_x = np.sin(np.radians(bearing)), np.cos(np.radians(bearing))
    east = np.cos(angle) * east_x - np.sin(angle) * north_x
    north = np.cos(angle) * north_x + np.sin(angle) * east_x
    blowing = -np.sin(np.radians(wind_from)), -np.cos(np.radians(wind_from))
    assert (east, north) == pytest.approx(blowing, abs=1e-9)


@given(seed=st.integers(0, 10_000), angle=ANGLES)
@settings(max_examples=30, deadline=None)
def test_a_turned_spectrum_turns_its_drift(seed: int, angle: float) -> None:
    rng = np.random.default_rng(seed)
    f, directions = np.sort(rng.uniform(0.04, 0.6, 20)), np.arange(0.0, 360.0, 15.0)
    assume(np.diff(f).min() > 1e-6)
    spectrum = Spectrum(f, rng.exponential(size=(20, 24)) * f[:, None] ** -4.0, directions=directions)
    u, v = stokes_drift(CENTRES, spectrum)
    turned_u, turned_v = stokes_drift(CENTRES, spectrum.rotated(angle))
    small = 1e-12 * np.hypot(u, v).max()
    expected = (u + 1j * v) * np.exp(1j * np.radians(angle))
    np.testing.assert_allclose(turned_u + 1j * turned_v, expected, rtol=0, atol=small)
    first, second = summary(spectrum), summary(spectrum.rotated(angle))
    assert (first.us0, first.transport, first.hs) == pytest.approx((second.us0, second.transport, second.hs), rel=1e-9)
    # reduction to energy and first moments is exact: no spreading model is needed
    moments = spectrum.first_moments()
    energy = spectrum.energy()
    mean_direction = np.degrees(np.arctan2(moments[1], moments[0]))
    reduced = Spectrum(f, energy, r1=np.hypot(*moments) / energy, mean_direction=mean_direction)
    np.testing.assert_allclose(stokes_drift(CENTRES, reduced)[0], u, rtol=0, atol=small)


@given(factor=st.floats(0.01, 100.0), seed=st.integers(0, 10_000))
@settings(max_examples=30, deadline=None)
def test_drift_is_linear_in_the_energy(factor: float, seed: int) -> None:
    rng = np.random.default_rng(seed)
    f = np.linspace(0.05, 0.5, 30)
    density = rng.exponential(size=30)
    one, other = summary(Spectrum(f, density)), summary(Spectrum(f, factor * density))
    assert (other.us0, other.transport) == pytest.approx((factor * one.us0, factor * one.transport), rel=1e-12)
    assert other.decay_scale == pytest.approx(one.decay_scale, rel=1e-12)
    assert (other.tail_fraction, other.fp) == pytest.approx((one.tail_fraction, one.fp), rel=1e-12)
    assert other.hs == pytest.approx(np.sqrt(factor) * one.hs, rel=1e-12)


@pytest.mark.parametrize(
    ("stokes", "excess"),
    [
        ({"surface_speed": 0.07, "wavenumber": 0.1}, 1.0),
        ({"amplitude": 0.8, "wavelength": 60.0, "water_depth": 80.0}, 1.0),
        # the published k_e = k_m/3 overshoots the transport by e^(1/4) E1(1/4) 6/8 (derived in closed form)
        ({"kind": "bulk_breivik_2014", "surface_speed": 0.2, "transport": 0.5}, 1.0056641),
        ({"kind": "bulk_breivik_2016", "surface_speed": 0.2, "transport": 0.5}, 1.0),
    ],
    ids=["one wave", "finite depth", "Breivik 2014", "Breivik 2016"],
)
def test_cell_means_add_up_to_the_transport(stokes: dict[str, Any], excess: float) -> None:
    # the layer is deep enough for what is below it to be negligible, or ends at the bottom
    below = [-80.0] if "water_depth" in stokes else [-2000.0, -600.0, -200.0, -80.0]
    deep = np.concatenate([below, FACES])
    found = resolve_forcing(ForcingSettings(friction_velocity=0.01), StokesSettings(**stokes), {},
                            np.zeros(1), 0.5 * (deep[1:] + deep[:-1]), deep)
    total = float((found["stokes_u"].values[0] * np.diff(deep)).sum())
    assert total == pytest.approx(excess * float(found["stokes_transport"][0]), rel=1e-5)
    assert found["stokes_u"].values[0, -1] < float(found["us0"][0])


def test_recipe_wins_over_hints_and_both_are_on_record() -> None:
    hints = {"friction_velocity": Hint(0.006, "m s-1", 'attribute "ustar"'),
             "stokes_surface_speed": Hint(0.05, "m s-1", 'attribute "us0"'),
             "stokes_wavenumber": Hint(0.1, "m-1", 'attribute "kwave"')}
    found = resolve({"friction_velocity": 0.012}, {}, hints, times=3)
    assert found["friction_velocity"].values == pytest.approx(np.full(3, 0.012))
    assert found["us0"].values == pytest.approx(np.full(3, 0.05))
    decisions = {item["subject"]: item for item in json.loads(found.attrs["decisions"])}
    assert decisions["friction velocity"]["how"] == "recipe"
    assert decisions["stokes surface speed"]["how"] == "metadata"
    assert 'attribute "us0"' in decisions["stokes surface speed"]["evidence"]


def test_what_nobody_states_is_unknown_and_said() -> None:
    found = resolve({}, {})
    for name in ("friction_velocity", "surface_temperature_flux", "surface_buoyancy_flux", "us0", "stokes_u",
                 "stokes_v_face", "coriolis_parameter", "significant_wave_height"):
        assert np.isnan(found[name].values).all(), name
    unknown = {item["subject"] for item in json.loads(found.attrs["decisions"]) if item["choice"] == "unknown"}
    assert {"friction velocity", "surface temperature flux", "Stokes drift"} <= unknown
