"""Dissipation estimate of Belcher et al. (2012): values, shares, crossovers, and the regime named from them."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.forcing.regimes import dissipation_from_scales, dissipation_terms, dividing_line, forcing_regime

CASES = [
    # La_t, h/L_L, ε h/u*³, shares of shear, Langmuir, convection (Belcher et al. 2012), tolerance
    (0.3, 0.1, 3.0563618, (0.091149, 0.799789, 0.109062), 1e-6),
    (0.3, 1.0, 6.0563618, (0.045999, 0.403616, 0.550385), 1e-6),
    (0.2996706, 0.3013251, 3.7347486, (0.074517, 0.655954, 0.269530), 1e-5),
]


@pytest.mark.parametrize(("la", "ratio", "total", "shares", "tolerance"), CASES)
def test_estimate_and_shares(la: float, ratio: float, total: float, shares: tuple[float, ...], tolerance: float) -> None:
    terms = dissipation_terms(la, ratio)
    assert terms.total == pytest.approx(total, rel=tolerance)
    assert [float(share) for share in terms.share()] == pytest.approx(shares, abs=1e-6)


def test_crossovers() -> None:
    # Derived from the published formula.
    assert dividing_line("langmuir", np.array([0.0]), 0.5) == pytest.approx([0.6356279], rel=1e-6)
    assert dividing_line("langmuir", np.array([0.0]), 0.9) == pytest.approx([0.2974110], rel=1e-6)
    assert dividing_line("shear", np.array([0.0]), 0.9) == pytest.approx([1.4017424], rel=1e-6)
    for la in (0.2, 0.5, 1.0, 3.0):
        terms = dissipation_terms(la, 0.22 / 0.3)
        assert float(terms.langmuir) == pytest.approx(float(terms.convective), rel=1e-12)  # at h/L_L = 0.7333333 for every La
    assert pytest.approx(0.7333333, rel=1e-6) == 0.22 / 0.3


def test_both_forms_of_the_estimate_agree() -> None:
    ustar, drift, b0, h = 0.0061, 0.068, 2.3e-8, 33.0
    terms = dissipation_terms(np.sqrt(ustar / drift), b0 * h / (ustar**2 * drift))
    assert dissipation_from_scales(ustar, drift, b0, h) == pytest.approx(
        (float(terms.shear), float(terms.langmuir), float(terms.convective)), rel=1e-12)


def test_limits() -> None:
    assert dissipation_from_scales(0.01, 0.0, 0.0, 30.0) == (2.0, 0.0, 0.0)  # no waves: La_t infinite
    assert dissipation_from_scales(0.01, 0.05, -1e-7, 30.0)[2] == 0.0  # stable: no convective part
    assert all(np.isnan(dissipation_from_scales(0.0, 0.05, 1e-7, 30.0)))  # no wind to scale with


@pytest.mark.parametrize(("parts", "regime"), [((0.95, 0.03, 0.02), "shear"), ((0.2, 0.6, 0.2), "langmuir"),
                                               ((0.4, 0.4, 0.2), "mixed"), ((0.0, 0.05, 0.95), "convective"),
                                               ((np.nan, 1.0, 0.0), "undetermined")])
def test_regime_named(parts: tuple[float, float, float], regime: str) -> None:
    assert forcing_regime(*parts) == regime
