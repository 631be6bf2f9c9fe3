"""Enhancement of Li et al. (2016), drift from the wind of Li et al. (2017), entrainment of Li & Fox-Kemper (2017)."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.forcing.langmuir import (
    enhancement_li_2016,
    enhancement_mcwilliams_sullivan_2000,
    enhancement_van_roekel_2012,
)
from lespost.forcing.stokes import theory_wave_bulk, theory_wave_surface_layer
from lespost.forcing.velocity_scales import entrainment_li_fox_kemper_2017


@pytest.mark.parametrize(("la", "expected"), [(0.4, 1.9554327), (0.3, 2.4664677)])
def test_enhancement(la: float, expected: float) -> None:
    # [1 + (1.5 La)^-2 + (5.4 La)^-4]^(1/2) (Li et al. 2016).
    assert enhancement_li_2016(la) == pytest.approx(expected, rel=1e-6)


def test_enhancement_of_mcwilliams_and_sullivan() -> None:
    assert enhancement_mcwilliams_sullivan_2000(0.3) == pytest.approx(3.2979605, rel=1e-6)  # McWilliams & Sullivan 2000


def test_the_three_factors_differ_for_one_sea() -> None:
    """Trap: La_t = 0.30 and La_SL = 0.407 describe the same sea; each factor wants its own number."""
    factors = [float(enhancement_mcwilliams_sullivan_2000(0.30)), float(enhancement_van_roekel_2012(0.30)),
               float(enhancement_li_2016(0.407))]
    assert factors == pytest.approx([3.30, 1.52, 1.93], abs=6e-3)  # derived from the published formulas


@pytest.mark.parametrize(("wind", "expected"), [(5.0, 0.003264893), (10.0, 0.02501584), (15.0, 0.06997182)])
def test_surface_layer_drift_from_the_wind(wind: float, expected: float) -> None:
    # Li, Fox-Kemper, Breivik & Webb 2017, averaging over h/5 with h = 50 m, g = 9.81.
    assert theory_wave_surface_layer(wind, 50.0, 9.81) == pytest.approx(expected, rel=1e-5)


def test_averaging_depth_is_a_fifth_of_the_layer() -> None:
    """Trap: passing the averaging depth where the layer depth belongs, a factor of five."""
    right = theory_wave_surface_layer(10.0, 50.0)
    assert theory_wave_surface_layer(10.0, 10.0) > 1.5 * right
    assert theory_wave_surface_layer(10.0, 250.0) < 0.7 * right


def test_bulk_drift_from_the_wind() -> None:
    us0, transport = theory_wave_bulk(10.0, 9.81)
    assert us0 == pytest.approx(0.162, rel=1e-9)  # 0.0162 U10 (Li et al. 2017)
    assert 0 < transport / us0 < 10
    assert theory_wave_surface_layer(10.0, 50.0) < us0


def test_entrainment() -> None:
    # 0.17 u*³ + 0.083 u*³ La_SL^-2 + 0.15 w*³ (Li & Fox-Kemper 2017).
    assert entrainment_li_fox_kemper_2017(1.0, 0.4, 0.0) == pytest.approx(0.68875, rel=1e-6)
    ustar = np.sqrt(3.72e-5)
    case = entrainment_li_fox_kemper_2017(ustar, 0.4071033, 9.131046e-3) / ustar**3
    assert case == pytest.approx(1.1741186, rel=1e-6)
