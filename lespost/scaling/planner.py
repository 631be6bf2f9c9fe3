"""How long a record must be to tell two laws apart, given how the forcing varies.

If law A holds with natural scatter σ and independent scatter from row to row of duration 2τ, Vuong's z of A against B grows as
n^(1/2) D^(1/2)/(2σ) for small D, the variance of ln P_A that B cannot imitate (`rows_needed` holds for any D). The power asked for
then sets n, and n 2τ the hours.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.stats import norm

from lespost.scaling.fit import LawFit
from lespost.scaling.laws import Law, Powers, combine, log_product
from lespost.scaling.table import ScaleTable


@dataclass(frozen=True)
class Plan:
    """What would separate two laws.

    scatter: natural standard deviation σ of ln V assumed. distinct: standard deviation D^(1/2) of what B cannot imitate of A, over
    this forcing. rows: independent rows needed; hours: of record with forcing like this one (NaN without a time). ratio_low,
    ratio_high: range of `ratio_name` that, evenly covered in logarithm, would separate them with `rows_now` independent rows (NaN
    where the two laws differ by more than one ratio).
    """

    first: str
    second: str
    power: float
    scatter: float
    distinct: float
    rows: float
    hours: float
    rows_now: float
    ratio_name: str
    ratio_low: float
    ratio_high: float


def distinct_part(first: Law, second: Law, table: ScaleTable, free: bool, exponent: float = 1.0) -> np.ndarray:
    """The part of ln(B P^exponent) of `first` (row,) that the second law cannot imitate: its constant is free, its exponent if `free`."""
    b = second.log_predictor(table)
    rest = exponent * first.log_predictor(table) + log_product(first.base, table) - log_product(second.base, table)
    if not (free or second.free):
        rest = rest - b
        return np.asarray(rest - rest.mean())
    b = b - b.mean()
    rest = rest - rest.mean()
    total = float((b * b).sum())
    return np.asarray(rest - b * (b * rest).sum() / total) if total > 0 else rest


def rows_needed(distinct_variance: float, scatter: float, power: float, level: float) -> float:
    """Independent rows for Vuong's test to prefer the true law at `level` (two-sided) with probability `power`; infinite if D = 0.

    The mean difference of log likelihoods is ½ ln(1 + D/σ²) and its variance D/(σ² + D), for normal scatter σ and normal distinct
    part, each law with its own variance (derived here).
    """
    share = distinct_variance / (scatter**2 + distinct_variance)
    if not share > 1e-12:
        return float("inf")
    mean = -0.5 * np.log1p(-share)
    spread = np.sqrt(share)
    return float(((norm.ppf(0.5 + level / 2) + norm.ppf(power)) * spread / mean) ** 2)


def plan(first: Law, second: Law, table: ScaleTable, scatter: float, scatter_time: float, power: float = 0.8, level: float = 0.95,
         free: bool = False, rows_now: float | None = None, exponent: float = 1.0) -> Plan:
    """The rows, hours and range of forcing that separate `first` (taken as true) from `second`.

    table: forcing statistics (its velocity is not used). scatter: σ of ln V about the true law. scatter_time: integral time of that
    scatter [s]; one independent row takes twice that, or the interval of the rows if longer. exponent: that of the first law, where
    it was fitted.
    """
    part = distinct_part(first, second, table, free, exponent)
    rows = rows_needed(float(part.var()), scatter, power, level)
    duration = np.fmax(2 * scatter_time, table.interval)
    now = float(rows_now) if rows_now is not None else float(len(table))
    name, low, high = _range(first, second, table, scatter, power, level, free or first.free, now)
    return Plan(first.name, second.name, power, scatter, float(part.std()), rows, rows * duration / 3600, now, name, low, high)


def _range(first: Law, second: Law, table: ScaleTable, scatter: float, power: float, level: float, free: bool, rows: float
           ) -> tuple[str, float, float]:
    difference: Powers = combine((first.powers, 1.0), (first.base, 1.0), (second.powers, -1.0), (second.base, -1.0))
    nothing = ("", float("nan"), float("nan"))
    if first.curve or second.curve or free or second.free or len(difference) != 2 or abs(sum(difference.values())) > 1e-9:
        return nothing
    top = max(difference, key=lambda name: (name == "us0", difference[name]))
    bottom = next(name for name in difference if name != top)
    high = 1e6
    if rows_needed(high, scatter, power, level) > rows:
        return nothing
    low = 0.0
    for _ in range(80):  # bisection: the rows needed fall with the variance
        middle = 0.5 * (low + high)
        low, high = (middle, high) if rows_needed(middle, scatter, power, level) > rows else (low, middle)
    ratio = np.log(table.columns[top]) - np.log(table.columns[bottom])
    half = np.sqrt(3 * high) / abs(difference[top])  # half width of an even distribution of that variance
    centre = float(ratio.mean())
    if half > 50:
        return nothing
    return f"{top}/{bottom}", float(np.exp(centre - half)), float(np.exp(centre + half))


def scatter_of(fit: LawFit, table: ScaleTable) -> tuple[float, float]:
    """(standard deviation of ln V about the fit, its integral time [s]; NaN without time)."""
    interval = table.interval
    return float(fit.residual.std()), float(len(table) * interval / (2 * fit.neff))
