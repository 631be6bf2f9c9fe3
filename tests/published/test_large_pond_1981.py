"""Drag coefficient of Large & Pond (1981), and the friction velocity by its definition."""

from __future__ import annotations

import pytest

from lespost.forcing.stress import drag_coefficient, friction_velocity


# 10³ C_D = 1.2 below 11 m/s, 0.49 + 0.065 U up to 25 m/s (Large & Pond 1981; from memory).
@pytest.mark.parametrize(("wind", "expected"), [(10.0, 1.2e-3), (15.0, 1.465e-3), (20.0, 1.79e-3), (25.0, 2.115e-3)])
def test_drag_coefficient(wind: float, expected: float) -> None:
    assert drag_coefficient(wind, "large_pond_1981") == pytest.approx(expected, rel=1e-9)


def test_drag_is_held_beyond_the_winds_it_was_measured_in() -> None:
    assert drag_coefficient(40.0, "large_pond_1981") == drag_coefficient(25.0, "large_pond_1981")


def test_friction_velocity_of_a_tenth_of_a_pascal() -> None:
    assert friction_velocity(0.1, 1025.0) == pytest.approx(9.877296e-3, rel=1e-6)  # (τ/ρ)^(1/2); definition
