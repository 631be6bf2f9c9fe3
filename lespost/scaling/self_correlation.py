"""What chance alone gives for a pair of scaled axes: axes that share a column are correlated whatever the water does.

Closed form: with ln y = Σ a_k ln X_k and ln x = Σ b_k ln X_k and covariance S of the logarithms, r = a'Sb / (a'Sa b'Sb)^(1/2)
(derived here; for Y/Z against X/Z it is that of Kenney 1982, and 1/2 for equal variances). The null hypothesis is that the velocity
knows nothing of the forcing: its covariances are set to zero. Permutation of the velocities among the rows gives its spread.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from lespost.scaling.laws import Powers
from lespost.scaling.table import ScaleTable

Null = Literal["velocity", "all"]
_NULLS: tuple[Null, Null] = ("velocity", "all")


@dataclass(frozen=True)
class ByChance:
    """Correlation and slopes (least squares, reduced major axis) that chance alone gives."""

    correlation: float
    slope: float
    reduced_major_axis: float


@dataclass(frozen=True)
class Guard:
    """An observed correlation and slope beside their by-chance twins.

    chance: the velocity independent of the forcing, which keeps its own correlations; independent: every column independent of the
    others (Kenney 1982). low, high: the middle `level` of the permutations. p_value: for two sides, twice the share of permutations at
    least as far out on the side of the data (with the +1 of Davison & Hinkley 1997). beats_chance: p_value below 1 - level. run: rows
    moved together by the permutations.
    """

    correlation: float
    slope: float
    chance: ByChance
    independent: ByChance
    correlation_low: float
    correlation_high: float
    slope_low: float
    slope_high: float
    p_value: float
    beats_chance: bool
    shared: tuple[str, ...]
    null_correlations: np.ndarray
    null_slopes: np.ndarray
    run: float


def by_chance(y_powers: Powers, x_powers: Powers, names: Sequence[str], covariance: np.ndarray, null: Null = "velocity",
              velocity: str = "velocity") -> ByChance:
    """Closed form from the exponents and the `covariance` (name, name) of the natural logarithms.

    null: "velocity" keeps the covariances among the forcing as observed and takes those of the velocity away; "all" takes all
    covariances away, as if every column were independent of the rest.
    """
    matrix = np.array(covariance, float)
    if null == "all":
        matrix = np.diag(np.diag(matrix))
    elif velocity in names:
        at = list(names).index(velocity)
        kept = matrix[at, at]
        matrix[at, :], matrix[:, at] = 0.0, 0.0
        matrix[at, at] = kept
    a, b = (np.array([powers.get(name, 0.0) for name in names]) for powers in (y_powers, x_powers))
    cross, var_y, var_x = a @ matrix @ b, a @ matrix @ a, b @ matrix @ b
    if not (var_y > 0 and var_x > 0):
        return ByChance(float("nan"), float("nan"), float("nan"))
    r = cross / np.sqrt(var_y * var_x)
    sign = np.sign(r) if abs(r) > 1e-12 else 0.0
    return ByChance(float(r), float(cross / var_x), float(sign * np.sqrt(var_y / var_x)))


def log_covariance(table: ScaleTable, names: Sequence[str]) -> np.ndarray:
    """Covariance (name, name) of the natural logarithms of columns."""
    return np.atleast_2d(np.cov(np.stack([np.log(table.columns[name]) for name in names]), ddof=1))


def guard(x: np.ndarray, y: np.ndarray, x_powers: Powers, y_powers: Powers, table: ScaleTable, run: float, count: int, level: float,
          rng: np.random.Generator) -> Guard:
    """Observed x, y (row,) of one pair of axes against both nulls.

    run: number of rows that are moved together, so that serial correlation stays in the permuted velocities (`run_length`).
    """
    names = tuple(dict.fromkeys(["velocity", *x_powers, *y_powers]))
    covariance = log_covariance(table, names)
    chance, independent = (by_chance(y_powers, x_powers, names, covariance, null) for null in _NULLS)
    velocity = np.log(table.columns["velocity"])
    shuffled = velocity[permuted_blocks(velocity.size, run, count, rng)]
    difference = shuffled - velocity
    r, slope = correlation_and_slope(x, y)
    null_r, null_slope = correlation_and_slope(x + x_powers.get("velocity", 0.0) * difference,
                                               y + y_powers.get("velocity", 0.0) * difference)
    centre = float(np.median(null_r))
    beyond = null_r >= r if r >= centre else null_r <= r
    p_value = min(1.0, 2 * float(beyond.sum() + 1) / (count + 1))
    tail = (1 - level) / 2
    low, high = np.quantile(null_r, (tail, 1 - tail))
    slope_low, slope_high = np.quantile(null_slope, (tail, 1 - tail))
    shared = tuple(name for name in x_powers if name in y_powers)
    return Guard(float(r), float(slope), chance, independent, float(low), float(high), float(slope_low), float(slope_high), p_value,
                 p_value < 1 - level, shared, null_r, null_slope, run)


def correlation_and_slope(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Correlation and least-squares slope of y on x along the last axis."""
    u, v = x - x.mean(-1, keepdims=True), y - y.mean(-1, keepdims=True)
    cross, xx, yy = (u * v).sum(-1), (u * u).sum(-1), (v * v).sum(-1)
    with np.errstate(invalid="ignore", divide="ignore"):
        return cross / np.sqrt(xx * yy), cross / xx


def run_length(block: float) -> float:
    """Rows to be moved together, from the longest bootstrap block of the velocity and of the law's residual.

    Twice the block, because every cut loses the correlation across it: with lag-one correlations of 0.6 and 0.85 and 40 or 120 rows,
    runs of one block let chance pass as a law in 8 to 10 % of tables, and of two in 5 to 6 % (measured, level 95 %).
    """
    return 2 * block if block > 1.5 else 1.0


def permuted_blocks(rows: int, run: float, count: int, rng: np.random.Generator) -> np.ndarray:
    """Row numbers (count, rows): the series cut at a random place into runs of `run` rows, and the runs shuffled.

    Runs are no longer than a fifth of the rows, since a few long runs leave nothing to shuffle.
    """
    length = int(np.clip(round(run), 1, max(rows // 5, 1)))
    if length == 1:
        return rng.permuted(np.tile(np.arange(rows), (count, 1)), axis=1)
    out = np.empty((count, rows), int)
    for i in range(count):
        rolled = np.roll(np.arange(rows), int(rng.integers(rows)))
        pieces = [rolled[start:start + length] for start in range(0, rows, length)]
        out[i] = np.concatenate([pieces[k] for k in rng.permutation(len(pieces))])
    return out
