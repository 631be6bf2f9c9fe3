"""Linear dispersion against the handbook tables (Shore Protection Manual 1984, appendix C; Coastal Engineering Manual)."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.forcing.dispersion import angular_frequency, wavenumber

G = 9.81
#: d/L0: (d/L printed in the Shore Protection Manual, from memory; computed d/L; tanh kd; n = group over phase speed).
ROWS = {
    0.0100: (0.04032, 0.04032, 0.2480, None), 0.0500: (0.09416, 0.09415, 0.5310, 0.8999),
    0.1000: (0.1410, 0.14098, 0.7093, 0.8103), 0.2000: (0.2251, 0.22512, 0.8884, 0.6677),
    0.5000: (0.5018, 0.50183, 0.9964, 0.5115),
}


def kd(depth_over_deep_length: float) -> float:
    deep = 2 * np.pi
    omega = np.sqrt(G * deep / 1.0)
    return float(wavenumber(omega, depth_over_deep_length, G)) * depth_over_deep_length


@pytest.mark.parametrize("ratio", ROWS)
def test_rows(ratio: float) -> None:
    printed, computed, tanh, n = ROWS[ratio]
    x = kd(ratio)
    assert x / (2 * np.pi) == pytest.approx(printed, abs=1e-4)
    assert x / (2 * np.pi) == pytest.approx(computed, abs=1e-5)
    assert np.tanh(x) == pytest.approx(tanh, abs=1e-4)
    if n is not None:
        assert 0.5 * (1 + 2 * x / np.sinh(2 * x)) == pytest.approx(n, abs=1e-4)


def test_row_of_one_tenth_in_full() -> None:
    x = kd(0.1)
    assert x == pytest.approx(0.88581, abs=1e-4)  # Shore Protection Manual, from memory
    assert np.sinh(x) == pytest.approx(1.0063, abs=1e-4)
    assert np.cosh(x) == pytest.approx(1.4187, abs=1e-4)
    n = 0.5 * (1 + 2 * x / np.sinh(2 * x))
    assert np.sqrt(1 / (2 * n * np.tanh(x))) == pytest.approx(0.9327, abs=1e-4)  # shoaling coefficient H/H0'


def test_manuals_example_of_ten_seconds_in_three_metres() -> None:
    omega = 2 * np.pi / 10
    deep = 2 * np.pi * G / omega**2
    length = 2 * np.pi / float(wavenumber(omega, 3.0, G))
    # Coastal Engineering Manual prints 156, 0.0192, 53.2, 5.32 (from memory); more digits computed.
    assert deep == pytest.approx(156.131, rel=1e-5)
    assert 3 / deep == pytest.approx(0.019215, rel=1e-4)
    assert length == pytest.approx(53.156, rel=1e-4)
    assert length / 10 == pytest.approx(5.3156, rel=1e-4)


def test_round_trip_over_ten_decades() -> None:
    omega = np.geomspace(1e-5, 1e5, 201)
    assert angular_frequency(wavenumber(omega, 7.0, G), 7.0, G) == pytest.approx(omega, rel=1e-12)
