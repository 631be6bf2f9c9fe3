"""Depth of a layer deepened by its own shear (Pollard, Rhines & Thompson 1973; bulk criterion of Price, Weller & Pinkel 1986)."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.forcing.velocity_scales import shear_deepening

USTAR, N, F = 0.00609918, 0.0044, 1e-4


def test_greatest_depth() -> None:
    half = np.pi / F
    unit = USTAR / np.sqrt(F * N)
    assert shear_deepening(USTAR, N, F, half) == pytest.approx(15.46385, rel=1e-6)  # 8^(1/4) u*/√(fN); derived
    assert shear_deepening(USTAR, N, F, half, 0.65) == pytest.approx(13.88500, rel=1e-6)  # Ri_b = 0.65; derived
    assert shear_deepening(USTAR, N, F, half) / unit == pytest.approx(1.6817928, rel=1e-7)  # derived
    assert shear_deepening(USTAR, N, F, half) / unit == pytest.approx(1.7, rel=0.02)  # as quoted from Pollard et al. 1973
    assert shear_deepening(USTAR, N, F, half, 0.65) / unit == pytest.approx(1.5100831, rel=1e-7)  # derived


def test_bulk_richardson_number_is_critical_all_along() -> None:
    """Independently: slab momentum u*²/(f h) √(2(1 - cos ft)), buoyancy jump N² h/2."""
    times = np.linspace(0.1, 1.0, 7) * np.pi / F
    h = shear_deepening(USTAR, N, F, times)
    speed = USTAR**2 / (F * h) * np.sqrt(2 * (1 - np.cos(F * times)))
    assert N**2 * h / 2 * h / speed**2 == pytest.approx(np.ones(7), rel=1e-12)
