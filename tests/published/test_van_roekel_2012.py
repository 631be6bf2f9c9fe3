"""Cell axis and projected Langmuir number of Van Roekel et al. (2012), and its enhancement factor."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.forcing.langmuir import (
    cell_axis_angle,
    enhancement_van_roekel_2012,
    projected,
    turbulent_langmuir_number,
)

USTAR, DRIFT, DEPTH, HEIGHT = 0.0061, 0.068, 33.0, 1.6
# Van Roekel et al. 2012: tan α = sin θ / (u*/(κ u_s0) ln(h/4H_s) + cos θ); La_proj² = u* |cos α| / (u_s0 |cos(θ - α)|).
ANGLES = {30.0: (22.05928, 0.2897308), 45.0: (33.33714, 0.2766312), 90.0: (69.80440, 0.1816522), 135.0: (115.63142, 0.2028125)}


@pytest.mark.parametrize("theta", ANGLES)
def test_cell_axis(theta: float) -> None:
    assert cell_axis_angle(USTAR, DRIFT, theta, DEPTH, HEIGHT) == pytest.approx(ANGLES[theta][0], abs=1e-4)


@pytest.mark.parametrize("theta", ANGLES)
def test_projected_number(theta: float) -> None:
    alpha = cell_axis_angle(USTAR, DRIFT, theta, DEPTH, HEIGHT)
    assert projected(turbulent_langmuir_number(USTAR, DRIFT), alpha, theta) == pytest.approx(ANGLES[theta][1], rel=1e-5)


def test_branch_of_the_arctangent_is_kept_where_waves_oppose_the_wind() -> None:
    alpha = float(cell_axis_angle(USTAR, DRIFT, 135.0, DEPTH, HEIGHT))
    theta = np.radians(135.0)
    one_argument = np.degrees(np.arctan(np.sin(theta) / (USTAR / (0.4 * DRIFT) * np.log(DEPTH / (4 * HEIGHT)) + np.cos(theta))))
    assert one_argument == pytest.approx(-64.36858, abs=1e-4)  # the same line, the other way: fatal as a vector
    assert alpha != pytest.approx(one_argument, abs=90.0)
    assert (alpha - one_argument) % 180 == pytest.approx(0.0, abs=1e-9)


def test_axis_is_mirrored_with_the_waves() -> None:
    assert cell_axis_angle(USTAR, DRIFT, -45.0, DEPTH, HEIGHT) == pytest.approx(-33.33714, abs=1e-4)
    assert np.isnan(cell_axis_angle(USTAR, 0.0, 45.0, DEPTH, HEIGHT))


def test_enhancement_with_fourth_power() -> None:
    factor = float(enhancement_van_roekel_2012(0.3))
    assert factor == pytest.approx(1.5170346, rel=1e-6)  # [1 + (3.1 La)^-2 + (5.4 La)^-4]^(1/2); from memory
    wrong = np.sqrt(1 + 0.104 * 0.3**-2 + 0.034 * 0.3**-4)
    assert wrong == pytest.approx(2.5205330, rel=1e-3)  # 0.034 = 5.4^-2 in place of 5.4^-4
    assert factor != pytest.approx(wrong, rel=0.3)
