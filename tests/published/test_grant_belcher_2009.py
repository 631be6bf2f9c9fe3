"""Langmuir velocity, mixed scale and entrainment after Grant & Belcher (2009), for the case of McWilliams et al. (1997)."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.forcing import velocity_scales as v
from lespost.forcing.scales import scales

USTAR, DRIFT, WSTAR = np.sqrt(3.72e-5), 0.06791774, 9.131046e-3


def test_langmuir_velocity() -> None:
    assert v.langmuir_velocity(USTAR, DRIFT) == pytest.approx(1.3619946e-2, rel=1e-6)  # (u*² u_s0)^(1/3)
    assert (USTAR / v.langmuir_velocity(USTAR, DRIFT)) ** 1.5 == pytest.approx(np.sqrt(USTAR / DRIFT), rel=1e-12)  # = La_t
    assert (WSTAR / v.langmuir_velocity(USTAR, DRIFT)) ** 3 == pytest.approx(0.3013251, rel=1e-5)  # = h/L_L


def test_mixed_velocity_and_depth_factor() -> None:
    assert v.mixed_velocity(USTAR, DRIFT) == pytest.approx(0.01363782, rel=1e-6)  # as coded after Grant & Belcher 2009
    assert v.stokes_depth_factor(6.911504) == pytest.approx(0.8733105, rel=1e-6)  # the same, h/δ of the case


def test_entrainment() -> None:
    cubed = USTAR**3
    # 0.2 w*³ + 0.135 La_t w*_L³ and its alternative, after Grant & Belcher 2009.
    assert v.entrainment_grant_belcher_2009(USTAR, DRIFT, WSTAR) / cubed == pytest.approx(1.1215790, rel=1e-5)
    assert 0.2 * WSTAR**3 / cubed == pytest.approx(0.6710844, rel=1e-5)
    assert v.entrainment_grant_belcher_2009(USTAR, DRIFT, 0.0) / cubed == pytest.approx(0.4504947, rel=1e-5)
    assert v.entrainment_shear_and_langmuir(USTAR, DRIFT, WSTAR) / cubed == pytest.approx(1.0260235, rel=1e-5)


def test_published_entrainment_laws_spread_by_fifteen_percent() -> None:
    laws = [float(law) for law in (v.entrainment_li_fox_kemper_2017(USTAR, 0.4071033, WSTAR),
                                   v.entrainment_grant_belcher_2009(USTAR, DRIFT, WSTAR),
                                   v.entrainment_shear_and_langmuir(USTAR, DRIFT, WSTAR))]
    assert 1.10 < max(laws) / min(laws) < 1.16  # derived from the three formulas


def test_three_definitions_of_the_convective_velocity_are_not_one() -> None:
    """Trap: B0 h, 2.5 ∫⟨w'b'⟩ dz and 0.9 B0 h; the first two agree for the flux profile B0 (1 - 1.2 ζ), the last never does."""
    b0, h = 2.307e-8, 33.0
    ours = scales(friction_velocity=USTAR, buoyancy_flux=b0, layer_depth=h).wstar
    zeta = np.linspace(0, 1, 20001)
    assert ours**3 == pytest.approx(2.5 * h * np.trapezoid(b0 * (1 - 1.2 * zeta), zeta), rel=1e-9)  # derived in closed form
    assert (0.9 * b0 * h) ** (1 / 3) / ours == pytest.approx(0.9655, abs=1e-4)  # 3.5 % lower
