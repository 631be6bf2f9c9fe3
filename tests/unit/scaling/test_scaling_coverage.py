"""Do intervals hold the truth as often as they say, and does chance pass for a law as seldom as it says?"""

from __future__ import annotations

import numpy as np
import pytest

from lespost.scaling.dimensions import missing_scale
from lespost.scaling.fit import block_length, fit_law, law_axes
from lespost.scaling.laws import BUILT_IN, Law
from lespost.scaling.self_correlation import Guard, guard, run_length
from lespost.scaling.table import ScaleTable
from tests.unit.scaling.storms import scattered, storm

TABLES = 300


def covered(law: Law, truth: float, tables: int, fixed: bool = False, **of: float) -> tuple[float, float]:
    """Shares of tables whose intervals hold the true exponent and the true constant."""
    rng = np.random.default_rng(11)
    slope, constant = 0, 0
    for _ in range(tables):
        fit = fit_law(law, scattered(rng, **of), 200, 0.95, rng, fixed)  # type: ignore[arg-type]
        slope += fit.slope.low <= truth <= fit.slope.high
        constant += fit.intercept.low <= np.log(of.get("constant", 1.0)) <= fit.intercept.high
    return slope / tables, constant / tables


# 300 tables: the share itself is uncertain by 1.3 % (binomial), so a true 95 % shows 92 to 98 %
@pytest.mark.parametrize(("name", "truth", "of"), [
    ("us0", 1.0, {"us0": 1.0}),
    ("us0", 1.0, {"us0": 1.0, "error": 0.15}),
    ("us0^1/2 ustar^1/2", 1.0, {"us0": 0.5, "ustar": 0.5, "constant": 0.3}),
    ("ustar la_t^n", -1.0, {"us0": 0.5, "ustar": 0.5}),
    ("ustar la_t^n", -1.0, {"us0": 0.5, "ustar": 0.5, "error": 0.1}),
    ("ustar^2/3 us0^1/3", 1.0, {"us0": 1 / 3, "ustar": 2 / 3, "rows": 25}),
])
def test_intervals_hold_the_truth(name: str, truth: float, of: dict[str, float]) -> None:
    slope, constant = covered(BUILT_IN[name], truth, TABLES, **of)
    assert 0.92 <= slope <= 0.98
    assert 0.92 <= constant <= 0.98


def test_intervals_hold_the_truth_under_serial_correlation() -> None:
    slope, constant = covered(BUILT_IN["us0"], 1.0, TABLES, us0=1.0, rows=200, memory=0.6)
    assert 0.92 <= slope <= 0.98
    assert 0.92 <= constant <= 0.98


def test_a_held_exponent_gives_an_interval_of_the_constant() -> None:
    _, constant = covered(BUILT_IN["us0"], 1.0, TABLES, fixed=True, us0=1.0, constant=0.5, error=0.1)
    assert 0.92 <= constant <= 0.98


def test_least_squares_would_have_missed_the_truth() -> None:
    # with errors in the predictor least squares flattens the slope by var/(var + error²) (closed form): here 0.5²/(0.5² + 0.25²) = 0.8
    rng = np.random.default_rng(4)
    table = scattered(rng, rows=4000, us0=1.0, error=0.25)
    axes = law_axes(BUILT_IN["us0"], table)
    assert np.polyfit(axes.x, axes.y, 1)[0] == pytest.approx(0.8, abs=0.02)
    fit = fit_law(BUILT_IN["us0"], table, 100, 0.95, rng)
    assert fit.slope.low <= 1.0 <= fit.slope.high
    assert fit.slope.value == pytest.approx(1.0, abs=0.03)


def by_ustar(table: ScaleTable, rng: np.random.Generator, run: float = 1.0) -> Guard:
    axes = law_axes(BUILT_IN["us0"], table, {"ustar": 1.0})
    return guard(axes.x, axes.y, axes.x_powers, axes.y_powers, table, run, 400, 0.95, rng)


def test_serial_correlation_does_not_let_chance_pass_for_a_law() -> None:
    rng = np.random.default_rng(71)
    careless, passed = 0, 0
    for _ in range(300):
        table = scattered(rng, rows=40, constant=0.03, scatter=0.5, memory=0.6)
        block = max(fit_law(BUILT_IN["us0"], table, 50, 0.95, rng).block, block_length(np.log(table.columns["velocity"]), True))
        careless += by_ustar(table, rng).beats_chance
        passed += by_ustar(table, rng, run_length(block)).beats_chance
    assert careless / 300 > 0.11  # rows shuffled one by one
    assert 0.02 <= passed / 300 <= 0.085  # level 5 %; binomial spread of 300 tables 1.3 %


def test_self_correlation_is_caught() -> None:
    # V knows nothing of the forcing, yet V/u* against u_s0/u* is correlated; chance must pass for a law in 5 % of tables only
    rng = np.random.default_rng(7)
    found = [by_ustar(scattered(rng, rows=40, constant=0.03, scatter=0.5), rng) for _ in range(200)]
    assert np.median([item.correlation for item in found]) == pytest.approx(0.5, abs=0.1)  # Kenney (1982): equal variances
    assert np.mean([item.correlation > 0.31 for item in found]) > 0.8  # "significant" by the usual table for 40 rows
    assert 0.02 <= np.mean([item.beats_chance for item in found]) <= 0.085
    inside = [item.correlation_low <= item.chance.correlation <= item.correlation_high for item in found]
    assert all(inside)
    # and a real law is not called chance
    real = [by_ustar(scattered(rng, rows=40, us0=1.0, scatter=0.2), rng).beats_chance for _ in range(50)]
    assert np.mean(real) == 1.0


def test_hidden_constant_is_recovered() -> None:
    rng = np.random.default_rng(13)
    hits = 0
    for _ in range(300):
        table = storm(rng, rows=60, hidden=0.003)
        fit = fit_law(BUILT_IN["ustar"], table, 200, 0.95, rng)
        found = missing_scale(fit, table, 0.95, exponent=2.0)
        assert found is not None
        assert found.units == "m s-1"
        hits += found.value.low <= 0.003 <= found.value.high
    assert 0.92 <= hits / 300 <= 0.98
