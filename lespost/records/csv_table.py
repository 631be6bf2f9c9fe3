"""Records in text tables: one header row, a second row of units (the layout of data servers), or "name
(unit)" headers.

A table becomes a `RawRecord` of one-dimensional columns; `series.py` folds rows of several depths into time
and depth. Cells that are no number in a column of numbers become gaps and are reported.
"""

from __future__ import annotations

import csv
import re
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from lespost.errors import RecordError
from lespost.findings import Finding
from lespost.records.raw import RawRecord, RawVariable
from lespost.records.roles import ROLES

#: Texts that stand for a missing number.
_MISSING = {"", "nan", "na", "n/a", "null", "none", "-", "--", "inf", "-inf", "+inf", "infinity", "-infinity"}


def _number(text: str) -> float:
    """The number in a cell, NaN where there is none."""
    try:
        value = float(text)
    except ValueError:
        return float("nan")
    return value if abs(value) < 1e30 else float("nan")


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


def _looks_like_time(text: str) -> bool:
    return bool(re.match(r"^\s*\d{4}[-/]\d{1,2}[-/]\d{1,2}", text))


def _delimiter(lines: Sequence[str]) -> str:
    """The separator that cuts the first lines into the same, largest number of cells."""
    best, most = ",", 1
    for candidate in (",", ";", "\t", "|"):
        counts = {len(next(csv.reader([line], delimiter=candidate), [])) for line in lines[:5]}
        if len(counts) == 1 and max(counts) > most:
            best, most = candidate, max(counts)
    return best


def _text_of(path: Path) -> str:
    data = path.read_bytes()
    if b"\x00" in data[:4096]:
        raise RecordError(
            f'{path.name}: holds NUL bytes, so it is no text table; if it is netCDF, write kind = "netcdf".'
        )
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError:
        return data.decode("iso-8859-1")  # the encoding data servers promise for these tables


def _standard_name(column: str) -> str | None:
    """The column's name where it is itself a standard name that this package knows."""
    lower = column.lower()
    known = {name for role in ROLES.values() for name in role.standard_names}
    return lower if lower in known else None


def read_csv(path: Path) -> RawRecord:
    """A text table as a `RawRecord` with the single dimension "row".

    Raises RecordError if there is no header, no data row, or rows of differing length.
    """
    file = path.name
    try:
        text = _text_of(path)
    except OSError as error:
        raise RecordError(f"{file}: cannot be read ({error.strerror}).") from None
    lines = [line for line in text.splitlines() if line.strip() and not line.lstrip().startswith("#")]
    if len(lines) < 2:
        raise RecordError(f"{file}: holds {len(lines)} lines; a table needs a header and at least one row.")
    delimiter = _delimiter(lines)
    try:
        rows = [[cell.strip() for cell in row] for row in csv.reader(lines, delimiter=delimiter)]
    except csv.Error as error:
        raise RecordError(f"{file}: is no table ({error}).") from None
    header, body = rows[0], rows[1:]
    if all(_is_number(c) or _looks_like_time(c) or not c for c in header):
        raise RecordError(
            f"{file}: the first row holds data, not names; add a header row with names and one with units."
        )
    if len(set(header)) != len(header):
        twice = sorted({h for h in header if header.count(h) > 1})
        raise RecordError(f"{file}: column {', '.join(twice)} appears twice in the header; rename one.")
    units: list[str | None] = [None] * len(header)
    layout = "table with one header row"
    if body and _is_unit_row(header, body[0]):
        units, body, layout = list(body[0]), body[1:], "table with names and units in two header rows"
    else:
        named = [re.match(r"^(.*?)\s*[\(\[](.*?)[\)\]]\s*$", h) for h in header]
        if any(named):
            units = [m.group(2) if m else None for m in named]
            header = [m.group(1) if m else h for m, h in zip(named, header, strict=True)]
            layout = 'table with "name (unit)" headers'
    if not body:
        raise RecordError(f"{file}: holds a header but no data.")
    ragged = [i for i, row in enumerate(body) if len(row) != len(header)]
    findings: list[Finding] = []
    if ragged:
        if ragged == [len(body) - 1] and len(body) > 1:
            findings.append(
                Finding(
                    "table-cut-short",
                    "warning",
                    f"{file}: the last row is incomplete and was left out; the file ends early.",
                )
            )
            body = body[:-1]
        else:
            raise RecordError(
                f"{file}: {len(ragged)} of {len(body)} rows do not have the {len(header)} cells of the "
                "header (first: data row "
                f"{ragged[0] + 1}); repair or re-export the table."
            )
    variables: dict[str, RawVariable] = {}
    for i, name in enumerate(header):
        cells = [row[i] for row in body]
        attributes: dict[str, str] = {}
        if units[i]:
            attributes["units"] = str(units[i])
        known = _standard_name(name)
        if known:
            attributes["standard_name"] = known
        variables[name] = _column(file, name, cells, attributes, findings)
    return RawRecord(path, layout, "", {"row": len(body)}, variables, {}, tuple(findings))


def _is_unit_row(header: Sequence[str], row: Sequence[str]) -> bool:
    """Whether the row after the names holds units: no cell is a number or a time, and some cell is filled."""
    if len(row) != len(header) or not any(row):
        return False
    if any(c.upper() == "UTC" or " since " in c for c in row):
        return True
    # "1" is the unit of a ratio, and "NaN" a missing datum: neither decides
    telling = [c for c in row if c and c != "1"]
    return bool(telling) and not any(_is_number(c) or _looks_like_time(c) for c in telling)


def _column(
    file: str, name: str, cells: list[str], attributes: dict[str, str], findings: list[Finding]
) -> RawVariable:
    """One column as numbers where at least half of its filled cells are numbers, else as texts."""
    filled = [c for c in cells if c.lower() not in _MISSING]
    numeric = [c for c in filled if _is_number(c)]
    if filled and len(numeric) * 2 < len(filled):
        values = np.empty(len(cells), dtype=object)
        values[:] = cells
        return RawVariable(name, ("row",), values, attributes, "text")
    stray = [c for c in filled if not _is_number(c)]
    if stray:
        findings.append(
            Finding(
                "cells-not-numbers",
                "warning",
                f'{file}: {len(stray)} cells of column "{name}" are no numbers (first: "{stray[0][:20]}") '
                "and became gaps.",
                float(len(stray)),
            )
        )
    numbers = np.array([_number(c) for c in cells])
    return RawVariable(name, ("row",), numbers, attributes, "text table", int(np.isnan(numbers).sum()))
