"""Straight lines with errors in both variables: Pearson's data with York's weights, and the same problem by another library."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.errors import DataError
from lespost.scaling.line import natural_scatter, orthogonal_distance, reduced_major_axis, york

# Pearson (1901) data with the weights of York (1966), as restated in York et al. (2004)
X = np.array([0.0, 0.9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4])
Y = np.array([5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5])
X_SE = np.array([1000.0, 1000, 500, 800, 200, 80, 60, 20, 1.8, 1]) ** -0.5
Y_SE = np.array([1.0, 1.8, 4, 8, 20, 20, 70, 70, 100, 500]) ** -0.5


def test_pearson_data_with_york_weights() -> None:
    line = york(X, Y, X_SE, Y_SE)
    # measurement sheet of the developers, computed there; York et al. (2004) print -0.4805 and 5.4799
    assert line.slope == pytest.approx(-0.48053341, abs=5e-9)
    assert line.slope_se == pytest.approx(0.05798501, abs=5e-9)
    assert line.intercept == pytest.approx(5.47991022, abs=5e-9)
    assert line.intercept_se == pytest.approx(0.29497074, abs=5e-9)
    assert line.chi_squared == pytest.approx(11.86635, abs=5e-6)


def test_orthogonal_distance_is_the_same_problem() -> None:
    ours, theirs = york(X, Y, X_SE, Y_SE), orthogonal_distance(X, Y, X_SE, Y_SE)
    for name in ("slope", "slope_se", "intercept", "intercept_se", "chi_squared"):
        assert getattr(theirs, name) == pytest.approx(getattr(ours, name), rel=1e-7), name
    held, theirs = york(X, Y, X_SE, Y_SE, slope=-0.5), orthogonal_distance(X, Y, X_SE, Y_SE, slope=-0.5)
    assert theirs.intercept == pytest.approx(held.intercept, rel=1e-7)
    assert theirs.intercept_se == pytest.approx(held.intercept_se, rel=1e-6)
    assert held.chi_squared > ours.chi_squared


def test_exchanging_the_axes_inverts_the_line() -> None:
    # closed form: the best line does not know which axis is called x
    line, exchanged = york(X, Y, X_SE, Y_SE, 0.3), york(Y, X, Y_SE, X_SE, 0.3)
    assert exchanged.slope == pytest.approx(1 / line.slope, rel=1e-9)
    assert exchanged.chi_squared == pytest.approx(line.chi_squared, rel=1e-9)


def test_without_errors_in_x_it_is_weighted_least_squares() -> None:
    line = york(X, Y, 0.0, Y_SE)
    slope, intercept = np.polyfit(X, Y, 1, w=1 / Y_SE)
    assert line.slope == pytest.approx(slope, rel=1e-10)
    assert line.intercept == pytest.approx(intercept, rel=1e-10)


def test_many_data_sets_at_once_equal_one_by_one() -> None:
    rng = np.random.default_rng(1)
    y = Y + 0.1 * rng.standard_normal((5, Y.size))
    many = york(np.broadcast_to(X, y.shape), y, X_SE, Y_SE, -0.2)
    for i in range(5):
        one = york(X, y[i], X_SE, Y_SE, -0.2)
        assert many.slope[i] == pytest.approx(one.slope, rel=1e-9)
        assert many.intercept_se[i] == pytest.approx(one.intercept_se, rel=1e-9)


def test_natural_scatter_makes_the_line_fit() -> None:
    extra = natural_scatter(X, Y, X_SE, Y_SE / 10)
    assert york(X, Y, X_SE, np.hypot(Y_SE / 10, extra)).chi_squared == pytest.approx(X.size - 2, rel=1e-4)
    assert natural_scatter(X, Y, X_SE * 3, Y_SE * 3) == 0.0
    # without stated errors it is the standard error of least squares
    residual = Y - np.polyval(np.polyfit(X, Y, 1), X)
    assert natural_scatter(X, Y, 0.0, 0.0) == pytest.approx(np.sqrt((residual**2).sum() / 8), rel=1e-4)


def test_reduced_major_axis_gives_a_slope_to_noise() -> None:
    rng = np.random.default_rng(2)
    x, y = rng.standard_normal(500), 3 * rng.standard_normal(500)
    assert abs(reduced_major_axis(x, y).slope) == pytest.approx(3.0, rel=0.2)  # closed form: sd(y)/sd(x)
    assert abs(york(x, y, 1e-3, 3.0).slope) < 0.5


def test_a_predictor_that_does_not_vary_is_refused() -> None:
    with pytest.raises(DataError, match="does not vary"):
        york(np.ones(6), np.arange(6.0), 0.1, 0.1)
