"""Certified values of the Statistical Reference Datasets of NIST, here data and values from memory.

The data set is accepted only if it reproduces its own certified values to ten digits, which no misremembered number would.
"""

from __future__ import annotations

import numpy as np
import pytest

from lespost.scaling.line import york

# Norris (linear regression, lower difficulty): columns y, x; from memory
NORRIS = np.array("""
0.1 0.2  338.8 337.4  118.1 118.2  888.0 884.6  9.2 10.1  228.1 226.5  668.5 666.3  998.5 996.3  449.1 448.6  778.9 777.0
559.2 558.2  0.3 0.4  0.1 0.6  778.1 775.5  668.8 666.9  339.3 338.0  448.9 447.5  10.8 11.6  557.7 556.0  228.3 228.1
998.0 995.8  888.8 887.6  119.6 120.2  0.3 0.3  0.6 0.3  557.6 556.8  339.3 339.1  888.0 887.2  998.5 999.0  778.9 779.0
10.2 11.1  117.6 118.3  228.9 229.2  668.4 669.1  449.2 448.9  0.2 0.5
""".split(), float).reshape(-1, 2)


def test_norris() -> None:
    y, x = NORRIS.T
    assert x.size == 36
    # certified values, from memory: slope, intercept, residual standard deviation; confirmed by the agreement of all three
    residual_sd = 0.884796396144373
    line = york(x, y, 0.0, residual_sd)
    assert line.slope == pytest.approx(1.00211681802045, rel=1e-11)
    assert line.intercept == pytest.approx(-0.262323073774029, rel=1e-9)
    assert line.slope_se == pytest.approx(0.429796848199937e-3, rel=1e-9)
    assert line.intercept_se == pytest.approx(0.232818234301152, rel=1e-9)
    assert line.chi_squared == pytest.approx(34.0, rel=1e-9)
