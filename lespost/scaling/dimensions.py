"""The scale that a law of unbalanced dimensions hides: its unit, value and interval, and which known scales could be it.

V = C P^n balances only if C carries [V]/[P]^n. V ∝ u*² hides a velocity U with V = u*²/U. The candidates are built from gravity,
layer depth, stratification, rotation and the growth of the stress, and compared with what the fit requires.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from scipy.stats import norm
from scipy.stats import t as student

from lespost.constants import GRAVITY
from lespost.errors import RequestError
from lespost.scaling.fit import Estimate, LawFit, spread
from lespost.scaling.laws import dimensions, unit_text
from lespost.scaling.table import ScaleTable
from lespost.units import convertible, parse_quantity

#: A hidden scale is reported where a power of metre or second is left over by more than this.
BALANCED = 0.02


@dataclass(frozen=True)
class Known:
    """A quantity that might be, or enter, the hidden scale: SI value and powers of (metre, second)."""

    name: str
    value: float
    dimensions: tuple[float, float]


@dataclass(frozen=True)
class Candidate:
    """A known scale of the right unit, and its ratio to the one the fit requires."""

    name: str
    value: float
    units: str
    ratio: float
    inside_interval: bool


@dataclass(frozen=True)
class MissingScale:
    """The scale that `form` needs for its dimensions to balance.

    dimensions: powers of (metre, second); a pure velocity is (1, -1). ambiguous: the exponent of a free fit includes the balanced
    one, so that no scale need be missing.
    """

    form: str
    exponent: float
    dimensions: tuple[float, float]
    units: str
    value: Estimate
    ambiguous: bool
    candidates: tuple[Candidate, ...]


def missing_scale(fit: LawFit, table: ScaleTable, level: float, known: tuple[Known, ...] = (), exponent: float | None = None
                  ) -> MissingScale | None:
    """The hidden scale of `fit`, or None if its dimensions balance.

    exponent: a round exponent of P to be taken as exact (2 for u*²); else that of the fit. The scale X is defined by
    V/B = P^n X^m, with m such that X is a velocity where the unit left over is a power of one, and m = 1 otherwise; the
    interval comes from the bootstrap of slope and intercept together.
    """
    n = fit.slope.value if exponent is None else exponent
    left = _left(fit, n)
    if max(abs(left[0]), abs(left[1])) < BALANCED:
        return None
    power = left[0] if abs(left[0] + left[1]) < 1e-9 and abs(left[0]) > 1e-9 else 1.0
    unit = (left[0] / power, left[1] / power)
    if exponent is None:
        # log X = intercept / m(n): a ratio of two estimates, so its interval is that of the replicates
        powers = np.array([_left(fit, slope)[0] for slope in fit.slopes]) if power != 1.0 else np.ones_like(fit.slopes)
        with np.errstate(divide="ignore", invalid="ignore"):
            logs = fit.intercepts / powers
        centre = fit.intercept.value / power
        logs = logs[np.isfinite(logs)]
        low, high = (float(q) for q in np.quantile(logs, (0.5 - level / 2, 0.5 + level / 2)))
    else:
        # intercepts at the exponent taken as exact, through the middle of the data
        middle = _middle(fit, table)
        centre = (fit.intercept.value + (fit.slope.value - n) * middle) / power
        logs = (fit.intercepts + (fit.slopes - n) * middle) / power
        half = float(norm.ppf(0.5 + level / 2)) * spread(logs)
        low, high = centre - half, centre + half
    # the bootstrap knows nothing of how few the independent rows are (Student's t does), nor of what the error of the intercept was
    # widened by for few rows and serial correlation
    widen = float(student.ppf(0.5 + level / 2, max(fit.neff - 2, 1)) / norm.ppf(0.5 + level / 2))
    widen *= max(fit.intercept.se / max(spread(fit.intercepts), 1e-300), 1.0)
    low, high = centre + (low - centre) * widen, centre + (high - centre) * widen
    # close to balance the scale is no longer known to any power of ten; e^±300 stands for that without overflow
    size, bottom, top = (float(np.exp(np.clip(log, -300, 300))) for log in (centre, low, high))
    value = Estimate(size, size * spread(logs), bottom, top)
    balanced_low, balanced_high = (_left(fit, s) for s in (fit.slope.low, fit.slope.high))
    ambiguous = exponent is None and not fit.fixed and all(
        min(a, b) <= 0 <= max(a, b) for a, b in zip(balanced_low, balanced_high, strict=True))
    units = unit_text(*unit)
    form = f"V = P^{n:.3g} X^{power:.3g}, P = {fit.law.name}, X in {units}"
    scales = tuple(candidates(unit, value, units, (*known, *known_from(table))))
    return MissingScale(form, n, unit, units, value, ambiguous, scales)


def _left(fit: LawFit, exponent: float) -> tuple[float, float]:
    base, predictor = dimensions(fit.law.base), fit.law.dimensions()
    return (1.0 - base[0] - exponent * predictor[0], -1.0 - base[1] - exponent * predictor[1])


def _middle(fit: LawFit, table: ScaleTable) -> float:
    return float(np.mean(fit.law.log_predictor(table)))


def known_from(table: ScaleTable, gravity: float = GRAVITY) -> tuple[Known, ...]:
    """Gravity, and medians of what the table holds: h, N, f, b0, u*, u_s0, wind, and the growth of u*² in time where it grows."""
    out = [Known("g", gravity, (1.0, -2.0))]
    short = {"h": ("h", (1.0, 0.0)), "buoyancy_frequency": ("N", (0.0, -1.0)), "coriolis_parameter": ("f", (0.0, -1.0)),
             "b0": ("b0", (2.0, -3.0)), "wind_speed": ("U10", (1.0, -1.0))}
    for column, (name, unit) in short.items():
        if column in table.columns:
            value = float(np.nanmedian(np.abs(table.columns[column])))
            if np.isfinite(value) and value > 0:
                out.append(Known(name, value, unit))
    if table.time is not None and "ustar" in table.columns and len(table) > 2:
        growth = float(np.polyfit(table.time - table.time.mean(), table.columns["ustar"] ** 2, 1)[0])
        if growth > 0:
            out.append(Known("d(ustar^2)/dt", growth, (2.0, -3.0)))
    return tuple(out)


def known_from_text(text: str) -> Known:
    """A scale given by the user as "name = 12 m s-1" or "name=0.1 m2 s-3". Raises RequestError if it cannot be read."""
    name, _, quantity = text.partition("=")
    for metre in range(-3, 4):
        for second in range(-4, 5):
            unit = unit_text(metre, second)
            words = quantity.split(None, 1)
            if len(words) == 2 and convertible(words[1], unit):
                return Known(name.strip(), parse_quantity(quantity.strip(), unit, f'scale "{text}"'), (float(metre), float(second)))
    raise RequestError(f'scale "{text}": write it as "name = 0.3 m s-1", with a unit made of metres and seconds.')


def candidates(unit: tuple[float, float], required: Estimate, units: str, known: tuple[Known, ...]) -> list[Candidate]:
    """Every known scale of `unit`, alone or as the one product of two that has it, nearest to the required value first."""
    found: dict[str, float] = {}
    for item in known:
        if item.value > 0:
            # alone: only if the units are parallel, as for h to the power of a length
            factor = _parallel(item.dimensions, unit)
            if factor is not None:
                found[_power_text(item.name, factor)] = item.value**factor
    for one, two in combinations([item for item in known if item.value > 0], 2):
        matrix = np.array([one.dimensions, two.dimensions]).T
        if abs(np.linalg.det(matrix)) < 1e-9:
            continue
        a, b = np.linalg.solve(matrix, np.array(unit))
        if min(abs(a), abs(b)) < 1e-9 or max(abs(a), abs(b)) > 3:
            continue
        found[f"{_power_text(one.name, a)} {_power_text(two.name, b)}"] = float(one.value**a * two.value**b)
    made = [Candidate(name, value, units, value / required.value, required.low <= value <= required.high) for name, value in found.items()]
    return sorted(made, key=lambda item: abs(np.log(item.ratio)))


def _parallel(own: tuple[float, float], wanted: tuple[float, float]) -> float | None:
    index = 0 if abs(own[0]) > 1e-9 else 1
    factor = wanted[index] / own[index]
    return factor if abs(factor) > 1e-9 and all(abs(own[i] * factor - wanted[i]) < 1e-9 for i in (0, 1)) else None


def _power_text(name: str, power: float) -> str:
    shown = f"({name})" if " " in name or "^" in name else name
    return name if abs(power - 1) < 1e-9 else f"{shown}^{power:.3g}"


def to_plain(scale: MissingScale, count: int = 8) -> Mapping[str, object]:
    """For JSON: the scale and its nearest `count` candidates."""
    return {
        "form": scale.form, "exponent": scale.exponent, "units": scale.units, "value": scale.value.value, "low": scale.value.low,
        "high": scale.value.high, "may_be_balanced": scale.ambiguous,
        "candidates": [{"name": item.name, "value": item.value, "units": item.units, "ratio_to_required": item.ratio,
                        "inside_interval": item.inside_interval} for item in scale.candidates[:count]],
    }
