"""Bulk Stokes profiles of Breivik et al. (2014, 2016), and the surface drift of Ardhuin et al. (2009)."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import quad

from lespost.forcing import stokes
from lespost.forcing.spectrum import Spectrum, stokes_drift
from lespost.forcing.wave_models import surface_drift_ardhuin_2009

DEPTHS = np.array([-1.0, -5.0, -10.0])


def test_profile_2016() -> None:
    # v0 [e^(2kz) - √(-2πkz) erfc √(-2kz)], k = v0/(6V) (Breivik et al. 2016), v0 = 0.2 m/s, V = 0.5 m²/s.
    assert stokes.breivik_2016_wavenumber(0.2, 0.5) == pytest.approx(0.0666667, rel=1e-6)
    assert stokes.breivik_2016(DEPTHS, 0.2, 0.5) == pytest.approx([0.09664778, 0.03084051, 0.01077513], rel=1e-6)


def test_transport_2016() -> None:
    assert stokes.breivik_2016_transport_above(-10.0, 0.2, 0.5) == pytest.approx(0.4400357, rel=1e-6)  # Breivik et al. 2016
    assert stokes.breivik_2016_transport_above(-1e6, 0.2, 0.5) == pytest.approx(0.5, rel=1e-6)
    numerical = quad(lambda z: float(stokes.breivik_2016(z, 0.2, 0.5)), -10, 0, epsabs=1e-12)[0]
    assert numerical == pytest.approx(0.4400357, rel=1e-6)


def test_profile_2014() -> None:
    # v0 e^(2 k_e z)/(1 - 8 k_e z), k_e = v0/(6V) (Breivik et al. 2014).
    assert stokes.breivik_2014_wavenumber(0.2, 0.5) == pytest.approx(0.0666667, rel=1e-6)
    assert stokes.breivik_2014(DEPTHS, 0.2, 0.5) == pytest.approx([0.1141530, 0.02800457, 0.008324120], rel=1e-6)
    integral = quad(lambda z: float(stokes.breivik_2014(z, 0.2, 0.5)), -400, 0, epsabs=1e-12, limit=200)[0]
    assert integral == pytest.approx(0.502832, rel=1e-5)  # not quite V: the constant 6 stands for 5.9662; derived


def test_profile_2016_is_exact_for_a_phillips_spectrum() -> None:
    # E = α g² (2π)^-4 f^-5 beyond f_p: v0 = 2αg/ω_p, k = k_p; derived, α = 0.0081, f_p = 0.1 Hz.
    g, peak = 9.80665, 0.1
    v0, k = 2 * 0.0081 * g / (2 * np.pi * peak), (2 * np.pi * peak) ** 2 / g
    assert v0 == pytest.approx(0.2528458, rel=1e-6)
    transport = v0 / (6 * k)
    assert stokes.breivik_2016(-5.0, v0, transport) == pytest.approx(0.06396865, rel=1e-6)
    frequency = np.linspace(peak, 1.0, 9001)
    phillips = Spectrum(frequency, 0.0081 * g**2 * (2 * np.pi) ** -4 * frequency**-5.0)
    measured = stokes_drift(np.array([0.0, -5.0]), phillips, gravity=g)[0]
    assert measured == pytest.approx([0.2528458, 0.06396865], rel=1e-5)


def test_cell_means_pass_the_cusp_at_the_surface() -> None:
    faces = np.array([-30.0, -10.0, -2.0, -0.5, 0.0])
    means = stokes.cell_means(lambda z: stokes.breivik_2016(z, 0.2, 0.5), faces)
    exact = [quad(lambda z: float(stokes.breivik_2016(z, 0.2, 0.5)), a, b, epsabs=1e-13)[0] / (b - a)
             for a, b in pairwise(faces)]
    assert means == pytest.approx(exact, rel=1e-8)


def test_surface_drift_from_wind_and_wave_height() -> None:
    assert surface_drift_ardhuin_2009(10.0, 2.46, 0.5) == pytest.approx(0.10562, rel=1e-6)  # Ardhuin et al. 2009
