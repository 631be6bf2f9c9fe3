"""Random fields have the statistics they were asked for."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from toy_fields.closed_form.layout import ARRANGEMENTS, Arrangement, divergence
from toy_fields.errors import ToyRequestError
from toy_fields.random_fields import RandomField, RandomPlan, energy_spectrum
from toy_fields.solver.grid import Grid

GRID = Grid(nx=64, ny=48, nz=12, length_x=320.0, length_y=240.0, depth=30.0)
PLAN = RandomPlan(GRID, variance_along=3e-5, variance_across=6e-5, variance_vertical=5e-5, spacing=40.0, seed=4)


def column_variances(fields: dict[str, np.ndarray], axis: float) -> tuple[float, float, float]:
    """Along, across, vertical; w on faces: its sum over faces per cell."""
    c, s = np.cos(np.deg2rad(axis)), np.sin(np.deg2rad(axis))
    along, across = c * fields["u"] + s * fields["v"], -s * fields["u"] + c * fields["v"]
    return float(np.mean(along**2)), float(np.mean(across**2)), float(np.sum(fields["w"] ** 2) / across.size)


@pytest.mark.parametrize("axis", [0.0, 30.0, -60.0])
def test_variances_are_exact_in_every_snapshot(axis: float) -> None:
    field = RandomField(replace(PLAN, axis=axis))
    for time in (0.0, 300.0):
        assert column_variances(field.draw(time), axis) == pytest.approx((3e-5, 6e-5, 5e-5), rel=1e-9)


def test_variances_in_the_ensemble_mean() -> None:
    field = RandomField(replace(PLAN, exact=False))
    assert field.expected_variances() == pytest.approx((3e-5, 6e-5, 5e-5), rel=1e-12)
    draws = np.array([column_variances(field.draw(6000.0 * n), 0.0) for n in range(60)])
    error = draws.std(axis=0, ddof=1) / np.sqrt(60)
    assert np.all(error < 0.05 * draws.mean(axis=0))
    assert np.all(np.abs(draws.mean(axis=0) - [3e-5, 6e-5, 5e-5]) < 3.5 * error)


@pytest.mark.parametrize("arrangement", ARRANGEMENTS)
def test_free_of_divergence(arrangement: Arrangement) -> None:
    fields = RandomField(replace(PLAN, arrangement=arrangement, axis=20.0)).snapshots((0.0,))
    scale = np.abs(np.diff(fields["w"].values, axis=1)).max() / GRID.dz
    assert np.abs(divergence(fields)).max() < 1e-12 * scale
    assert fields["w"].values.std() > 1e-3


def test_memory() -> None:
    # every mode is an Ornstein-Uhlenbeck process: correlation exp(-lag / T) between snapshots
    field = RandomField(replace(PLAN, integral_time=500.0))
    lags = (0.0, 100.0, 500.0, 1000.0)
    correlations = np.empty((40, 3))
    for n in range(40):
        start = 1e5 * n
        first = field.draw(start)["w"]
        for m, lag in enumerate(lags[1:]):
            later = field.draw(start + lag)["w"]
            correlations[n, m] = np.mean(first * later) / np.sqrt(np.mean(first**2) * np.mean(later**2))
    expected = [field.expected_correlation(lag) for lag in lags[1:]]
    assert expected == pytest.approx(np.exp([-0.2, -1.0, -2.0]))
    assert correlations.mean(axis=0) == pytest.approx(expected, abs=3.5 * correlations.std() / np.sqrt(40) + 0.01)


def spectrum_over_waves(values: np.ndarray, axis: int) -> np.ndarray:
    return np.abs(np.fft.rfft(values, axis=axis)) ** 2


@pytest.mark.parametrize(("axis", "along", "across"), [(0.0, 2, 1), (90.0, 1, 2)])
def test_cells_lie_along_their_axis(axis: float, along: int, across: int) -> None:
    field = RandomField(replace(PLAN, axis=axis, alignment=6.0, spacing=40.0, variance_along=8e-5, variance_across=9e-5))
    w = np.stack([field.draw(1e5 * n)["w"][6] for n in range(20)])
    spectrum = spectrum_over_waves(w, across).mean(axis=(0, along))
    length = GRID.length_y if across == 1 else GRID.length_x
    peak = length / int(np.argmax(spectrum[1:]) + 1)
    assert peak == pytest.approx(40.0, rel=0.2)
    gradients = [np.mean((np.roll(w, 1, a) - w) ** 2) for a in (along, across)]
    assert gradients[0] < 0.6 * gradients[1]


def test_spectrum_has_its_peak_and_slope() -> None:
    k0 = 2 * np.pi / 40.0
    assert energy_spectrum(PLAN, np.array([0.0, 0.5 * k0, k0, 8 * k0])) == pytest.approx([0, 0.5**4, 1, 8 ** (-5 / 3)])
    # the modes' own energy: isotropic cells, ring means of |w|² times k
    field = RandomField(replace(PLAN, alignment=0.0, exact=False, variance_along=8e-5, variance_across=8e-5))
    power = np.mean([np.abs(np.fft.fft2(field.draw(1e5 * n)["w"][6])) ** 2 for n in range(60)], axis=0)
    k = np.hypot(2 * np.pi * np.fft.fftfreq(64, 5.0)[None, :], 2 * np.pi * np.fft.fftfreq(48, 5.0)[:, None])
    rings = [(k > low * k0) & (k < 1.1 * low * k0) for low in (1.1, 2.2)]
    energies = [np.mean(power[ring] * k[ring]) for ring in rings]
    assert energies[1] / energies[0] == pytest.approx(2 ** (-5 / 3), rel=0.2)


def test_streaks_are_lognormal_over_convergence() -> None:
    plan = replace(PLAN, tracer=0.7, tracer_correlation=0.8, tracer_depth=4.0)
    fields = RandomField(plan).snapshots((0.0,))
    tracer = fields["tracer_streaks"].values[0]
    log = np.log(tracer[-1]) - GRID.z[-1] / 4.0
    # log-mean -s²/2 and log-deviation s by construction
    assert log.mean() == pytest.approx(-0.5 * 0.49, abs=1e-12) and log.std() == pytest.approx(0.7, rel=1e-12)
    assert tracer[-2] / tracer[-1] == pytest.approx(np.full(log.shape, np.exp(-GRID.dz / 4.0)))
    sinking = -fields["w"].values[0, -2]
    assert np.corrcoef(log.ravel(), sinking.ravel())[0, 1] == pytest.approx(0.8, abs=0.05)


def test_same_seed_same_numbers() -> None:
    first, second, other = (RandomField(p).draw(0.0)["u"] for p in (PLAN, PLAN, replace(PLAN, seed=5)))
    assert np.array_equal(first, second) and not np.array_equal(first, other)


def test_truth_is_in_the_attributes() -> None:
    fields = RandomField(PLAN).snapshots((0.0, 60.0), "float32")
    assert fields.attrs["true_spacing"] == 40.0 and fields.attrs["true_variance_across"] == 6e-5
    assert fields["u"].dtype == np.float32 and fields["u"].dims == ("time", "z", "y", "x")


def test_impossible_requests() -> None:
    with pytest.raises(ToyRequestError, match="by continuity alone"):
        RandomField(replace(PLAN, variance_across=1e-6, spacing=120.0))
    with pytest.raises(ToyRequestError, match="spacing"):
        replace(PLAN, spacing=5.0)
    with pytest.raises(ToyRequestError, match="variances"):
        replace(PLAN, variance_vertical=0.0)
    field = RandomField(PLAN)
    field.draw(100.0)
    with pytest.raises(ToyRequestError, match="rising times"):
        field.draw(50.0)
