"""A table of velocity scale and forcing, one row per window, run or hour, read with its units and checked.

The laws (`laws`) take logarithms of these columns; the fits (`fit`) take their errors. `from_results` makes the same table
from results folders.
"""

from __future__ import annotations

import csv
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path

import numpy as np

from lespost.errors import DataError, RequestError, UnitError
from lespost.units import convert, parse_unit

#: SI unit of each quantity and the powers of (metre, second) in it.
QUANTITIES: dict[str, tuple[str, tuple[float, float]]] = {
    "velocity": ("m s-1", (1.0, -1.0)),
    "ustar": ("m s-1", (1.0, -1.0)),
    "us0": ("m s-1", (1.0, -1.0)),
    "us_sl": ("m s-1", (1.0, -1.0)),
    "h": ("m", (1.0, 0.0)),
    "b0": ("m2 s-3", (2.0, -3.0)),
    "buoyancy_frequency": ("s-1", (0.0, -1.0)),
    "coriolis_parameter": ("s-1", (0.0, -1.0)),
    "wind_speed": ("m s-1", (1.0, -1.0)),
}

#: Names by which tables call the quantities, in lower case.
_ALIASES: dict[str, str] = {
    "v": "velocity", "velocity": "velocity", "velocity_scale": "velocity", "v_rms": "velocity", "w_rms": "velocity", "vrms": "velocity",
    "wrms": "velocity", "ustar": "ustar", "u*": "ustar", "u_star": "ustar", "friction_velocity": "ustar", "us0": "us0", "us": "us0",
    "u_s": "us0", "u_s0": "us0", "stokes": "us0", "surface_stokes_drift": "us0", "stokes_surface_speed": "us0", "us_sl": "us_sl",
    "surface_layer_stokes_drift": "us_sl", "h": "h", "layer_depth": "h", "mixed_layer_depth": "h", "mld": "h", "b0": "b0",
    "buoyancy_flux": "b0", "surface_buoyancy_flux": "b0", "n": "buoyancy_frequency", "buoyancy_frequency": "buoyancy_frequency",
    "f": "coriolis_parameter", "coriolis_parameter": "coriolis_parameter", "u10": "wind_speed", "wind_speed": "wind_speed",
    "time": "time", "t": "time", "date": "time", "datetime": "time",
}


@dataclass(frozen=True)
class ScaleTable:
    """Columns of equal length (row,) in SI units.

    columns: by quantity (keys of `QUANTITIES`, "velocity" among them); missing values are NaN.
    errors: standard errors of some of the columns, same units. time: seconds from the first row, increasing, or None if the
    rows have no order in time (runs of an ensemble). velocity_name: what the velocity is, in the table's words.
    left_out: remarks on columns and rows that were not used.
    """

    columns: Mapping[str, np.ndarray]
    errors: Mapping[str, np.ndarray] = field(default_factory=dict)
    time: np.ndarray | None = None
    velocity_name: str = "velocity"
    left_out: tuple[str, ...] = ()

    def __len__(self) -> int:
        return int(self.columns["velocity"].size) if "velocity" in self.columns else int(next(iter(self.columns.values())).size)

    @property
    def interval(self) -> float:
        """Median time between rows [s]; NaN without a time column."""
        return float(np.median(np.diff(self.time))) if self.time is not None and self.time.size > 1 else float("nan")

    def rows(self, keep: np.ndarray) -> ScaleTable:
        """The same table with the rows `keep` (mask or indices)."""
        return ScaleTable({name: values[keep] for name, values in self.columns.items()},
                          {name: values[keep] for name, values in self.errors.items()},
                          None if self.time is None else self.time[keep], self.velocity_name, self.left_out)


def read_table(path: Path) -> ScaleTable:
    """The comma-separated table `path`: a header of names, units as "ustar (m s-1)" or in a second row, then numbers.

    Errors in a column `X_se` belong to X. Lines that begin with # are skipped; empty cells, "nan" and "-" are missing. Time is an
    ISO date or a number in a unit of time. Rows come out in order of time. Raises RequestError if the file does not exist, DataError
    if it holds no usable table, UnitError for units that are missing or do not convert.
    """
    if not path.is_file():
        raise RequestError(f"{path}: no such table; give a comma-separated file with the columns velocity, ustar and us0 and their units.")
    try:
        text = path.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError:
        raise DataError(f"{path}: not a text file; give a comma-separated table.") from None
    lines = [line for line in text.splitlines() if line.strip() and not line.lstrip().startswith("#")]
    if not lines:
        raise DataError(f"{path}: the table is empty.")
    rows = [[cell.strip() for cell in row] for row in csv.reader(lines, delimiter=_delimiter(lines[0]))]
    header, body = rows[0], rows[1:]
    names, units = zip(*(_name_and_unit(cell) for cell in header), strict=True)
    if body and _is_units_row(body[0], names):
        units = tuple(own or below for own, below in zip(units, _padded(body[0], len(names)), strict=True))
        body = body[1:]
    for number, row in enumerate(body, start=1):
        if len(row) != len(header):
            raise DataError(f"{path}: data row {number} has {len(row)} cells where the header has {len(header)}; mend that row.")
    return _build(path, list(names), list(units), body)


def _delimiter(line: str) -> str:
    return max(",;\t", key=line.count)


def _name_and_unit(cell: str) -> tuple[str, str]:
    match = re.fullmatch(r"(.*?)\s*[\(\[](.*)[\)\]]\s*", cell)
    return (match.group(1).strip(), match.group(2).strip()) if match else (cell.strip(), "")


