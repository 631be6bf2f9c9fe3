"""Closed-form flows against numbers worked out independently of this code (derived in closed form, evaluated by other
scripts): rows as numbered in the list of check values that the project started from."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from toy_fields.closed_form.cellular import Cellular
from toy_fields.closed_form.lines import ConvergenceLines
from toy_fields.closed_form.orbits import (
    centre_depth_of_decaying_sine,
    centre_depth_of_powers,
    centre_period,
    instability_time,
    streamline_period_ratio,
)
from toy_fields.closed_form.roll import Roll

ROLL = Roll(vertical_amplitude=0.05, depth=50.0, wavelength=100.0, jet=0.03, jet_decay=0.1)
US0, KS = 0.068, 2 * np.pi / 60.0


def test_column_stokes_production() -> None:
    # row 62
    assert ROLL.column_stokes_production(US0, KS) == pytest.approx(6.7314828e-6, rel=1e-7)
    # the same by quadrature of the profile
    z = np.linspace(-50.0, 0.0, 200001)
    assert np.trapezoid(ROLL.stokes_production(z, US0, KS), z) == pytest.approx(6.7314828e-6, rel=1e-7)


@pytest.mark.parametrize(("n", "ratio"), [(16, -0.04948), (32, -0.012668), (64, -0.003186), (128, -0.000798)])
def test_column_stokes_production_on_the_staggered_grid(n: int, ratio: float) -> None:
    # row 63: fluxes at faces from two-point means of u, differences of the drift at cell centres; second order
    dz = 50.0 / n
    centres = -50.0 + (np.arange(n) + 0.5) * dz
    faces = -50.0 + np.arange(1, n) * dz
    jet = ROLL.jet * np.exp(ROLL.jet_decay * centres)
    flux = 0.5 * 0.5 * (jet[1:] + jet[:-1]) * ROLL.vertical_amplitude * np.sin(ROLL.m * faces)
    drift = US0 * np.exp(2 * KS * centres)
    exact = ROLL.column_stokes_production(US0, KS)
    error = -np.sum(flux * np.diff(drift)) / exact - 1
    assert error == pytest.approx(ratio, abs=2e-6)
    # Cell means of the drift, which the solver uses, miss less.
    with_means = -np.sum(flux * np.diff(drift * np.sinh(KS * dz) / (KS * dz))) / exact - 1
    assert 0.6 < with_means / error < 0.7


def test_tilting_of_the_roll_cancels_along_x() -> None:
    # row 64: (omega . grad) u from the vorticity and exact gradients by hand, not from the class
    y, z = np.meshgrid(np.linspace(0, 100, 41), np.linspace(-50, 0, 31))
    roll = Roll(0.05, 50.0, 100.0, 0.03, 0.1, shear=0.002)
    _, omega_y, omega_z = roll.vorticity(y, z)
    u_y = -roll.jet * roll.l * np.sin(roll.l * y) * np.exp(roll.jet_decay * z)
    u_z = roll.jet * roll.jet_decay * np.cos(roll.l * y) * np.exp(roll.jet_decay * z) + roll.shear
    assert np.max(np.abs(omega_y * u_y + omega_z * u_z)) < 1e-12 * np.max(np.abs(omega_y * u_y))
    assert np.all(roll.stretching_and_tilting(y, z)[0] == 0)


def test_cellular_flow() -> None:
    # row 65, row 89
    flow = Cellular(a=0.02, b=0.03, k=2 * np.pi / 100, l=2 * np.pi / 80, m=np.pi / 50)
    assert flow.c == pytest.approx(-0.0575, rel=1e-6)
    assert flow.enstrophy_components() == pytest.approx((5.121592e-6, 2.963966e-6, 1.233701e-8), rel=1e-6)
    assert flow.kinetic_energy() == pytest.approx(2.8789063e-4, rel=1e-6)
    assert flow.dissipation_over_viscosity() == pytest.approx(8.0978948e-6, rel=1e-7)


def test_centre_depths() -> None:
    # row 66: w as zeta (1 - zeta)², zeta (1 - zeta)³; row 67
    assert centre_depth_of_powers(1, 2) == pytest.approx(1 / 3)
    assert centre_depth_of_powers(1, 3) == pytest.approx(1 / 4)
    for decay, expected in ((5.0, 0.0968922), (10.0, 0.1785662), (25.0, 0.3195465)):
        assert centre_depth_of_decaying_sine(50.0, decay) == pytest.approx(expected, rel=1e-6)
        depth = np.linspace(0, 50, 500001)
        found = depth[np.argmax(np.sin(np.pi * depth / 50) * np.exp(-depth / decay))] / 50
        assert found == pytest.approx(expected, abs=1e-5)


def test_overturn_times() -> None:
    # rows 68 and 69
    for level, ratio in ((0.9, 1.0533617), (0.5, 1.3728805), (0.1, 2.3527158)):
        assert streamline_period_ratio(level) == pytest.approx(ratio, rel=1e-7)
    period = centre_period(0.05, 50.0)
    assert period == pytest.approx(2000.0)
    assert period * streamline_period_ratio(0.5) == pytest.approx(2745.7610, rel=1e-7)


def test_orbit_closes_after_its_period() -> None:
    # row 70: start at (wavelength / 12, -depth / 2), where psi / Psi = 1/2
    roll = Roll(vertical_amplitude=0.05, depth=50.0, wavelength=100.0, jet=0.0)
    here = np.array([100.0 / 12, -25.0])

    def velocity(time: float, position: np.ndarray) -> list[float]:
        y, z = position
        return [float(roll.v(np.array(0.0), y, z)), float(roll.w(np.array(0.0), y, z))]

    period = centre_period(0.05, 50.0) * streamline_period_ratio(0.5)
    path = solve_ivp(velocity, (0.0, period), here, method="DOP853", rtol=1e-13, atol=1e-13)
    assert np.hypot(*(path.y[:, -1] - here)) < 1e-9
    assert np.max(np.hypot(*(path.y - here[:, None]))) > 10.0


def test_skewness_of_downwelling_jets() -> None:
    # row 90: w as -(cos + cos(2)/2)
    lines = ConvergenceLines(0, 4, 200.0, 200.0, 50.0, harmonic=0.5)
    assert lines.skewness_w() == pytest.approx(-0.7589466, rel=1e-7)
    w = lines.w(np.array(0.0), np.linspace(0, 200, 400, endpoint=False), np.array(-20.0))
    assert np.mean(w**3) / np.mean(w**2) ** 1.5 == pytest.approx(-0.7589466, rel=1e-7)


def test_instability_time() -> None:
    # row 94: wind of u* = 0.0061 over waves of 60 m with 0.0679 of drift, 4 m down
    shear = 0.0061 / (0.4 * 4.0)
    stokes = 2 * KS * 0.0679 * np.exp(2 * KS * -4.0)
    assert instability_time(shear, stokes) == pytest.approx(206.47, rel=1e-3)
    assert np.isnan(instability_time(shear, -stokes))
