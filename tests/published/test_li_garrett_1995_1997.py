"""Hoenikker number (Li & Garrett 1995) and depth of Langmuir deepening (Li & Garrett 1997)."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.forcing.scales import scales
from lespost.forcing.velocity_scales import arresting_buoyancy_jump, langmuir_deepening

K = 2 * np.pi / 60
DELTA = 1 / (2 * K)


def test_hoenikker_number() -> None:
    found = scales(friction_velocity=np.sqrt(3.72e-5), buoyancy_flux=2.307e-8, surface_stokes_drift=0.06791774,
                   stokes_depth=DELTA, layer_depth=33.0)
    assert found.hoenikker == pytest.approx(0.1743905, rel=1e-6)  # 4 B0 δ / (u_s0 u*²), Li & Garrett 1995
    assert found.hoenikker == pytest.approx(2 * 2.307e-8 / (K * 0.06791774 * 3.72e-5), rel=1e-12)  # the same with k
    assert found.hoenikker * 33.0 / (4 * DELTA) == pytest.approx(found.h_over_l_langmuir, rel=1e-12)  # identity, derived here


def test_deepening_and_arrest() -> None:
    ustar, n = 0.00609918, 0.0044
    depth = langmuir_deepening(ustar, n)
    assert depth == pytest.approx(13.86177, rel=1e-6)  # 10 u*/N (Li & Garrett 1997)
    assert arresting_buoyancy_jump(ustar, depth) == pytest.approx(1.3418197e-4, rel=1e-6)  # 50 u*²/h (Li & Garrett 1997)
    assert n**2 * depth / 2 == pytest.approx(arresting_buoyancy_jump(ustar, depth), rel=1e-12)  # self-consistent, derived here
    assert 0.6 * n * depth == pytest.approx(0.0365951, rel=1e-6)  # w_dn = Fr N h with Fr = 0.6 (Li & Garrett 1997)
    assert 0.6 * n * depth == pytest.approx(6 * ustar, rel=1e-12)
