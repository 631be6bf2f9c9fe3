"""Drag coefficients of Large & Yeager (2004, 2009)."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.forcing.stress import drag_coefficient


# Large & Yeager 2009: 2.7/U + 0.142 + U/13.09 - 3.14807e-10 U⁶ below 33 m/s, 2.34 above.
@pytest.mark.parametrize(("wind", "expected"), [(5, 1.0639661e-3), (10, 1.1756271e-3), (20, 1.7847362e-3), (25, 2.0829977e-3),
                                                (40, 2.34e-3)])
def test_drag_coefficient_2009(wind: float, expected: float) -> None:
    assert drag_coefficient(float(wind), "large_yeager_2009") == pytest.approx(expected, rel=1e-6)


# Large & Yeager 2004: 2.70/U + 0.142 + 0.0764 U (from memory).
@pytest.mark.parametrize(("wind", "expected"), [(5, 1.0640e-3), (10, 1.1760e-3), (20, 1.8050e-3)])
def test_drag_coefficient_2004(wind: float, expected: float) -> None:
    assert drag_coefficient(float(wind), "large_yeager_2004") == pytest.approx(expected, rel=1e-4)


def test_smallest_drag_and_join_at_33() -> None:
    winds = np.linspace(1.0, 32.0, 31001)
    drag = drag_coefficient(winds, "large_yeager_2009")
    assert drag.min() == pytest.approx(1.0503e-3, rel=1e-4)  # derived from the published formula
    assert winds[np.argmin(drag)] == pytest.approx(5.94, abs=0.01)  # the same
    assert drag_coefficient(33.0 - 1e-9, "large_yeager_2009") == pytest.approx(2.3383e-3, rel=1e-4)  # the same
    assert drag_coefficient(33.0, "large_yeager_2009") == pytest.approx(2.34e-3, rel=1e-9)
