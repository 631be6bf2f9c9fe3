"""The length of record that separates two laws: the formula against simulated deployments."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import norm

from lespost.scaling.discrimination import discriminate
from lespost.scaling.fit import fit_law
from lespost.scaling.laws import BUILT_IN
from lespost.scaling.planner import plan, rows_needed
from lespost.scaling.table import ScaleTable
from tests.unit.scaling.storms import scattered

TRUE, RIVAL = BUILT_IN["us0^1/2 ustar^1/2"], BUILT_IN["ustar^2/3 us0^1/3"]


def test_small_differences_need_rows_in_inverse_proportion() -> None:
    # derived: for D << σ², n = 4 (z_(1-α/2) + z_power)² σ²/D
    z = norm.ppf(0.975) + norm.ppf(0.8)
    assert rows_needed(1e-6, 0.1, 0.8, 0.95) == pytest.approx(4 * z**2 * 1e4, rel=1e-3)
    assert rows_needed(0.0, 0.1, 0.8, 0.95) == np.inf
    assert rows_needed(0.01, 0.1, 0.9, 0.95) > rows_needed(0.01, 0.1, 0.8, 0.95)


def test_power_is_what_was_asked_for() -> None:
    rng = np.random.default_rng(21)
    # scatter such that some tens of rows are needed: a regime where the large-sample test can be trusted
    forcing = scattered(rng, rows=2000, spread=0.4)
    found = plan(TRUE, RIVAL, forcing, scatter=0.15, scatter_time=0.0)
    assert 30 < found.rows < 500
    count = round(found.rows)
    won = 0
    for _ in range(200):
        table = scattered(rng, rows=count, us0=0.5, ustar=0.5, scatter=0.15, spread=0.4)
        table = ScaleTable(table.columns)
        pair = discriminate([fit_law(law, table, 20, 0.95, rng, True) for law in (TRUE, RIVAL)], table, 20, 0.95, rng).pairs[0]
        won += pair.separated and pair.z > 0
    assert 0.70 <= won / 200 <= 0.90  # asked: 0.8; binomial spread 0.03, the rest is the approximation


def test_range_of_the_ratio_that_would_do() -> None:
    rng = np.random.default_rng(22)
    forcing = scattered(rng, rows=2000, spread=0.1)
    found = plan(TRUE, RIVAL, forcing, scatter=0.15, scatter_time=0.0, rows_now=100)
    assert found.ratio_name == "us0/ustar"
    assert found.ratio_low < 10 < found.ratio_high
    # closed form: an even spread of ln(u_s/u*) over that range has the variance that 100 rows need; the laws differ by its 1/6 power
    variance = np.log(found.ratio_high / found.ratio_low) ** 2 / 12 / 36
    assert rows_needed(variance, 0.15, 0.8, 0.95) == pytest.approx(100, rel=1e-3)


def test_hours_follow_the_slower_of_rows_and_scatter() -> None:
    forcing = scattered(np.random.default_rng(23), rows=500)
    fast, slow = (plan(TRUE, RIVAL, forcing, 0.15, seconds) for seconds in (60.0, 5400.0))
    assert fast.hours == pytest.approx(fast.rows * 0.5)  # half-hourly rows
    assert slow.hours == pytest.approx(slow.rows * 3.0)  # twice the integral time of 1.5 h


def test_fitted_exponents_make_it_harder() -> None:
    rng = np.random.default_rng(24)
    forcing = scattered(rng, rows=500)
    held, fitted = (plan(BUILT_IN["us0"], BUILT_IN["ustar"], forcing, 0.2, 0.0, free=free).rows for free in (False, True))
    assert fitted > held
    # a law with a fitted exponent that contains the other can never be told from it
    assert plan(BUILT_IN["us0"], BUILT_IN["ustar la_t^n"], forcing, 0.2, 0.0).rows == np.inf
