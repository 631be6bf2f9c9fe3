"""Closed forms of the Stokes drift against numerical integration by an independent library (scipy's adaptive quadrature)."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from scipy.integrate import quad

from lespost.forcing import stokes as forms
from lespost.forcing.dispersion import wavenumber
from lespost.forcing.spectrum import Spectrum, stokes_drift, summary, tail_drift
from lespost.forcing.wave_models import pierson_moskowitz

K = 2 * np.pi / 60.0
SHAPES: dict[str, Callable[[np.ndarray], np.ndarray]] = {
    "monochromatic, deep": lambda z: forms.monochromatic(z, 0.8, K),
    "monochromatic, 12 m of water": lambda z: forms.monochromatic(z, 0.8, K, 12.0),
    "exponential": lambda z: forms.exponential(z, 0.07, 0.2),
    "Breivik 2014": lambda z: forms.breivik_2014(z, 0.2, 0.5),
    "Breivik 2016": lambda z: forms.breivik_2016(z, 0.2, 0.5),
}


@pytest.mark.parametrize("name", list(SHAPES))
def test_cell_means_are_integrals_over_the_cells(name: str) -> None:
    # uneven cells, the uppermost of them thick against the drift: where a point value at the centre would be far off
    faces = np.array([-12.0, -11.9, -8.0, -7.0, -3.0, 0.0])
    found = forms.cell_means(SHAPES[name], faces)
    for bottom, top, mean in zip(faces[:-1], faces[1:], found, strict=True):
        # sqrt substitution from the upper face: the broad-banded profile has a square-root cusp at the surface
        def integrand(t: float, top: float = top) -> float:
            return 2 * t * float(SHAPES[name](np.array(top - t * t)))

        integral = quad(integrand, 0.0, np.sqrt(top - bottom), epsabs=1e-14, epsrel=1e-12)[0]
        assert mean == pytest.approx(integral / (top - bottom), rel=1e-9)


def test_a_point_value_is_not_a_cell_mean() -> None:
    # trap: with cells of 3 m the value at the centre misses the mean of the broad-banded drift by a tenth
    mean = float(forms.cell_means(SHAPES["Breivik 2016"], np.array([-3.0, 0.0]))[0])
    centre = float(SHAPES["Breivik 2016"](np.array(-1.5)))
    assert mean / centre > 1.05


@pytest.mark.parametrize("depth", [None, 12.0, 40.0])
def test_monochromatic_transport(depth: float | None) -> None:
    bottom = -np.inf if depth is None else -depth
    integral = quad(lambda z: float(forms.monochromatic(z, 0.8, K, depth)), bottom, 0.0)[0]
    assert forms.monochromatic_transport(0.8, K, depth) == pytest.approx(integral, rel=1e-10)


def test_exponential_cell_means_and_surface_layer() -> None:
    faces = np.array([-20.0, -6.6, -1.0, 0.0])
    assert forms.exponential_cell_means(faces, 0.068, K) == pytest.approx(
        forms.cell_means(lambda z: forms.exponential(z, 0.068, K), faces), rel=1e-12
    )
    integral = quad(lambda z: 0.068 * np.exp(2 * K * z), -0.2 * 33.0, 0.0)[0]
    assert forms.surface_layer_mean_exponential(0.068, K, 33.0) == pytest.approx(integral / (0.2 * 33.0), rel=1e-12)


def test_breivik_2016_transport_above() -> None:
    for z in (-0.1, -1.0, -10.0, -80.0):
        integral = quad(lambda t: 2 * t * float(forms.breivik_2016(-t * t, 0.2, 0.5)), 0.0, np.sqrt(-z))[0]
        assert forms.breivik_2016_transport_above(z, 0.2, 0.5) == pytest.approx(integral, rel=1e-9)


@pytest.mark.parametrize("depth", [None, 6.0, 25.0])
@pytest.mark.parametrize("z", [0.0, -0.3, -2.0, -5.5])
def test_tail_beyond_the_last_frequency(z: float, depth: float | None) -> None:
    # the tail's own definition: E = E_c (f_c/f)^5 from f_c to infinity, in x = f_c/f
    cut_off, g = 0.4, 9.81

    def integrand(x: float) -> float:
        if x == 0.0:
            return 0.0
        f = cut_off / x
        omega = 2 * np.pi * f
        k = float(wavenumber(omega, depth, g))
        decay = 2 * np.exp(2 * k * z)
        if depth is not None:
            decay = 2 * (np.exp(2 * k * z) + np.exp(-2 * k * (z + 2 * depth))) / (1 - np.exp(-2 * k * depth)) ** 2
        return x**5 * omega * k * decay * cut_off / x**2

    integral = quad(integrand, 0.0, 1.0, epsabs=1e-13, epsrel=1e-11, limit=400)[0]
    assert tail_drift(z, cut_off, depth, g) == pytest.approx(integral, rel=1e-8)


@pytest.mark.parametrize("depth", [None, 15.0])
def test_drift_of_a_fine_spectrum(depth: float | None) -> None:
    f = np.linspace(0.02, 2.0, 8000)
    spectrum = Spectrum(f, pierson_moskowitz(f, 0.1, gravity=9.81))

    def integrand(frequency: float, z: float) -> float:
        omega = 2 * np.pi * frequency
        k = float(wavenumber(omega, depth, 9.81))
        kernel = 2 * np.exp(2 * k * z)
        if depth is not None:
            kernel = 2 * (np.exp(2 * k * z) + np.exp(-2 * k * (z + 2 * depth))) / (1 - np.exp(-2 * k * depth)) ** 2
        return float(pierson_moskowitz(frequency, 0.1, gravity=9.81)) * omega * k * kernel

    for z in (0.0, -1.0, -7.0):
        integral = quad(integrand, 0.02, 2.0, args=(z,), limit=200)[0]
        assert stokes_drift(z, spectrum, depth, tail=False)[0] == pytest.approx(integral, rel=1e-5)


@pytest.mark.parametrize("depth", [None, 15.0])
@pytest.mark.parametrize("tail", [True, False])
def test_transport_is_the_integral_of_the_drift(depth: float | None, tail: bool) -> None:
    f = np.linspace(0.04, 0.5, 93)
    spectrum = Spectrum(f, pierson_moskowitz(f, 0.1, gravity=9.81))
    bottom = -500.0 if depth is None else -depth
    integral = quad(
        lambda t: 2 * t * float(stokes_drift(-t * t, spectrum, depth, tail)[0]), 0.0, np.sqrt(-bottom), epsrel=1e-10, limit=300
    )[0]
    assert summary(spectrum, depth, tail).transport == pytest.approx(integral, rel=1e-7 if depth is None else 1e-5)
