"""Rows and means: exact distances from the level's first value, averages to centres, levels in two pieces."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.kernels.block import means_and_ranges
from lespost.kernels.rows import (
    ALONG_X,
    ALONG_Y,
    CENTRED,
    count_levels,
    departures,
    departures_between,
    level,
    level_mean,
    wrapped,
)


def mean_of(values: np.ndarray) -> tuple[float, float, float, float]:
    return level_mean(np.ascontiguousarray(values), np.empty((3, values.shape[1])))


@pytest.mark.parametrize("rows", [1, 2, 7, 8])
def test_mean_and_extremes(rows: int) -> None:
    values = np.random.default_rng(0).standard_normal((rows, 9)).astype(np.float32)
    reference, offset, low, high = mean_of(values)
    assert reference == values[0, 0]
    assert reference + offset == pytest.approx(values.mean(dtype=np.float64), abs=1e-15)
    assert (low, high) == (values.min(), values.max())


def test_a_warm_mean_costs_no_digit_of_the_departures() -> None:
    """theta = 288 + a / 2^15: float32 holds it exactly; mean and departures must be those of a alone, to rounding of a."""
    small = np.random.default_rng(1).integers(-400, 400, (64, 64)) / 2.0**15
    warm = (288.0 + small).astype(np.float32)
    np.testing.assert_array_equal(warm.astype(np.float64) - 288.0, small)
    reference, offset, _, _ = mean_of(warm)
    row = np.empty(64)
    departures(warm, 5, CENTRED, reference, offset, row)
    np.testing.assert_allclose(row, small[5] - small.mean(), rtol=0, atol=1e-17)


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
@pytest.mark.parametrize("place", [(0, 0), (2, 3), (4, 1)])
def test_values_that_are_not_finite_are_counted_and_passed_over(bad: float, place: tuple[int, int]) -> None:
    values = np.random.default_rng(3).standard_normal((5, 6))
    values[place] = bad
    assert not np.isfinite(mean_of(values)[1])
    mean, span = np.empty(2), np.empty(3)
    means_and_ranges(values, np.empty((3, 6)), mean, span)
    finite = values[np.isfinite(values)]
    assert np.isnan(mean[1])
    assert span.tolist() == [finite.min(), finite.max(), 1.0]


def test_a_level_without_any_number() -> None:
    mean, span = np.empty(2), np.empty(3)
    means_and_ranges(np.full((3, 4), np.nan), np.empty((3, 4)), mean, span)
    assert np.isnan(span[:2]).all()
    assert span[2] == 12.0


@pytest.mark.parametrize(("arrangement", "axis"), [(ALONG_X, 1), (ALONG_Y, 0)])
def test_low_side_faces_to_centres(arrangement: int, axis: int) -> None:
    rng = np.random.default_rng(2)
    a, b = rng.standard_normal((2, 5, 6)).astype(np.float32)
    wide_a, wide_b = a.astype(float), b.astype(float)
    centre = 0.5 * (wide_a + np.roll(wide_a, -1, axis))
    both = 0.5 * (centre + 0.5 * (wide_b + np.roll(wide_b, -1, axis)))
    row = np.empty(6)
    for j in range(5):
        departures(a, j, arrangement, 0.25, 0.5, row)
        np.testing.assert_allclose(row, centre[j] - 0.75, atol=1e-15)
        departures_between(a, b, j, arrangement, 0.25, 0.125, 0.5, row)
        np.testing.assert_allclose(row, both[j] - 0.5 * (0.25 + 0.125) - 0.5, atol=1e-15)


def test_wrapping() -> None:
    row = np.empty(6)
    wrapped(np.arange(8.0).reshape(2, 4), 1, row)
    np.testing.assert_array_equal(row, [7, 4, 5, 6, 7, 4])


def test_levels_in_two_pieces() -> None:
    whole = np.arange(24.0).reshape(6, 2, 2)
    for cut in (0, 2, 6):
        pieces = whole[:cut], whole[cut:]
        assert count_levels(pieces) == 6
        for k in range(6):
            np.testing.assert_array_equal(level(pieces, k), whole[k])
