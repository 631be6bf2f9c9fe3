"""The comparison keeps its promises on processes with known answers: coverage, false differences, power."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import norm

from lespost.compare.settings import ComparisonSettings
from lespost.compare.table import compare
from lespost.records.settings import ProcessingSettings
from lespost.statistics.bootstrap import bootstrap_standard_error
from lespost.statistics.samples import effective_samples
from tests.unit.compare.toy_series import (
    autoregressive,
    effective_samples_of_mean,
    effective_samples_of_variance,
    toy,
)

PLAIN = ProcessingSettings(despike="none", detrend="mean")


def settings(**more: object) -> ComparisonSettings:
    return ComparisonSettings(processing=PLAIN, bootstrap_count=200, **more)  # type: ignore[arg-type]


@pytest.mark.parametrize("phi", [0.0, 0.5, 0.9])
def test_effective_samples_of_the_mean(phi: float) -> None:
    x = autoregressive(np.random.default_rng(1), phi, 1, 4000, 200)[0]
    found = effective_samples(x)
    expected = effective_samples_of_mean(phi, 4000)
    assert np.median(found) == pytest.approx(expected, rel=0.1)
    # and gaps of a tenth, at random, take away information but no correlation
    x[np.random.default_rng(2).random(x.shape) < 0.1] = np.nan
    assert np.median(effective_samples(x)) <= 1.05 * expected


def test_effective_samples_are_bounded() -> None:
    trend = np.linspace(0.0, 1.0, 50)[:, None]
    alternating = np.tile([1.0, -1.0], 25)[:, None]
    assert 1.0 <= effective_samples(trend)[0] < 5.0
    assert effective_samples(alternating)[0] == 50.0
    assert effective_samples(np.full((50, 1), np.nan))[0] == 0.0


def test_bootstrap_standard_error_of_a_white_mean() -> None:
    x = np.random.default_rng(3).standard_normal((900, 40))
    found = bootstrap_standard_error(x, 400, np.random.default_rng(4))
    assert found.mean() == pytest.approx(1.0 / 30.0, rel=0.1)  # sigma/sqrt(n), closed form


@pytest.mark.parametrize("deployments", [1, 30])
def test_intervals_cover_the_truth_at_their_nominal_rate(deployments: int) -> None:
    """400 independent trials (as depths): record and model are realisations of one process, n_eff of the variance about 105."""
    rng = np.random.default_rng(11)
    trials, times, phi = 400, 1000, 0.9
    table = compare(
        {"m": toy(rng, "m", phi, deployments, times, trials)},
        {"r": toy(rng, "r", phi, 1, times, trials)},
        settings(quantities=("u_mean", "uu")),
        [],
        rng,
    )
    variance = table[table["quantity"] == "uu"]
    covered = ((variance["ratio_low"] < 1.0) & (variance["ratio_high"] > 1.0)).mean()
    assert 0.92 <= covered <= 0.98
    assert variance["record_neff"].median() == pytest.approx(effective_samples_of_variance(phi, times), rel=0.25)
    mean = table[table["quantity"] == "u_mean"]
    covered = ((mean["difference_low"] < 0.0) & (mean["difference_high"] > 0.0)).mean()
    assert 0.92 <= covered <= 0.985
    # two equal processes: after the correction for 800 tests hardly a row may claim a difference
    assert (table["verdict"] == "differs").sum() <= 4
    # p-values of a true null are uniform: 5 % below 0.05, to three standard errors of 400 trials
    assert abs((variance["p_value"] < 0.05).mean() - 0.05) < 3.3 * np.sqrt(0.05 * 0.95 / trials)


def test_a_variance_difference_of_fifty_percent_is_told_apart_with_the_power_foreseen() -> None:
    phi, times, depths, ratio = 0.5, 1500, 200, 1.5
    effective = effective_samples_of_variance(phi, times)
    # a normal variance has relative error sqrt(2/n_eff); the model's 30 deployments add 1/30 of its square
    error = np.sqrt(2.0 / effective * (1.0 + 1.0 / 30.0))
    power = norm.cdf(np.log(ratio) / error - 1.96)
    assert power > 0.99
    rng = np.random.default_rng(5)
    table = compare(
        {"m": toy(rng, "m", phi, 30, times, depths)},
        {"r": toy(rng, "r", phi, 1, times, depths, np.sqrt(ratio))},
        settings(quantities=("uu",)),
        [],
        rng,
    )
    assert (table["verdict"] == "differs").mean() > 0.97
    assert table["ratio"].median() == pytest.approx(ratio, rel=0.02)


def test_a_difference_of_twenty_percent_is_beyond_chance_in_the_share_foreseen() -> None:
    phi, times, depths, ratio = 0.5, 1500, 300, 1.2
    effective = effective_samples_of_variance(phi, times)
    error = np.sqrt(2.0 / effective * (1.0 + 1.0 / 30.0))
    power = norm.cdf(np.log(ratio) / error - 1.96)  # 0.97, before the small loss to estimated errors
    rng = np.random.default_rng(6)
    table = compare(
        {"m": toy(rng, "m", phi, 30, times, depths)},
        {"r": toy(rng, "r", phi, 1, times, depths, np.sqrt(ratio))},
        settings(quantities=("uu",), equivalence_margin=0.05),
        [],
        rng,
    )
    told = (table["p_value"] < 0.05).mean()
    assert power - 0.08 < told <= 1.0
    assert (table["verdict"] == "differs").mean() > power - 0.1


def test_equality_is_found_where_the_record_is_long_enough_and_not_claimed_otherwise() -> None:
    rng = np.random.default_rng(7)
    long = compare(
        {"m": toy(rng, "m", 0.5, 30, 4000, 100)}, {"r": toy(rng, "r", 0.5, 1, 4000, 100)}, settings(quantities=("uu",)), [], rng
    )
    assert (long["verdict"] == "agrees").mean() > 0.95
    short = compare(
        {"m": toy(rng, "m", 0.5, 30, 100, 100)}, {"r": toy(rng, "r", 0.5, 1, 100, 100)}, settings(quantities=("uu",)), [], rng
    )
    assert (short["verdict"] == "cannot tell").mean() > 0.95
    undecided = short[short["verdict"] == "cannot tell"]
    # a record of 60 independent samples is too short, or by chance looks like white noise between its samples
    assert undecided["note"].str.contains("too short|uncorrelated between samples").all()
    assert undecided["note"].str.contains("h of record would decide").sum() > 50
    # a variance that truly sits on the margin is called equal in at most 5 % of trials (size of two one-sided tests)
    edge = compare(
        {"m": toy(rng, "m", 0.5, 30, 1500, 300)},
        {"r": toy(rng, "r", 0.5, 1, 1500, 300, np.sqrt(1.2))},
        settings(quantities=("uu",)),
        [],
        rng,
    )
    assert (edge["verdict"] == "agrees").mean() < 0.05 + 3.0 * np.sqrt(0.05 * 0.95 / 300)


def test_deployments_in_the_same_water_are_not_counted_as_independent() -> None:
    """Thirty copies of one series carry the information of one: the error of the model's mean must not shrink with them."""
    rng = np.random.default_rng(8)
    one = toy(rng, "m", 0.9, 1, 1000, 50)
    copies = one.isel(deployment=np.zeros(30, int)).assign_coords(deployment=np.arange(30))
    record = toy(rng, "r", 0.9, 1, 1000, 50)
    single = compare({"m": one}, {"r": record}, settings(quantities=("uu",)), [], np.random.default_rng(0))
    many = compare({"m": copies}, {"r": record}, settings(quantities=("uu",)), [], np.random.default_rng(0))
    np.testing.assert_allclose(many["model_se"], single["model_se"], rtol=1e-9)
