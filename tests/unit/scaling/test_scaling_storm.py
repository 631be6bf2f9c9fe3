"""One storm in which wind and waves rise together: several laws fit, one hides a constant, and the tool says so."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.scaling.analyse import Analysis, analyse
from lespost.scaling.dimensions import Known, candidates, known_from_text
from lespost.scaling.fit import Estimate
from lespost.scaling.report import COLUMNS, plain, rows, statement, to_json, to_text
from lespost.scaling.settings import ScalingSettings
from tests.unit.scaling.storms import scattered, storm

SETTINGS = ScalingSettings(laws=("us0", "ustar", "us0 ustar^2"), bootstrap_samples=300, permutations=300, scales=("drift = 0.3 cm s-1",))


@pytest.fixture(scope="module")
def analysis() -> Analysis:
    return analyse(storm(np.random.default_rng(2)), SETTINGS)


def test_the_three_slopes_of_common_practice(analysis: Analysis) -> None:
    # common practice, no source: slopes near 1 on u_s, 2 on u*, 1/2 on u_s u*², and u_s itself near 2 on u*
    slopes = {item.law.name: item.free.slope for item in analysis.tested}
    for name, truth in (("us0", 1.0), ("ustar", 2.0), ("us0 ustar^2", 0.5)):
        assert slopes[name].value == pytest.approx(truth, rel=0.1)
        assert slopes[name].low <= truth <= slopes[name].high
    logs = (np.log(analysis.table.columns[name]) for name in ("ustar", "us0"))
    assert np.polyfit(*logs, 1)[0] == pytest.approx(2.0, abs=0.15)


def test_they_are_called_inseparable_and_why(analysis: Analysis) -> None:
    assert set(analysis.free.inseparable) == {"us0", "ustar", "us0 ustar^2"}
    assert analysis.free.collinearity.condition > 8
    said = " ".join(statement(analysis))
    assert "With fitted exponents: these three cannot be separated by this record" in said
    assert "are correlated up to 0.9" in said
    assert "independent rows" in said
    # with the exponents that laws state, only u_s0 fits: the others need a hidden constant
    assert analysis.fixed.standings[0].name == "us0"
    assert analysis.fixed.inseparable == ("us0",)
    for standing in analysis.free.standings:
        assert standing.chosen < 0.95


def test_they_are_inseparable_in_nearly_every_such_storm() -> None:
    rng = np.random.default_rng(8)
    quick = SETTINGS.model_copy(update={"bootstrap_samples": 100, "permutations": 100})
    together = [len(analyse(storm(rng), quick).free.inseparable) for _ in range(30)]
    # a false separation at the 95 % level is the exception
    assert np.mean(np.array(together) == 3) >= 0.8


def test_hidden_constant_is_named_with_its_candidates(analysis: Analysis) -> None:
    wind = next(item for item in analysis.tested if item.law.name == "ustar")
    assert wind.missing_round is not None
    assert wind.missing_round.exponent == 2.0
    found = wind.missing_round
    assert found.units == "m s-1"
    assert found.value.low <= 0.003 <= found.value.high  # the constant the storm was built with
    names = {item.name: item for item in found.candidates}
    assert names["drift"].ratio == pytest.approx(0.003 / found.value.value)
    assert names["drift"].inside_interval
    assert any("d(ustar^2)/dt" in name for name in names)
    # closed form: a velocity from h and f is h f, from g and h (g h)^(1/2)
    table = analysis.table
    depth = float(np.median(table.columns["h"]))
    assert names["h coriolis_parameter".replace("coriolis_parameter", "f")].value == pytest.approx(depth * 1e-4)
    assert names["g^0.5 h^0.5"].value == pytest.approx(np.sqrt(9.81 * depth))
    balanced = next(item for item in analysis.tested if item.law.name == "us0")
    assert balanced.missing is None or balanced.missing.ambiguous


def test_candidates_have_the_right_unit_only() -> None:
    required = Estimate(2.0, 0.1, 1.8, 2.2)
    known = (Known("L", 4.0, (1.0, 0.0)), Known("T", 2.0, (0.0, 1.0)), Known("E", 4.0, (2.0, -2.0)))
    found = {item.name: item.value for item in candidates((1.0, -1.0), required, "m s-1", known)}
    assert found["L T^-1"] == pytest.approx(2.0)
    assert found["E^0.5"] == pytest.approx(2.0)
    assert known_from_text("jet = 12 cm/s") == Known("jet", 0.12, (1.0, -1.0))
    assert known_from_text("growth=0.1 m2 s-3").dimensions == (2.0, -3.0)


def test_every_correlation_has_its_twin(analysis: Analysis) -> None:
    frame = rows(analysis)
    assert tuple(frame.columns) == COLUMNS
    for name in ("correlation_by_chance", "correlation_by_chance_low", "correlation_by_chance_high", "slope_least_squares_by_chance"):
        assert frame[name].notna().all(), name
    scaled = frame[frame["axes"] == "velocity ustar^-1 against us0 ustar^-1"].iloc[0]
    assert scaled["shared"] == "ustar"
    # Kenney (1982): var ln u* / ((var ln V + var ln u*)(var ln u_s + var ln u*))^(1/2)
    v, u, s = (np.var(np.log(analysis.table.columns[name])) for name in ("velocity", "ustar", "us0"))
    assert scaled["correlation_by_chance_independent"] == pytest.approx(u / np.sqrt((v + u) * (s + u)))
    # stated errors in the predictor: orthogonal distance solves the same problem where the errors of x and y are not correlated
    own = frame[(frame["law"] == "us0") & (frame["exponent"] == "fitted")].iloc[0]
    assert own["slope_orthogonal"] == pytest.approx(own["slope"], rel=1e-5)
    unbalanced = frame[(frame["law"] == "ustar") & (frame["exponent"] == "fitted")].iloc[0]
    assert unbalanced["missing_scale_units"] == "m s-1"


def test_same_seed_same_words(analysis: Analysis) -> None:
    again = analyse(storm(np.random.default_rng(2)), SETTINGS)
    assert to_text(again) == to_text(analysis)
    assert plain(to_json(again)) == plain(to_json(analysis))


def test_scattered_forcing_finds_the_true_law() -> None:
    table = scattered(np.random.default_rng(3), rows=80, us0=0.5, ustar=0.5, scatter=0.15)
    found = analyse(table, ScalingSettings(bootstrap_samples=200, permutations=200))
    # u* La_t^n holds the true law as its case n = -1, so it may stand beside it; the others are separated
    assert found.fixed.standings[0].name == "us0^1/2 ustar^1/2" or found.fixed.inseparable[0] == "ustar la_t^n"
    assert "us0^1/2 ustar^1/2" in found.fixed.inseparable
    assert not {"us0", "ustar"} & set(found.fixed.inseparable)
    assert any('"wstar" left out' in remark for remark in found.remarks)


def test_noise_is_called_chance() -> None:
    table = scattered(np.random.default_rng(12), rows=40, constant=0.03, scatter=0.5)
    found = analyse(table, ScalingSettings(laws=("us0",), bootstrap_samples=200, permutations=400))
    scaled = rows(found).query("shared == 'ustar'").iloc[0]
    assert scaled["correlation"] > 0.3
    assert scaled["verdict"] == "no more than chance"
    assert any("no more than the" in sentence for sentence in statement(found))
