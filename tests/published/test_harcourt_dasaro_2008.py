"""Surface-layer Langmuir number and layer-mean vertical variance of Harcourt & D'Asaro (2008)."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.constants import STANDARD_GRAVITY as G
from lespost.forcing.langmuir import surface_layer_langmuir_number, vertical_variance_harcourt_dasaro_2008
from lespost.forcing.stokes import monochromatic, surface_layer_mean_exponential

K = 2 * np.pi / 60
USTAR = np.sqrt(3.72e-5)
DRIFT = float(monochromatic(0.0, 0.8, K, None, G))


def test_surface_layer_mean_and_number() -> None:
    mean = surface_layer_mean_exponential(DRIFT, K, 33.0)
    assert mean == pytest.approx(0.03680123, rel=1e-6)  # u_s0 (1 - e^(-0.4kh))/(0.4kh); derived in closed form
    assert surface_layer_langmuir_number(USTAR, mean) == pytest.approx(0.4071033, rel=1e-6)  # derived; reference drift zero


def test_reference_drift_is_a_choice_that_changes_the_number() -> None:
    mean = surface_layer_mean_exponential(DRIFT, K, 33.0)
    base = DRIFT * np.exp(-2 * K * 33)
    with_reference = float(surface_layer_langmuir_number(USTAR, mean, base))
    assert with_reference == pytest.approx(0.4074780, rel=1e-6)  # derived; reference u_s(-h)
    assert with_reference != pytest.approx(0.4071033, rel=5e-4)
    # Large where the waves reach through the layer: δ = h.
    deep = 1 / (2 * 33.0)
    mean = surface_layer_mean_exponential(DRIFT, deep, 33.0)
    without = float(surface_layer_langmuir_number(USTAR, mean))
    assert float(surface_layer_langmuir_number(USTAR, mean, DRIFT * np.exp(-1))) > 1.2 * without


@pytest.mark.parametrize(("la", "expected"), [(0.3, 2.7880825), (0.4, 2.0266506), (0.5, 1.6075242), (1.0, 0.878),
                                              (2.0, 0.6561274)])
def test_layer_mean_vertical_variance(la: float, expected: float) -> None:
    # 0.398 + 0.480 La^(-4/3); 0.640 + 3.50 exp(-2.69 La) beyond 1 (Harcourt & D'Asaro 2008; exponent from memory).
    assert vertical_variance_harcourt_dasaro_2008(la) == pytest.approx(expected, rel=1e-6)


def test_exponent_is_not_three_quarters() -> None:
    wrong = 0.398 + 0.480 * 0.4**-0.75
    assert wrong == pytest.approx(1.3523, rel=1e-4)  # a form that circulates; inconsistent with ⟨w²⟩ ∝ (u*² u_s)^(2/3)
    assert vertical_variance_harcourt_dasaro_2008(0.4) != pytest.approx(wrong, rel=0.1)


def test_branches_meet_at_one() -> None:
    beyond = float(vertical_variance_harcourt_dasaro_2008(1.0 + 1e-12))
    assert beyond == pytest.approx(0.8776, abs=1e-4)  # derived from the published constants
