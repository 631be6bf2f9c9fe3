"""Velocity laws: products of powers of the forcing (with their dimensions), and published curves.

A law says V = C B P^n: a base B (often none), a predictor P, and an exponent n that is 1 unless it is fitted. Everything is kept
as powers of measured columns (La_t becomes u*^(1/2) u_s0^(-1/2), w* becomes b0^(1/3) h^(1/3)), so that what two axes share can be
read off. The fits are in `fit`, the by-chance twins in `self_correlation`.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np

from lespost.errors import DataError, RequestError
from lespost.forcing.langmuir import enhancement_van_roekel_2012, vertical_variance_harcourt_dasaro_2008
from lespost.scaling.table import QUANTITIES, ScaleTable

Powers = Mapping[str, float]

#: Symbols made of others.
DERIVED: dict[str, dict[str, float]] = {
    "la_t": {"ustar": 0.5, "us0": -0.5},
    "la_sl": {"ustar": 0.5, "us_sl": -0.5},
    "wstar": {"b0": 1 / 3, "h": 1 / 3},
    "wstar_l": {"ustar": 2 / 3, "us0": 1 / 3},
}

_SPELLINGS = {
    "us": "us0", "u_s": "us0", "u_s0": "us0", "u*": "ustar", "u_star": "ustar", "friction_velocity": "ustar", "w*": "wstar", "la": "la_t",
    "v": "velocity", "n": "buoyancy_frequency", "f": "coriolis_parameter", "u10": "wind_speed",
}


@dataclass(frozen=True)
class Law:
    """V = C B P^n.

    base, powers: B and P as powers of table columns. free: whether n is always fitted (as in u* La_t^n); otherwise it is 1.
    curve: for published laws that are no product, ln of the predicted V [ln m s-1] from the columns; `powers` then lists the columns
    it needs, and the local exponents are found by differences. source: author and year, or "common practice".
    """

    name: str
    powers: Powers
    base: Powers = field(default_factory=dict)
    free: bool = False
    source: str = ""
    curve: Callable[[Mapping[str, np.ndarray]], np.ndarray] | None = None

    @property
    def needs(self) -> tuple[str, ...]:
        """Columns that must be positive."""
        return tuple(dict.fromkeys([*self.base, *self.powers]))

    def dimensions(self) -> tuple[float, float]:
        """Powers of (metre, second) of P."""
        return (1.0, -1.0) if self.curve else dimensions(self.powers)

    def log_predictor(self, table: ScaleTable) -> np.ndarray:
        """ln P (row,) in SI units."""
        return self.curve(table.columns) if self.curve else log_product(self.powers, table)

    def local_powers(self, table: ScaleTable) -> Powers:
        """Exponents of P: those of the product, or of a curve at the geometric mean of the table."""
        if self.curve is None:
            return self.powers
        centre = {name: np.exp(np.nanmean(np.log(table.columns[name]), keepdims=True)) for name in self.powers}
        step, out = 1e-4, {}
        for name in self.powers:
            high, low = ({**centre, name: centre[name] * np.exp(sign * step)} for sign in (1, -1))
            out[name] = float((self.curve(high) - self.curve(low))[0] / (2 * step))
        return out


def dimensions(powers: Powers) -> tuple[float, float]:
    """Powers of (metre, second) of a product."""
    return (sum(QUANTITIES[name][1][0] * power for name, power in powers.items()),
            sum(QUANTITIES[name][1][1] * power for name, power in powers.items()))


def unit_text(metre: float, second: float) -> str:
    """A unit such as "m s-1" or "m0.5 s-0.25"; "1" for none."""
    parts = []
    for symbol, power in (("m", metre), ("s", second)):
        if abs(power) > 1e-9:
            parts.append(symbol if abs(power - 1) < 1e-9 else f"{symbol}{power:.4g}")
    return " ".join(parts) or "1"


def log_product(powers: Powers, table: ScaleTable) -> np.ndarray:
    """ln of a product (row,), NaN where a column is missing."""
    total = np.zeros(len(table))
    for name, power in powers.items():
        total = total + power * np.log(table.columns[name])
    return total


def product_text(powers: Powers) -> str:
    """A product in words, "us0^0.5 ustar^0.5"."""
    parts = (name if abs(power - 1) < 1e-12 else f"{name}^{power:.4g}" for name, power in powers.items() if abs(power) > 1e-12)
    return " ".join(parts) or "1"


def combine(*parts: tuple[Powers, float]) -> dict[str, float]:
    """The product of powers^factor over the parts, zero powers left out."""
    out: dict[str, float] = {}
    for powers, factor in parts:
        for name, power in powers.items():
            out[name] = out.get(name, 0.0) + factor * power
    return {name: power for name, power in out.items() if abs(power) > 1e-12}


_FACTOR = re.compile(r"([A-Za-z_][A-Za-z_0-9]*\*?)(?:(?:\^|\*\*)\(?([-+]?[0-9.]+(?:/[0-9.]+)?|n)\)?)?$")


def parse_law(text: str) -> Law:
    """A law from "us0^0.5 ustar^0.5", "ustar la_t^n" (n fitted) or the name of a built-in law.

    Raises RequestError for symbols and exponents that cannot be read.
    """
    if text.strip() in BUILT_IN:
        return BUILT_IN[text.strip()]
    fixed: dict[str, float] = {}
    free: dict[str, float] = {}
    for word in text.split():
        match = _FACTOR.match(word)
        if match is None:
            raise RequestError(f'law "{text}": cannot read "{word}"; write products of powers such as "us0^0.5 ustar^0.5", '
                               f'or one of {", ".join(BUILT_IN)}.')
        symbol = match.group(1).lower()
        symbol = _SPELLINGS.get(symbol, symbol)
        if symbol not in QUANTITIES and symbol not in DERIVED:
            raise RequestError(f'law "{text}": "{match.group(1)}" is not a quantity of a table; known are '
                               f'{", ".join([*QUANTITIES, *DERIVED])}.')
        if symbol == "velocity":
            raise RequestError(f'law "{text}": the velocity is what a law explains; leave it out of the right-hand side.')
        primitive = DERIVED.get(symbol, {symbol: 1.0})
        if match.group(2) == "n":
            if free:
                raise RequestError(f'law "{text}": only one exponent n can be fitted.')
            free = dict(primitive)
        else:
            fixed = combine((fixed, 1.0), (primitive, _exponent(match.group(2) or "1", text)))
    if free:
        return Law(text.strip(), free, fixed, True, "given by the user")
    if not fixed:
        raise RequestError(f'law "{text}": all exponents cancel; a law needs something to depend on.')
    return Law(text.strip(), fixed, source="given by the user")


def _exponent(text: str, law: str) -> float:
    top, _, bottom = text.partition("/")
    try:
        value = float(top) / (float(bottom) if bottom else 1.0)
    except (ValueError, ZeroDivisionError):
        raise RequestError(f'law "{law}": "{text}" is not an exponent.') from None
    return value


def usable(law: Law, table: ScaleTable) -> str:
    """Why `law` cannot be tested with `table`; "" if it can."""
    missing = [name for name in law.needs if name not in table.columns]
    return f"needs {', '.join(missing)}" if missing else ""


def require_positive(table: ScaleTable, names: tuple[str, ...], allow_dropping: bool) -> ScaleTable:
    """The rows in which velocity and `names` are known; zeros and negatives have no logarithm.

    allow_dropping: leave such rows out and say so, instead of raising DataError. Missing cells are always left out and said; missing
    errors take the median relative error of their column.
    """
    keep = np.ones(len(table), bool)
    remarks = list(table.left_out)
    for name in ("velocity", *names):
        values = table.columns[name]
        bad = values <= 0
        if bad.any():
            row = int(np.argmax(bad)) + 1
            if not allow_dropping:
                order = " in order of time" if table.time is not None else ""
                raise DataError(f"column {name}: {int(bad.sum())} values are zero or negative (first: row {row}{order}, "
                                f"{values[row - 1]:g}); a law of powers needs logarithms. Remove the rows, or use --drop-nonpositive.")
            remarks.append(f"{int(bad.sum())} rows left out: {name} is zero or negative")
        lost = ~np.isfinite(values)
        if lost.any():
            remarks.append(f"{int(lost.sum())} rows left out: {name} is missing")
        keep &= ~bad & ~lost
    out = table.rows(keep)
    if keep.sum() < 3:
        raise DataError(f"only {int(keep.sum())} rows have all of velocity, {', '.join(names)}; at least 3 are needed.")
    errors = {}
    for name, values in out.errors.items():
        known = np.isfinite(values)
        if name in ("velocity", *names) and known.any() and not known.all():
            # an unknown error is not a zero error, which would give the row the most weight of all
            usual = float(np.median(values[known] / out.columns[name][known]))
            values = np.where(known, values, usual * out.columns[name])
            remarks.append(f"{int((~known).sum())} rows have no error of {name}: the usual one, {100 * usual:.1f} %, is taken")
        errors[name] = values
    return ScaleTable(out.columns, errors, out.time, out.velocity_name, tuple(dict.fromkeys(remarks)))


def _van_roekel(columns: Mapping[str, np.ndarray]) -> np.ndarray:
    la = np.sqrt(columns["ustar"] / columns["us0"])
    return np.log(columns["ustar"]) + 0.5 * np.log(0.6) + np.log(enhancement_van_roekel_2012(la))


def _harcourt_dasaro(columns: Mapping[str, np.ndarray]) -> np.ndarray:
    la = np.sqrt(columns["ustar"] / columns["us_sl"])
    return np.log(columns["ustar"]) + 0.5 * np.log(vertical_variance_harcourt_dasaro_2008(la))


_WAVES = {"us0": 1.0}
_WIND = {"ustar": 1.0}

#: Laws tried unless others are asked for.
BUILT_IN: dict[str, Law] = {law.name: law for law in (
    Law("us0", _WAVES, source="common practice"),
    Law("ustar", _WIND, source="common practice"),
    Law("ustar^2/3 us0^1/3", {"us0": 1 / 3, "ustar": 2 / 3}, source="w*_L (Grant & Belcher 2009)"),
    Law("us0^1/2 ustar^1/2", {"us0": 0.5, "ustar": 0.5}, source="common practice"),
    Law("ustar la_t^n", DERIVED["la_t"], _WIND, True, "common practice, n fitted"),
    Law("wstar", DERIVED["wstar"], source="free convection (Deardorff 1970)"),
    Law("w_rms van_roekel_2012", {"ustar": 1.0, "us0": 1.0}, source="Van Roekel et al. 2012, aligned wind and waves", curve=_van_roekel),
    Law("w_rms harcourt_dasaro_2008", {"ustar": 1.0, "us_sl": 1.0}, source="Harcourt & D'Asaro 2008", curve=_harcourt_dasaro),
)}
