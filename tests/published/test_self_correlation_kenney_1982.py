"""Correlation that shared variables make by themselves: closed form (Kenney 1982; derived here) against simulation."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.scaling.laws import DERIVED, combine
from lespost.scaling.self_correlation import by_chance, correlation_and_slope, log_covariance
from lespost.scaling.table import ScaleTable

NAMES = ("velocity", "us0", "ustar")
RATIOS = ({"velocity": 1.0, "ustar": -1.0}, {"us0": 1.0, "ustar": -1.0})


def test_equal_variances_give_exactly_one_half() -> None:
    found = by_chance(*RATIOS, NAMES, np.eye(3) * 0.37, "all")
    assert found.correlation == pytest.approx(0.5, abs=1e-15)
    assert found.slope == pytest.approx(0.5, abs=1e-15)
    assert found.reduced_major_axis == pytest.approx(1.0, abs=1e-15)  # the slope one that practitioners find


@pytest.mark.parametrize("variances", [(1.0, 1.0, 1.0), (0.04, 0.2, 0.1), (0.3, 0.02, 0.5)])
def test_kenney_formula(variances: tuple[float, float, float]) -> None:
    y, x, z = variances
    # derived: var z / ((var x + var z)(var y + var z))^(1/2)
    expected = z / np.sqrt((x + z) * (y + z))
    assert by_chance(*RATIOS, NAMES, np.diag(variances), "all").correlation == pytest.approx(expected, rel=1e-14)


def test_closed_form_is_what_simulation_gives() -> None:
    rng = np.random.default_rng(5)
    covariance = np.array([[0.10, 0.0, 0.0], [0.0, 0.20, 0.08], [0.0, 0.08, 0.06]])
    for y_powers, x_powers in (
        RATIOS,
        ({"velocity": 1.0, "ustar": -1.0}, combine((DERIVED["la_t"], 1.0))),
        ({"velocity": 1.0, "us0": -1.0}, {"ustar": 2.0, "us0": -0.5, "velocity": 0.3}),
    ):
        found = by_chance(y_powers, x_powers, NAMES, covariance)
        logs = rng.multivariate_normal(np.zeros(3), covariance, 400_000)
        a, b = (np.array([powers.get(name, 0.0) for name in NAMES]) for powers in (y_powers, x_powers))
        r, slope = correlation_and_slope(logs @ b, logs @ a)
        assert found.correlation == pytest.approx(float(r), abs=4e-3)
        assert found.slope == pytest.approx(float(slope), abs=1e-2)


def test_axes_that_share_nothing_have_no_correlation_by_chance() -> None:
    found = by_chance({"velocity": 1.0}, {"us0": 1.0}, NAMES, np.eye(3))
    assert found.correlation == 0.0
    assert found.slope == 0.0


def test_vertical_variance_against_the_langmuir_number() -> None:
    # field note of the developers: w² drawn independently of the forcing gives a median correlation of -0.66 with La_t in 30 points
    # (5 to 95 %: -0.80 to -0.43); the spreads of u*, u_s0 and w behind it are not stated, so only the sign and the size are checked
    rng = np.random.default_rng(6)
    r = []
    for _ in range(400):
        logs = rng.standard_normal((30, 3)) * np.array([0.3, 0.4, 0.45])
        table = ScaleTable(dict(zip(NAMES, np.exp(logs).T, strict=True)))
        r.append(by_chance({"velocity": 2.0, "ustar": -2.0}, DERIVED["la_t"], NAMES, log_covariance(table, NAMES), "all").correlation)
    assert -0.80 < np.median(r) < -0.43
