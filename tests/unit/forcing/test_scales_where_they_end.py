"""Where a scale is undefined or an estimate does not hold: it is NaN and "undetermined", never a number that looks right."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.errors import RequestError
from lespost.forcing.scales import CONVENTIONS, Scales, conventions, scales

SEA = {"friction_velocity": 0.006, "surface_stokes_drift": 0.07, "stokes_depth": 5.0, "layer_depth": 30.0, "buoyancy_flux": 0.0,
       "wave_height": 1.6}


def of(**changes: float) -> Scales:
    return scales(**{**SEA, **changes})


def test_the_sea_itself() -> None:
    assert of().forcing_regime == "langmuir"
    assert of(surface_stokes_drift=0.0).forcing_regime == "shear"
    assert of(buoyancy_flux=3e-7).forcing_regime == "convective"


@pytest.mark.parametrize("angle", [91.0, 135.0, 180.0, -120.0, 225.0])
def test_waves_against_the_wind_are_not_called_langmuir(angle: float) -> None:
    # trap: the Langmuir number is made of moduli and does not see that the waves take energy from the turbulence
    found = of(misalignment=angle)
    assert found.la_t == of().la_t
    assert found.forcing_regime == "undetermined"


def test_weak_swell_against_the_wind_leaves_shear_shear() -> None:
    assert of(misalignment=180.0, surface_stokes_drift=0.002).forcing_regime == "shear"


@pytest.mark.parametrize("angle", [0.0, 45.0, 90.0, -90.0, 360.0])
def test_waves_with_the_wind_are_called_langmuir(angle: float) -> None:
    assert of(misalignment=angle).forcing_regime == "langmuir"


@pytest.mark.parametrize("ustar", [0.0, 5e-5])
def test_calm_air_has_no_langmuir_number(ustar: float) -> None:
    found = of(friction_velocity=ustar, surface_layer_drift=0.04)
    assert np.isnan([found.la_t, found.la_sl, found.la_proj, found.hoenikker, found.h_over_l_langmuir]).all()
    assert found.forcing_regime == "undetermined"
    assert of(friction_velocity=ustar, buoyancy_flux=1e-8).forcing_regime == "convective"


def test_heating_has_no_convective_velocity_and_no_hoenikker_number() -> None:
    found = of(buoyancy_flux=-5e-8)
    assert np.isnan([found.wstar, found.hoenikker]).all()
    assert found.obukhov > 0
    assert found.dissipation_convective == 0.0
    # trap: the sign of the Obukhov length differs between fields of study; here negative is unstable
    assert of(buoyancy_flux=5e-8).obukhov == pytest.approx(-found.obukhov)


def test_no_flux_has_no_obukhov_length() -> None:
    assert np.isnan(of(buoyancy_flux=0.0).obukhov)


@pytest.mark.parametrize(
    ("missing", "unknown"),
    [
        ("friction_velocity", {"la_t", "la_proj", "obukhov", "dissipation_shear", "dissipation_langmuir", "dissipation_convective"}),
        ("surface_stokes_drift", {"la_t", "la_proj", "alpha_deg", "dissipation_langmuir"}),
        ("stokes_depth", {"hoenikker"}),
        ("layer_depth", {"wstar", "h_over_l_langmuir", "dissipation_convective"}),
        ("buoyancy_flux", {"wstar", "hoenikker", "h_over_l_langmuir", "obukhov", "dissipation_convective"}),
    ],
)
def test_what_is_not_given_is_not_known(missing: str, unknown: set[str]) -> None:
    whole = of(buoyancy_flux=2e-8).to_dict()
    found = of(**{"buoyancy_flux": 2e-8, missing: np.nan}).to_dict()
    for name in unknown:
        assert np.isfinite(whole[name]), name
        assert np.isnan(found[name]), name
    if missing != "stokes_depth":
        assert found["forcing_regime"] == "undetermined"


def test_the_axis_of_misaligned_waves_needs_their_height() -> None:
    assert np.isfinite(of(misalignment=40.0).alpha_deg)
    assert np.isnan(of(misalignment=40.0, wave_height=np.nan).alpha_deg)
    assert of(wave_height=np.nan).alpha_deg == 0.0


@pytest.mark.parametrize("name", ["friction_velocity", "surface_stokes_drift", "stokes_depth", "layer_depth", "wave_height"])
def test_a_negative_magnitude_is_refused_by_name(name: str) -> None:
    with pytest.raises(RequestError, match=name.replace("_", " ").replace("stokes", "[Ss]tokes")):
        of(**{name: -1.0})


def test_every_number_has_its_convention_and_the_reference_is_named() -> None:
    families = {name.partition("_")[0] if name.startswith("dissipation") else name for name in of().to_dict()}
    assert families <= set(CONVENTIONS)
    assert "zero" in conventions("none")["la_sl"]
    assert "base" in conventions("base")["la_sl"]
