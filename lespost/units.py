"""Unit text to SI: one place where a unit string is read, and the only place where values change unit.

UDUNITS (through cf-units) does the arithmetic; this module adds the spellings that files really carry
and turns failures into errors that say where the unit came from and what would be accepted.
"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any

import numpy as np

from lespost.errors import UnitError

if TYPE_CHECKING:
    import cf_units

#: Spellings met in files that UDUNITS does not read, or reads as something else.
SPELLINGS: dict[str, str] = {
    "": "1",
    "-": "1",
    "none": "1",
    "nondimensional": "1",
    "non-dimensional": "1",
    "dimensionless": "1",
    "psu": "1",
    "pss-78": "1",
    "pss": "1",
    "1e-3": "1e-3",
    "deg c": "degC",
    "deg_c": "degC",
    "degrees c": "degC",
    "degrees_c": "degC",
    "degree_c": "degC",
    "celcius": "degC",
    "c": "degC",
    "mps": "m s-1",
    "m/sec": "m s-1",
    "meters/second": "m s-1",
    "meters per second": "m s-1",
    "metres per second": "m s-1",
    "w/m2": "W m-2",
    "w/m^2": "W m-2",
    "n/m2": "N m-2",
    "n/m^2": "N m-2",
    "m2/hz": "m2 s",
    "m^2/hz": "m2 s",
    "m**2/hz": "m2 s",
    "m2 hz-1": "m2 s",
    "deg": "degree",
    "degree_true": "degree",
    "degrees_true": "degree",
    "degrees true": "degree",
    "utc": "1",
}


def parse_unit(text: str, where: str = "unit") -> cf_units.Unit:
    """The unit that `text` names.

    where: what carries the text, for the error message, e.g. 'variable "u" in run.nc'.
    Raises UnitError if the text is not a unit.
    """
    import cf_units

    cleaned = text.strip()
    cleaned = SPELLINGS.get(cleaned.lower(), cleaned)
    cleaned = re.sub(r"\*\*", "^", cleaned)
    try:
        return cf_units.Unit(cleaned)
    except ValueError:
        raise UnitError(
            f'{where}: "{text}" is not a unit; write it as UDUNITS does, for example "m s-1", "degC", "W m-2".'
        ) from None


def convertible(text: str, to: str) -> bool:
    """Whether `text` is a unit that converts to `to`."""
    try:
        conversion(text, to)
    except UnitError:
        return False
    return True


def conversion(text: str, to: str, where: str = "unit") -> tuple[float, float]:
    """(factor, offset) so that value_in_`to` = factor * value_in_`text` + offset; every unit used here is affine.

    Raises UnitError if the units do not convert.
    """
    source, target = parse_unit(text, where), parse_unit(to, where)
    if not source.is_convertible(target):
        raise UnitError(
            f'{where}: unit "{text}" does not convert to "{to}"; correct the unit or name it in the recipe.'
        )
    zero, one = (float(source.convert(x, target)) for x in (0.0, 1.0))
    if not (abs(zero) < float("inf") and abs(one) < float("inf")):
        # UDUNITS also converts between a unit and its reciprocal (m s-1 and s m-1), which no file means
        raise UnitError(f'{where}: unit "{text}" is the reciprocal of "{to}"; correct the unit or name it in the recipe.')
    return one - zero, zero


def convert(values: Any, text: str, to: str, where: str = "unit") -> Any:
    """`values` (scalar or array) from unit `text` to unit `to`, in float64 for scalars and integers.

    float32 arrays stay float32. Raises UnitError if the units do not convert.
    """
    factor, offset = conversion(text, to, where)
    if np.isscalar(values):
        return float(values) * factor + offset  # type: ignore[arg-type]
    array = np.asarray(values)
    dtype = array.dtype if array.dtype.kind == "f" else np.dtype(np.float64)
    if factor == 1.0 and offset == 0.0:
        return array.astype(dtype, copy=False)
    return (array * dtype.type(factor) + dtype.type(offset)).astype(dtype, copy=False)


_QUANTITY = re.compile(r"^\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*(.*)$")


def parse_quantity(value: Any, to: str, where: str = "value") -> float:
    """A number in unit `to` from a plain number (already in `to`) or a text such as "12 h" or "0.1 N m-2".

    Raises UnitError if the text holds no number or a unit that does not convert.
    """
    if isinstance(value, bool) or not isinstance(value, int | float | str):
        raise UnitError(f'{where}: expected a number or a text such as "3 {to}", got {value!r}.')
    if not isinstance(value, str):
        return float(value)
    match = _QUANTITY.match(value)
    if match is None:
        raise UnitError(f'{where}: expected a number or a text such as "3 {to}", got "{value}".')
    unit = match.group(2).strip() or to
    return float(convert(float(match.group(1)), unit, to, where))
