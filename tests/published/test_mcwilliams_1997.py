"""The reference case of McWilliams, Sullivan & Moeng (1997): a wave of 0.8 m amplitude and 60 m length, 3.72e-5 m²/s²."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad

from lespost.constants import STANDARD_GRAVITY as G
from lespost.forcing.dispersion import angular_frequency
from lespost.forcing.langmuir import turbulent_langmuir_number
from lespost.forcing.scales import scales
from lespost.forcing.stokes import monochromatic, monochromatic_transport
from lespost.forcing.velocity_scales import stokes_production_linear_stress

K = 2 * np.pi / 60
USTAR = np.sqrt(3.72e-5)


def test_wave() -> None:
    omega = float(angular_frequency(K, None, G))
    assert pytest.approx(0.1047198, rel=1e-6) == K  # 2π/60; definition
    assert omega == pytest.approx(1.0133854, rel=1e-6)  # deep-water dispersion; derived in closed form
    assert 2 * np.pi / omega == pytest.approx(6.200193, rel=1e-6)


def test_surface_drift_is_the_published_one() -> None:
    drift = float(monochromatic(0.0, 0.8, K, None, G))
    assert drift == pytest.approx(0.06791774, rel=1e-6)  # a²ωk; derived in closed form
    assert drift == pytest.approx(0.068, rel=1e-2)  # as printed by McWilliams et al. 1997 (from memory)


def test_turbulent_langmuir_number_is_the_published_one() -> None:
    la = float(turbulent_langmuir_number(USTAR, monochromatic(0.0, 0.8, K, None, G)))
    assert la == pytest.approx(0.2996706, rel=1e-6)  # (u*/u_s0)^(1/2); derived
    assert la == pytest.approx(0.3, rel=2e-3)  # as printed


def test_drift_at_depth_and_transport() -> None:
    assert monochromatic(-5.0, 0.8, K, None, G) == pytest.approx(0.02383368, rel=1e-6)  # derived in closed form
    assert monochromatic_transport(0.8, K, None, G) == pytest.approx(0.3242833, rel=1e-6)  # a²ω/2
    integral = quad(lambda z: float(monochromatic(z, 0.8, K, None, G)), -200, 0, epsabs=1e-13)[0]
    assert integral == pytest.approx(0.3242833, rel=1e-6)


def test_wave_in_ten_metres_of_water() -> None:
    from lespost.forcing.dispersion import wavenumber

    k = float(wavenumber(2 * np.pi / 8, 10.0, G))
    assert k == pytest.approx(0.08864113, rel=1e-6)  # linear dispersion; derived
    assert 2 * np.pi / k == pytest.approx(70.883408, rel=1e-6)
    drift = monochromatic(np.array([0.0, -5.0, -10.0]), 0.5, k, 10.0, G)
    assert drift == pytest.approx([0.02598407, 0.01217651, 0.008579421], rel=1e-6)  # a²ωk cosh 2k(z+D) / (2 sinh² kD)
    assert monochromatic_transport(0.5, k, 10.0, G) == pytest.approx(0.1383490, rel=1e-6)  # a²ω coth(kD)/2
    integral = quad(lambda z: float(monochromatic(z, 0.5, k, 10.0, G)), -10, 0, epsabs=1e-14)[0]
    assert integral == pytest.approx(0.1383490, rel=1e-6)


def test_column_transports_and_stokes_production() -> None:
    assert pytest.approx(-0.3720, rel=1e-6) == -(USTAR**2) / 1e-4  # ∫(V + V_s) dz = -u*²/f; derived from the mean equations
    drift = float(monochromatic(0.0, 0.8, K, None, G))
    mean = drift * -np.expm1(-2 * K * 33) / (2 * K * 33)
    production = stokes_production_linear_stress(USTAR, drift, mean)
    assert production == pytest.approx(2.1613484e-6, rel=1e-6)  # u*² (u_s0 - ⟨u_s⟩) for a linear stress; derived
    assert production / USTAR**3 == pytest.approx(9.525996, rel=1e-6)
    # Independently: ∫ u*² (1 + z/h) ∂u_s/∂z dz.
    direct = quad(lambda z: USTAR**2 * (1 + z / 33) * 2 * K * drift * np.exp(2 * K * z), -33, 0, epsabs=1e-16)[0]
    assert production == pytest.approx(direct, rel=1e-10)


def test_inertial_period() -> None:
    assert 2 * np.pi / 1e-4 / 3600 == pytest.approx(17.453293, rel=1e-6)
    from lespost.forcing.one_forcing import one_forcing

    period = one_forcing({"friction_velocity": 0.0061, "latitude": 45.0}).inertial_period
    assert period / 3600 == pytest.approx(16.924228, rel=1e-6)  # 2π/(2Ω sin 45°); derived
    assert np.isnan(one_forcing({"friction_velocity": 0.0061, "latitude": 0.0}).inertial_period)


def test_lagrangian_velocity_misread_as_eulerian_moves_stokes_production_into_shear() -> None:
    """Trap: the sum of both productions is kept, so only the declared kind of velocity tells them apart."""
    z = np.linspace(-33.0, 0.0, 400)
    drift = monochromatic(z, 0.8, K, None, G)
    stress = -(USTAR**2) * (1 + z / 33)
    eulerian = 0.01 * np.exp(z / 20)
    shear, stokes = -stress * np.gradient(eulerian, z), -stress * np.gradient(drift, z)
    misread = -stress * np.gradient(eulerian + drift, z)
    assert misread == pytest.approx(shear + stokes, rel=1e-10)
    assert np.abs(misread - shear).max() > 3 * np.abs(shear).max()


def test_scales_of_the_case_agree_with_their_parts() -> None:
    drift = float(monochromatic(0.0, 0.8, K, None, G))
    found = scales(friction_velocity=USTAR, buoyancy_flux=2.307e-8, surface_stokes_drift=drift, stokes_depth=1 / (2 * K),
                   layer_depth=33.0)
    assert found.wstar == pytest.approx(9.131046e-3, rel=1e-6)  # derived in closed form
    assert found.h_over_l_langmuir == pytest.approx(0.3013251, rel=1e-6)  # B0 h / (u*² u_s0), Belcher et al. 2012
