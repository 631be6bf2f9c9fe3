"""Drag coefficient and Charnock parameter of Edson et al. (2013)."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.forcing.stress import charnock_coare, drag_coefficient, wind_stress


# Edson et al. 2013, neutral, air at 15 °C, κ = 0.4, g = 9.81; the air's viscosity from memory.
@pytest.mark.parametrize(("wind", "expected"), [(5, 0.9203694e-3), (10, 1.3208225e-3), (15, 1.8263935e-3), (20, 2.3524607e-3),
                                                (25, 2.7331795e-3)])
def test_drag_coefficient(wind: float, expected: float) -> None:
    assert drag_coefficient(float(wind), "coare_3_5") == pytest.approx(expected, rel=1e-5)


# 0.0017 min(U, 19) - 0.005 (Edson et al. 2013).
@pytest.mark.parametrize(("wind", "expected"), [(10, 0.0120), (19, 0.0273), (25, 0.0273)])
def test_charnock_parameter(wind: float, expected: float) -> None:
    assert charnock_coare(float(wind)) == pytest.approx(expected, rel=1e-9)


def test_charnock_parameter_never_falls_below_zero_in_light_winds() -> None:
    raw = 0.0017 * 2.0 - 0.005
    assert raw == pytest.approx(-0.0016)  # what the bare line gives
    assert charnock_coare(2.0) == 0.0
    light = drag_coefficient(np.array([0.5, 1.0, 2.0, 2.9]), "coare_3_5")
    assert np.all(np.isfinite(light)) and np.all(np.diff(light) < 0)  # smooth flow: drag falls with wind


def test_faintest_wind_has_a_finite_small_stress() -> None:
    stress = wind_stress(np.array([1e-9, 1e-6, 1e-3, 1e-2]), "coare_3_5")
    assert np.all(stress > 0) and np.all(np.diff(stress) > 0) and stress[2] < 1e-8


def test_calm_has_no_stress_by_any_law() -> None:
    for formula in ("large_yeager_2009", "large_yeager_2004", "large_pond_1981", "coare_3_5"):
        assert wind_stress(0.0, formula) == 0.0  # type: ignore[arg-type]
