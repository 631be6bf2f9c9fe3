"""Sunlight below the surface (Paulson & Simpson 1977)."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.errors import DataError
from lespost.forcing.buoyancy import absorbed_in_layer, light


def test_type_one() -> None:
    # 0.58 e^(-d/0.35) + 0.42 e^(-d/23) (Paulson & Simpson 1977).
    assert light(10.0) == pytest.approx(0.2719103, rel=1e-6)
    edges = np.linspace(0, 30, 300001)
    assert np.trapezoid(light(edges), edges) / 30 == pytest.approx(0.2413921, rel=1e-6)  # mean over 30 m, derived


def test_all_light_enters_and_is_absorbed_somewhere() -> None:
    for kind in ("I", "IA", "IB", "II", "III"):
        assert light(0.0, kind) == pytest.approx(1.0, rel=1e-12)
        assert absorbed_in_layer(200.0, 1000.0, kind) == pytest.approx(200.0, rel=1e-9)
    with pytest.raises(DataError, match="use one of I, IA"):
        light(1.0, "V")
