"""How often each law wins among resampled rows, against fitting every sample anew; laws that contain each other."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.scaling.discrimination import collinearity, discriminate
from lespost.scaling.fit import draw_rows, fit_law
from lespost.scaling.laws import BUILT_IN
from lespost.scaling.table import ScaleTable
from tests.unit.scaling.storms import scattered

NAMES = ("us0", "ustar", "us0^1/2 ustar^1/2")


@pytest.mark.parametrize("fixed", [False, True])
def test_selection_rates_are_those_of_fitting_each_sample_anew(fixed: bool) -> None:
    table = scattered(np.random.default_rng(41), rows=25, us0=0.5, ustar=0.5, scatter=0.5, spread=0.3)
    table = ScaleTable(table.columns)  # no order in time, no stated errors: York's line is that of least squares
    fits = [fit_law(BUILT_IN[name], table, 50, 0.95, np.random.default_rng(1), fixed) for name in NAMES]
    found = discriminate(fits, table, 400, 0.95, np.random.default_rng(2))
    y = np.log(table.columns["velocity"])
    won = dict.fromkeys(NAMES, 0)
    for rows in draw_rows(25, 1.0, 400, np.random.default_rng(2)):
        misfit = {}
        for name in NAMES:
            x = BUILT_IN[name].log_predictor(table)
            line = np.polyval(np.polyfit(x[rows], y[rows], 1), x[rows]) if not fixed else x[rows] + (y - x)[rows].mean()
            misfit[name] = float(((y[rows] - line) ** 2).sum())
        won[min(misfit, key=misfit.__getitem__)] += 1
    for standing in found.standings:
        assert standing.chosen == pytest.approx(won[standing.name] / 400, abs=1e-12)
    assert min(won.values()) > 0  # the case is one in which every law wins sometimes


def test_information_criteria_in_closed_form() -> None:
    table = ScaleTable(scattered(np.random.default_rng(42), rows=30, us0=1.0).columns)
    fits = [fit_law(BUILT_IN[name], table, 50, 0.95, np.random.default_rng(1)) for name in ("us0", "ustar")]
    found = discriminate(fits, table, 50, 0.95, np.random.default_rng(2))
    # closed form: with as many parameters each, AIC and BIC both differ by n ln(s_1²/s_2²)
    expected = 30 * np.log((fits[1].residual**2).mean() / (fits[0].residual**2).mean())
    assert found.standings[0].name == "us0"
    assert found.standings[1].aic == pytest.approx(expected, rel=1e-9)
    assert found.standings[1].bic == pytest.approx(expected, rel=1e-9)
    assert found.pairs[0].separated
    assert found.pairs[0].z > 0


def test_collinearity_in_closed_form() -> None:
    rng = np.random.default_rng(43)
    first, second = rng.standard_normal((2, 200))
    table = ScaleTable({"velocity": np.ones(200), "ustar": np.exp(first), "us0": np.exp(2 * first + 0.1 * second)})
    found = collinearity(table, ("ustar", "us0"))
    r = float(np.corrcoef(first, 2 * first + 0.1 * second)[0, 1])
    # closed form for two columns: eigenvalues 1 ± r, variance inflation 1/(1 - r²)
    assert found.condition == pytest.approx(np.sqrt((1 + r) / (1 - r)), rel=1e-9)
    assert found.inflation == pytest.approx((1 / (1 - r**2),) * 2, rel=1e-6)
