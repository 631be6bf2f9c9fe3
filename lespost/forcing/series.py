"""Forcing over time from a table (CSV): wind, heat and waves as `Hint`s at the snapshots' times, for `resolve` to take.

The table belongs to the recipe ([forcing].series), so that it wins over what the files state; a key given both in the recipe
and in its table is a contradiction. Values between the table's times are interpolated linearly, directions round the circle.
"""

from __future__ import annotations

import csv
import re
from collections.abc import Mapping
from datetime import UTC, datetime
from pathlib import Path

import numpy as np

from lespost.errors import DataError, LespostError, RecipeError
from lespost.findings import Hint
from lespost.forcing.settings import EXCLUSIVE, ForcingSettings, StokesSettings
from lespost.units import convert

#: Columns that a table may have, with the unit taken where the header names none.
COLUMNS = {
    "friction_velocity": "m s-1", "stress": "N m-2", "wind_speed": "m s-1", "stress_direction": "degree",
    "surface_heat_flux": "W m-2", "surface_temperature_flux": "K m s-1", "stokes_surface_speed": "m s-1",
    "stokes_direction": "degree",
}  # fmt: skip

#: Columns that cannot be negative.
MAGNITUDES = ("friction_velocity", "stress", "wind_speed", "stokes_surface_speed")


def read_series(path: Path, time: np.ndarray, start: str = "") -> dict[str, Hint]:
    """The columns of a table at `time` (nt,) [s of run time], by name.

    path: CSV whose first row names the columns, "time [s]" (or another unit of time) and any of `COLUMNS`, with units in
    brackets; calendar times (ISO 8601, UTC where they name no zone) need `start`, the calendar time of run time zero.
    Raises DataError for a table that cannot be read or does not cover the snapshots.
    """
    names, units, rows = _table(path)
    if "time" not in names:
        raise DataError(f'{path}: no column called "time [s]"; the table has {", ".join(names)}.')
    clock = _clock(path, [row[names.index("time")] for row in rows], units[names.index("time")], start)
    if np.any(np.diff(clock) <= 0):
        raise DataError(f"{path}: times do not increase at row {int(np.argmax(np.diff(clock) <= 0)) + 3}; sort the table.")
    slack = 1e-6 * max(1.0, float(np.abs(clock).max()))
    if time.size and (time.min() < clock[0] - slack or time.max() > clock[-1] + slack):
        raise DataError(
            f"{path}: the table covers run times {clock[0]:g} to {clock[-1]:g} s, the snapshots {time.min():g} to {time.max():g} s; "
            "extend the table to the first and last snapshot."
        )
    found = {}
    for number, (name, unit) in enumerate(zip(names, units, strict=True)):
        if name == "time":
            continue
        if name not in COLUMNS:
            raise DataError(f'{path}: column "{name}" is not known here; use any of {", ".join(COLUMNS)}.')
        where = f'table {path.name}, column "{name}"'
        values = convert(_numbers(path, name, [row[number] for row in rows]), unit or COLUMNS[name], COLUMNS[name], where)
        if name in MAGNITUDES and values.min() < 0:
            raise DataError(f"{where}: {values.min():g} is negative; give the magnitude, and the direction in its own column.")
        found[name] = Hint(_at(time, clock, values, name.endswith("direction")), COLUMNS[name], where, ("time",))
    return found