def _padded(row: Sequence[str], length: int) -> list[str]:
    return [cell.strip("()[] ") for cell in row] + [""] * (length - len(row))


def _is_units_row(row: Sequence[str], names: Sequence[str]) -> bool:
    """Whether no known column but time holds a number and some cell is a unit."""
    some = False
    for name, cell in zip(names, row, strict=False):
        if _quantity(name)[0] in QUANTITIES:
            if _is_number(cell) or _is_missing(cell):
                return False
            try:
                parse_unit(cell.strip("()[] "))
                some = True
            except UnitError:
                return False
    return some


def _is_number(cell: str) -> bool:
    try:
        float(cell)
    except ValueError:
        return False
    return True


def _is_missing(cell: str) -> bool:
    return cell.lower() in ("", "nan", "na", "n/a", "-", "--", "null")


def _quantity(name: str) -> tuple[str, bool]:
    """(quantity or "", whether the column is its standard error)."""
    lower = name.lower().strip()
    if lower.endswith("_se"):
        return _ALIASES.get(lower[:-3], ""), True
    return _ALIASES.get(lower, ""), False


def _build(path: Path, names: list[str], units: list[str], body: list[list[str]]) -> ScaleTable:
    columns: dict[str, np.ndarray] = {}
    errors: dict[str, np.ndarray] = {}
    origin: dict[str, str] = {}
    time: np.ndarray | None = None
    remarks = []
    for index, (name, unit) in enumerate(zip(names, units, strict=True)):
        quantity, is_error = _quantity(name)
        cells = [row[index] for row in body]
        if not quantity:
            remarks.append(f'column "{name}" is not used')
            continue
        key = f"{quantity}{'_se' if is_error else ''}"
        if key in origin:
            raise DataError(f'{path}: columns "{origin[key]}" and "{name}" both name the {quantity}; keep one of them.')
        origin[key] = name
        if quantity == "time":
            time = _clock(path, name, unit, cells)
            continue
        if not unit:
            raise UnitError(f'{path}: column "{name}" has no unit; write it as "{name} ({QUANTITIES[quantity][0]})" '
                            "or in a second row of the header.")
        values = convert(_numbers(path, name, cells), unit, QUANTITIES[quantity][0], f'{path}: column "{name}"')
        (errors if is_error else columns)[quantity] = values
    if "velocity" not in columns:
        raise DataError(f"{path}: no column for the velocity scale (velocity, V, w_rms); found: {', '.join(names)}.")
    for quantity, values in errors.items():
        if quantity not in columns:
            raise DataError(f'{path}: "{origin[quantity + "_se"]}" is the error of a column that is not there.')
        if np.any(values < 0):
            raise DataError(f'{path}: "{origin[quantity + "_se"]}" holds a negative standard error.')
    return checked(ScaleTable(columns, errors, time, origin["velocity"], tuple(remarks)), str(path))


def checked(table: ScaleTable, where: str) -> ScaleTable:
    """`table` in order of time, with at least three rows and no time twice; raises DataError otherwise."""
    if len(table) < 3:
        raise DataError(f"{where}: {len(table)} rows are too few to fit a law; at least 3 are needed, and some tens to tell laws apart.")
    if table.time is None:
        return table
    order = np.argsort(table.time, kind="stable")
    table = table.rows(order)
    assert table.time is not None
    step = np.diff(table.time)
    if np.any(step == 0):
        first = int(np.argmax(step == 0))
        raise DataError(f"{where}: data rows {int(order[first]) + 1} and {int(order[first + 1]) + 1} have the same time "
                        f"({int((step == 0).sum())} such pairs); a row counts once, so remove or average the repeats.")
    return ScaleTable(table.columns, table.errors, table.time - table.time[0], table.velocity_name, table.left_out)


def _numbers(path: Path, name: str, cells: list[str]) -> np.ndarray:
    values = np.full(len(cells), np.nan)
    for row, cell in enumerate(cells):
        if _is_missing(cell):
            continue
        try:
            values[row] = float(cell)
        except ValueError:
            raise DataError(f'{path}: column "{name}", data row {row + 1}: "{cell}" is not a number.') from None
        if not np.isfinite(values[row]) or abs(values[row]) > 1e30:
            raise DataError(f'{path}: column "{name}", data row {row + 1}: {cell} is not a possible value; leave missing cells empty.')
    return values


def _clock(path: Path, name: str, unit: str, cells: list[str]) -> np.ndarray:
    """Seconds from some origin; a missing time is an error because the order of rows depends on it."""
    if any(_is_missing(cell) for cell in cells):
        row = next(i for i, cell in enumerate(cells) if _is_missing(cell))
        raise DataError(f'{path}: column "{name}", data row {row + 1} has no time; fill it or remove the row.')
    if all(_is_number(cell) for cell in cells):
        if not unit:
            raise UnitError(f'{path}: column "{name}" has numbers without a unit; write "{name} (h)" or ISO dates.')
        unit = unit.split(" since ")[0]
        return np.asarray(convert(np.array([float(cell) for cell in cells]), unit, "s", f'{path}: column "{name}"'), float)
    stamps = []
    for row, cell in enumerate(cells):
        try:
            stamp = datetime.fromisoformat(cell)
        except ValueError:
            raise DataError(f'{path}: column "{name}", data row {row + 1}: "{cell}" is neither a number nor an ISO date.') from None
        stamps.append((stamp if stamp.tzinfo else stamp.replace(tzinfo=UTC)).timestamp())
    return np.array(stamps)
