"""A law fitted to a table: York's line in logarithms, with intervals from a block bootstrap of the rows.

The line itself is in `line`; what chance alone would give in `self_correlation`; which law fits best in `discrimination`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.stats import t as student

from lespost.scaling.laws import Law, Powers, combine, log_product
from lespost.scaling.line import Line, natural_scatter, york
from lespost.scaling.table import ScaleTable
from lespost.statistics.samples import effective_samples


@dataclass(frozen=True)
class Axes:
    """Logarithms to be plotted against each other, with the powers they are made of and the errors of the rows.

    x, y: (row,), natural logarithms of SI values. x_powers, y_powers: exponents by column. correlation: of the errors of x and y
    of one row, from the columns they share. predicted: name of the published curve whose velocity x is (then x_powers are its local
    exponents), "" for products.
    """

    x: np.ndarray
    y: np.ndarray
    x_powers: Powers
    y_powers: Powers
    x_se: np.ndarray
    y_se: np.ndarray
    correlation: np.ndarray
    predicted: str = ""


@dataclass(frozen=True)
class Estimate:
    """A number with its standard error and interval of `level`."""

    value: float
    se: float
    low: float
    high: float


@dataclass(frozen=True)
class LawFit:
    """ln(V/B) = intercept + slope ln P.

    slope: 1 ± 0 where it was held. coefficient: C, in SI units, at that slope. neff: effective number of rows from the residuals.
    scatter: natural standard deviation of ln V beyond the stated errors. residual: (row,). slopes, intercepts: bootstrap replicates.
    """

    law: Law
    fixed: bool
    slope: Estimate
    intercept: Estimate
    coefficient: Estimate
    neff: float
    block: float
    scatter: float
    chi_squared: float
    residual: np.ndarray
    slopes: np.ndarray
    intercepts: np.ndarray


def law_axes(law: Law, table: ScaleTable, scaled_by: Powers | None = None) -> Axes:
    """ln(V/B/S) against ln(P/S) of `law`; S = `scaled_by`, a product of columns such as u*, none by default."""
    by = scaled_by or {}
    y_powers = combine(({"velocity": 1.0}, 1.0), (law.base, -1.0), (by, -1.0))
    x_powers = combine((law.local_powers(table), 1.0), (by, -1.0))
    scale = log_product(by, table)
    x, y = law.log_predictor(table) - scale, log_product({"velocity": 1.0}, table) - log_product(law.base, table) - scale
    relative = {name: table.errors[name] / table.columns[name] for name in table.errors}
    zero = np.zeros(len(table))
    var_x, var_y, shared = zero.copy(), zero.copy(), zero.copy()
    for name, error in relative.items():
        known = np.where(np.isfinite(error), error, 0.0) ** 2
        a, b = x_powers.get(name, 0.0), y_powers.get(name, 0.0)
        var_x, var_y, shared = var_x + a * a * known, var_y + b * b * known, shared + a * b * known
    x_se, y_se = np.sqrt(var_x), np.sqrt(var_y)
    both = x_se * y_se
    return Axes(x, y, x_powers, y_powers, x_se, y_se, np.divide(shared, both, out=zero, where=both > 0),
                law.name if law.curve else "")


def block_length(series: np.ndarray, ordered: bool) -> float:
    """Mean block length in rows (Politis & White 2004, from `arch`), at most a third of the rows; 1 for rows without order."""
    if not ordered or series.size < 8 or not np.std(series) > 0:
        return 1.0
    from arch.bootstrap import optimal_block_length

    length = float(optimal_block_length(series)["stationary"].iloc[0])
    return min(max(length, 1.0), series.size / 3) if np.isfinite(length) else 1.0


def draw_rows(rows: int, block: float, count: int, rng: np.random.Generator) -> np.ndarray:
    """Indices (count, rows) of the stationary bootstrap (Politis & Romano 1994) with blocks of mean length `block`."""
    if block <= 1.0:
        return rng.integers(0, rows, (count, rows))
    from arch.bootstrap import StationaryBootstrap

    draws = StationaryBootstrap(block, np.arange(rows), seed=rng)  # type: ignore[arg-type]  # fractions are fine
    return np.stack([np.asarray(position[0]) for position, _ in draws.bootstrap(count)])


def widened(axes: Axes, scatter: float) -> tuple[np.ndarray, np.ndarray]:
    """(y_se, correlation) with natural scatter added to the errors of y."""
    wide = np.sqrt(axes.y_se**2 + scatter**2 + 1e-18)
    return wide, axes.correlation * axes.y_se / wide


def fit_law(law: Law, table: ScaleTable, count: int, level: float, rng: np.random.Generator, fixed: bool = False,
            scaled_by: Powers | None = None) -> LawFit:
    """`law` fitted to the rows of `table` (all positive) with errors in both variables and `count` bootstrap replicates.

    fixed: hold the exponent at 1 (not for laws whose exponent is always fitted). scaled_by: divide both axes by this product.
    Intervals of `level` are estimate ± t s.e. with the effective number of rows; the s.e. is the larger of the bootstrap's and
    York's, with the natural scatter in it and widened for serial correlation.
    """
    slope = 1.0 if fixed and not law.free else None
    axes = law_axes(law, table, scaled_by)
    scatter = natural_scatter(axes.x, axes.y, axes.x_se, axes.y_se, axes.correlation, slope)
    y_se, correlation = widened(axes, scatter)
    line = york(axes.x, axes.y, axes.x_se, y_se, correlation, slope)
    residual = axes.y - line.slope * axes.x - line.intercept
    ordered = table.time is not None
    neff = float(effective_samples(residual[:, None])[0]) if ordered else float(residual.size)
    block = max(block_length(residual, ordered), block_length(residual * (axes.x - axes.x.mean()), ordered))
    rows = draw_rows(len(table), block, count, rng)
    many = _replicates(axes, y_se, correlation, rows, slope)
    freedom = max(neff - (1 if slope is not None else 2), 1.0)
    small = np.sqrt(len(table) / max(len(table) - 2, 1))
    quantile = float(student.ppf(0.5 + level / 2, freedom))
    # blocks of a short series reproduce only part of its correlation; the integral scale of the score counts the rest
    repeats = _repeats(residual * (axes.x - axes.x.mean()), ordered), _repeats(residual, ordered)
    slope_se = 0.0 if slope is not None else max(spread(many.slope) * small, float(line.slope_se) * repeats[0])
    intercept_se = max(spread(many.intercept) * small, float(line.intercept_se) * (repeats[0] if slope is None else repeats[1]))

    def estimate(value: float, error: float) -> Estimate:
        return Estimate(value, error, value - quantile * error, value + quantile * error)

    intercept = estimate(float(line.intercept), intercept_se)
    size = float(np.exp(intercept.value))
    coefficient = Estimate(size, size * intercept_se, float(np.exp(intercept.low)), float(np.exp(intercept.high)))
    return LawFit(law, slope is not None, estimate(float(line.slope), slope_se), intercept, coefficient, neff, block, scatter,
                  float(line.chi_squared), residual, np.asarray(many.slope), np.asarray(many.intercept))


def _replicates(axes: Axes, y_se: np.ndarray, correlation: np.ndarray, rows: np.ndarray, slope: float | None) -> Line:
    # replicates that drew one row only cannot be fitted; they are drawn from too few rows to matter, and are left out
    varied = np.ptp(axes.x[rows], axis=1) > 1e-9
    rows = rows[varied | (slope is not None)]
    return york(axes.x[rows], axes.y[rows], axes.x_se[rows], y_se[rows], correlation[rows], slope)


def _repeats(series: np.ndarray, ordered: bool) -> float:
    """By how much serial correlation of `series` widens the standard error of its mean; 1 where its lag-one value is within noise."""
    departure = series - series.mean()
    total = float((departure**2).sum())
    lag_one = float((departure[1:] * departure[:-1]).sum()) / total if total > 0 else 0.0
    if not ordered or lag_one < 1.645 / np.sqrt(series.size):
        return 1.0
    return float(np.sqrt(series.size / effective_samples(series[:, None])[0]))


def spread(replicates: np.ndarray) -> float:
    """Standard deviation by the middle 90 %, so that a few wild replicates of York's line do not rule."""
    low, high = np.nanquantile(replicates, (0.05, 0.95))
    return float((high - low) / 3.2897)