def with_series(forcing: ForcingSettings, stokes: StokesSettings, hints: Mapping[str, Hint], time: np.ndarray, base: Path
                ) -> tuple[dict[str, Hint], frozenset[str]]:
    """(hints with the recipe's table put first, names that the table states).

    Hints of the files that say the same thing as a column of the table are dropped. Raises RecipeError where recipe and table
    both state a quantity.
    """
    if not forcing.series:
        return dict(hints), frozenset()
    table = read_series(base / forcing.series, time, forcing.series_start)
    given = {name for name in type(forcing).model_fields if getattr(forcing, name) is not None}
    given |= {"stokes_surface_speed"} if stokes.surface_speed is not None or stokes.amplitude is not None else set()
    given |= {"stokes_direction"} if stokes.direction is not None or stokes.waves_from_compass is not None else set()
    kept = dict(hints)
    for name in table:
        rivals = {name}.union(*(group for group in EXCLUSIVE if name in group))
        stated = sorted(rivals & given)
        if stated:
            raise RecipeError(f'[forcing].series = "{forcing.series}" has a column {name}, and the recipe gives {stated[0]}: '
                              "keep one of them.")
        doubled = sorted(rivals & set(table) - {name})
        if doubled:
            raise RecipeError(f'[forcing].series = "{forcing.series}": columns {name} and {doubled[0]} say the same thing; '
                              "keep one of them.")
        for rival in rivals:
            kept.pop(rival, None)
    return {**kept, **table}, frozenset(table)


def _table(path: Path) -> tuple[list[str], list[str], list[list[str]]]:
    """(column names, units, rows of texts)."""
    if not path.is_file():
        raise RecipeError(f"[forcing].series: there is no file {path}; paths are relative to the recipe.")
    try:
        text = path.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError:
        raise DataError(f"{path}: not a text table; save it as CSV.") from None
    rows = [[word.strip() for word in row] for row in csv.reader(text.splitlines()) if any(word.strip() for word in row)]
    if len(rows) < 2:
        raise DataError(f"{path}: a table of forcing needs a row of column names and at least one row of numbers.")
    header, body = rows[0], rows[1:]
    for number, row in enumerate(body, start=2):
        if len(row) != len(header):
            raise DataError(f"{path}, row {number}: {len(row)} values where the header names {len(header)} columns.")
    matches = [re.match(r"\s*([\w ]+?)\s*(?:[\[(]([^\])]*)[\])])?\s*$", word) for word in header]
    names = [match.group(1).lower().replace(" ", "_") if match else word for match, word in zip(matches, header, strict=True)]
    if len(set(names)) < len(names):
        raise DataError(f"{path}: two columns share a name among {', '.join(names)}.")
    return names, [(match.group(2) or "").strip() if match else "" for match in matches], body


def _clock(path: Path, words: list[str], unit: str, start: str) -> np.ndarray:
    """Run times [s]."""
    if not re.match(r"\d{4}-\d{2}", words[0]):
        return np.asarray(convert(_numbers(path, "time", words), unit or "s", "s", f"{path}, time"))
    if not start:
        raise RecipeError(f"{path}: its times are calendar times; write [forcing].series_start, the calendar time at which the "
                          "run begins.")
    try:
        stamps = [_stamp(word) for word in words]
        return np.array(stamps) - _stamp(start)
    except ValueError as error:
        raise DataError(f"{path}: {error}; write times as 2026-01-31T12:00.") from None


def _stamp(word: str) -> float:
    moment = datetime.fromisoformat(word)
    return (moment if moment.tzinfo else moment.replace(tzinfo=UTC)).timestamp()


def _numbers(path: Path, name: str, words: list[str]) -> np.ndarray:
    out = np.empty(len(words))
    for number, word in enumerate(words):
        try:
            out[number] = float(word)
        except ValueError:
            raise DataError(f'{path}, row {number + 2}, column {name}: "{word}" is not a number.') from None
        if not np.isfinite(out[number]):
            raise DataError(f"{path}, row {number + 2}, column {name}: a missing value; leave the row out to interpolate over it.")
    return out


def _at(time: np.ndarray, clock: np.ndarray, values: np.ndarray, circular: bool) -> np.ndarray:
    if not circular:
        return np.interp(time, clock, values)
    east, north = (np.interp(time, clock, part) for part in (np.cos(np.radians(values)), np.sin(np.radians(values))))
    if np.any(np.hypot(east, north) < 1e-9):
        raise LespostError("a direction turns by 180 degrees between two rows of the table; add rows to say which way round.")
    return np.degrees(np.arctan2(north, east))
