"""Drift of the spectra of Pierson & Moskowitz (1964) and Hasselmann et al. (1973): closed forms, tail, directional spreading."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import gamma

from lespost.constants import STANDARD_GRAVITY as G
from lespost.forcing.spectrum import Spectrum, stokes_drift, summary, tail_drift
from lespost.forcing.wave_models import jonswap, peak_frequency_of_wind, pierson_moskowitz

PEAK = 0.1


def sea(last: float = 0.5, count: int = 20001) -> Spectrum:
    frequency = np.linspace(0.02, last, count)
    return Spectrum(frequency, pierson_moskowitz(frequency, PEAK, gravity=G))


def test_variance_and_wave_height() -> None:
    variance = quad(lambda f: float(pierson_moskowitz(f, PEAK, gravity=G)), 0.02, 20, epsabs=1e-13, limit=400)[0]
    assert variance == pytest.approx(0.9996245, rel=1e-6)  # α g²/(5 (2π)⁴ f_p⁴); derived in closed form
    assert summary(sea(20.0, 400001), gravity=G).hs == pytest.approx(3.9992489, rel=1e-6)  # 4 √m0


def test_surface_drift_in_closed_form() -> None:
    exact = 0.0081 * G / np.pi * gamma(1.25) / (1.25**0.25 * PEAK)
    assert exact == pytest.approx(0.21674516, rel=1e-6)  # derived in closed form
    assert summary(sea(20.0, 400001), gravity=G).us0 == pytest.approx(0.21674516, rel=1e-5)


def test_mean_frequency() -> None:
    assert 1.25**0.25 * gamma(0.75) == pytest.approx(1.29572041, rel=1e-6)  # f_m01/f_p; derived in closed form
    assert 1.25**0.25 * gamma(0.75) == pytest.approx(1.296, rel=1e-3)  # as used by Li et al. 2017
    frequency = np.geomspace(0.02, 400, 400001)
    energy = pierson_moskowitz(frequency, PEAK, gravity=G)
    mean = np.trapezoid(frequency * energy, frequency) / np.trapezoid(energy, frequency)
    assert mean / PEAK == pytest.approx(1.29572041, rel=1e-5)


def test_tail_at_the_surface() -> None:
    resolved = float(stokes_drift(0.0, sea(), tail=False, gravity=G)[0])
    whole = summary(sea(), gravity=G)
    assert resolved == pytest.approx(0.1661962, rel=1e-5)  # Breivik et al. 2016; derived
    assert whole.us0 == pytest.approx(0.2166643, rel=1e-5)
    assert whole.tail_fraction == pytest.approx(0.0504681 / 0.2166643, rel=1e-5)


def test_tail_at_one_metre() -> None:
    resolved, whole = (float(stokes_drift(-1.0, sea(), tail=tail, gravity=G)[0]) for tail in (False, True))
    assert resolved == pytest.approx(0.1139777, rel=1e-4)  # derived by quadrature
    assert whole - resolved == pytest.approx(0.0010558, rel=1e-4)
    assert whole == pytest.approx(0.1150335, rel=1e-4)
    assert whole == pytest.approx(0.1150343, rel=1e-4)  # the spectrum itself without a cut


def test_drift_below() -> None:
    below = stokes_drift(np.array([-5.0, -10.0]), sea(4.0, 80001), gravity=G)[0]
    assert below == pytest.approx([0.04701110, 0.02246578], rel=1e-5)  # derived by quadrature


def test_tail_closed_form_against_quadrature() -> None:
    for z in (0.0, -0.3, -2.0):
        def integrand(f: float, z: float = z) -> float:
            return float(16 * np.pi**3 / G * f**3 * (0.5 / f) ** 5 * np.exp(8 * np.pi**2 * f**2 * z / G))

        numerical = quad(integrand, 0.5, np.inf, epsabs=1e-12)[0]
        assert tail_drift(z, 0.5, None, G) == pytest.approx(numerical, rel=1e-7)
        assert tail_drift(z, 0.5, 15.0, G) == pytest.approx(numerical, rel=1e-7)  # the quadrature that shallow water uses


def test_jonswap() -> None:
    frequency = np.linspace(0.02, 20, 400001)
    found = summary(Spectrum(frequency, jonswap(frequency, PEAK, gravity=G)), gravity=G)
    assert found.hs == pytest.approx(4.938625, rel=1e-4)  # derived by quadrature; α = 0.0081, γ = 3.3
    assert found.us0 == pytest.approx(0.2447534, rel=1e-4)
    ratio = (found.hs / 4) ** 2 / 0.9996245
    assert ratio == pytest.approx(1.524949, rel=1e-4)
    assert ratio == pytest.approx(1 / (1 - 0.287 * np.log(3.3)), rel=5e-3)  # the usual approximation, 1.521273


def test_spreading_multiplies_the_drift_by_the_mean_cosine() -> None:
    one = sea(0.5, 481)
    angles = np.arange(0.0, 360.0, 1.0)
    for shape, share in ((np.where(np.cos(np.radians(angles)) > 0, np.cos(np.radians(angles)) ** 2, 0.0), 8 / (3 * np.pi)),
                         (np.abs(np.cos(np.radians(angles / 2))) ** 20, 10 / 11)):
        spread = shape / (shape.sum() * np.radians(1.0))
        both = Spectrum(one.frequency, one.density[:, None] * spread[None, :], directions=angles)
        u, v = stokes_drift(np.array([0.0, -3.0]), both, gravity=G)
        assert u == pytest.approx(share * stokes_drift(np.array([0.0, -3.0]), one, gravity=G)[0], rel=1e-4)
        assert v == pytest.approx(np.zeros(2), abs=1e-12)
    assert 8 / (3 * np.pi) == pytest.approx(0.8488264, rel=1e-6)  # cos² on ±90°; derived in closed form
    assert pytest.approx(0.9090909, rel=1e-7) == 10 / 11  # s/(s+1); derived in closed form


def test_first_moments_carry_all_of_the_direction() -> None:
    """E(f, θ) = E(f)(1 + 2 r1 cos(θ - θ1))/2π has first moment r1: the two forms give one drift."""
    one = sea(0.5, 241)
    angles = np.arange(0.0, 360.0, 5.0)
    towards = np.linspace(-40.0, 70.0, 241)
    spread = (1 + 2 * 0.45 * np.cos(np.radians(angles[None, :] - towards[:, None]))) / (2 * np.pi)
    z = np.array([0.0, -2.0, -20.0])
    moments = stokes_drift(z, Spectrum(one.frequency, one.density, r1=np.full(241, 0.45), mean_direction=towards), gravity=G)
    whole = stokes_drift(z, Spectrum(one.frequency, one.density[:, None] * spread, directions=angles), gravity=G)
    assert np.array(whole) == pytest.approx(np.array(moments), rel=1e-10)


def test_peak_of_a_fully_developed_sea() -> None:
    assert peak_frequency_of_wind(10.75, 9.81) == pytest.approx(0.877 * 9.81 / (2 * np.pi * 10.75))  # Pierson & Moskowitz 1964
