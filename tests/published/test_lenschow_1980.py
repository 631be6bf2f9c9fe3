"""Vertical velocity variance of convection (Lenschow, Wyngaard & Pennell 1980)."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad

from lespost.forcing.velocity_scales import vertical_variance_convection


@pytest.mark.parametrize(("zeta", "expected"), [(0.1, 0.3282324), (0.3125, 0.4662602), (0.5, 0.4082144)])
def test_profile(zeta: float, expected: float) -> None:
    # 1.8 ζ^(2/3) (1 - 0.8 ζ)² (Lenschow et al. 1980); the rounded 1.34² = 1.7956 in use elsewhere does not match.
    assert vertical_variance_convection(zeta) == pytest.approx(expected, rel=1e-6)


def test_layer_mean_and_place_of_the_maximum() -> None:
    assert quad(lambda z: float(vertical_variance_convection(z)), 0, 1)[0] == pytest.approx(0.3141816, rel=1e-6)  # derived
    zeta = np.linspace(0.01, 1, 9901)
    assert zeta[np.argmax(vertical_variance_convection(zeta))] == pytest.approx(0.3125, abs=1e-4)  # derived
