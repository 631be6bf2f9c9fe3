"""Times of the snapshots: file numbers to seconds of run time, with overlaps, disorder and lost precision refused.

The conversion is done here and not by a general decoder, so that it never depends on a library's version.
"""

from __future__ import annotations

import itertools
import math
import re
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

import cftime
import numpy as np

from lespost.errors import DataError, LayoutError, UnitError
from lespost.fields.settings import FieldsSettings
from lespost.findings import Decision, Finding
from lespost.units import conversion

_SINCE = re.compile(r"^\s*(\S+)\s+since\s+(.+?)\s*$", re.IGNORECASE)
_INERTIAL = re.compile(r"^\s*inertial[ _-]?periods?\s*$", re.IGNORECASE)
YEAR = 365.0 * 86400.0


@dataclass(frozen=True)
class Clock:
    """How file times become run time: seconds = factor * number + shift. origin: ISO text of run time zero, or ""."""

    factor: float
    shift: float
    origin: str
    decision: Decision
    findings: tuple[Finding, ...] = ()

    def seconds(self, numbers: np.ndarray) -> np.ndarray:
        """Run time in s, float64."""
        return np.asarray(numbers, np.float64) * self.factor + self.shift


def clock(
    unit: str | None, calendar: str | None, first: float, settings: FieldsSettings, coriolis: float | None, where: str
) -> Clock:
    """The clock of a time variable with unit text `unit`.

    first: its first number (for [fields].time_origin). coriolis: needed for times in inertial periods [s-1].
    Raises UnitError for a unit that is no time, LayoutError where one must be declared.
    """
    declared = settings.time_unit or settings.units.get("time", "")
    text = declared or (unit or "").strip()
    how: Literal["recipe", "metadata", "default"] = "recipe" if declared else "metadata"
    if _INERTIAL.match(text):
        if not coriolis:
            raise LayoutError(
                f"{where}: times in inertial periods need the Coriolis parameter, which the files do not state; write "
                '[fields].time_unit = "<seconds> s" with the length of the period.'
            )
        period = 2.0 * math.pi / abs(coriolis)
        return Clock(period, 0.0, "", Decision("time", f"inertial periods of {period:.6g} s", how, text))
    if settings.scales is not None and (not text or text.lower() in ("1", "-", "nondimensional", "non-dimensional")):
        scale = settings.scales.time or settings.scales.length / settings.scales.velocity
        choice = f"{scale:.6g} s per unit"
        return Clock(scale, 0.0, "", Decision("time", choice, "recipe", "[fields.scales]"))
    since = _SINCE.match(text)
    if since:
        return _calendar_clock(since.group(1), since.group(2), calendar, first, settings, how, where)
    if not text:
        note = Finding(
            "time-unit-assumed", "warning",
            f'{where} states no unit; seconds were assumed. Write [fields].time_unit = "s" (or the right one).',
        )
        return Clock(1.0, 0.0, "", Decision("time", "seconds", "default", "no unit stated"), (note,))
    amount = re.match(r"^\s*([0-9.eE+-]+)\s*(\S+)\s*$", text)
    number, name = (float(amount.group(1)), amount.group(2)) if amount and declared else (1.0, text)
    factor, _ = _time_factor(name, where)
    return Clock(number * factor, 0.0, "", Decision("time", f"{number * factor:.6g} s per unit", how, f'unit "{text}"'))


def _time_factor(name: str, where: str) -> tuple[float, float]:
    if name.lower().rstrip("s") in ("month", "year", "common_year"):
        raise UnitError(
            f'{where}: a {name.rstrip("s")} has no fixed length; write [fields].time_unit in s, min, h or d, or use time_from.'
        )
    try:
        return conversion(name, "s", where)
    except UnitError:
        raise UnitError(
            f'{where}: "{name}" is not a unit of time; write [fields].time_unit, e.g. "s", "h" or "hours since 2026-01-31".'
        ) from None


def _calendar_clock(
    name: str, reference: str, calendar: str | None, first: float, settings: FieldsSettings,
    how: Literal["recipe", "metadata", "default"], where: str,
) -> Clock:
    factor, _ = _time_factor(name, where)
    chosen = settings.calendar or calendar or "standard"

    def moment(number: float) -> str:
        date = cftime.num2date(number, f"seconds since {reference}", chosen, only_use_cftime_datetimes=True)
        return str(date.isoformat(timespec="milliseconds")).removesuffix(".000")

    try:
        start = moment(0.0)
        begins = moment(round(first * factor, 3))
    except (ValueError, OverflowError) as error:
        raise DataError(
            f'{where}: "{name} since {reference}" (calendar {chosen}) cannot be read as a date ({error}); write '
            '[fields].time_unit = "s since 2026-01-31 00:00:00" or a plain unit.'
        ) from None
    from_first = settings.time_origin == "first" or (settings.time_origin == "auto" and abs(first * factor) > YEAR)
    shift, origin = (-first * factor, begins) if from_first else (0.0, start)
    evidence = f'unit "{name} since {reference}", calendar {chosen}'
    return Clock(factor, shift, origin, Decision("time", f"seconds since {origin}", how, evidence))


def number_in_name(path: Path) -> int | None:
    """The last group of digits in the name of a file or store: its step number."""
    digits = re.findall(r"\d+", path.stem)
    return int(digits[-1]) if digits else None


def check_precision(numbers: np.ndarray, stored: np.dtype, where: str) -> None:
    """Raise DataError where single-precision times cannot tell snapshots apart or jitter by more than 1 %."""
    if stored.kind != "f" or stored.itemsize > 4 or len(numbers) < 2:
        return
    steps = np.diff(np.sort(np.asarray(numbers, np.float64)))
    usual = float(np.median(steps[steps > 0])) if (steps > 0).any() else 0.0
    grain = float(np.spacing(np.float32(np.max(np.abs(numbers)))))
    if usual == 0.0 or grain > 0.01 * usual or (not (steps > 0).all() and grain > 0.0 and usual <= 2.0 * grain):
        raise DataError(
            f"{where}: times are stored in single precision, which at {float(np.max(numbers)):.8g} resolves {grain:.3g} "
            f"only, while snapshots are {usual:.3g} apart; sampling times are lost. Write [fields].time_from = \"index\" "
            "with time_interval (and time_start), or time_from = \"step\" with time_step."
        )


@dataclass(frozen=True)
class Piece:
    """Snapshots of one file, or an increasing stretch of them. indices: positions in the file."""

    file: int
    indices: np.ndarray
    seconds: np.ndarray


def increasing_stretches(piece: Piece, overlap: str, label: str) -> list[Piece]:
    """`piece` cut where time does not increase. Raises DataError when overlaps are refused and it must be cut."""
    cuts = np.flatnonzero(np.diff(piece.seconds) <= 0) + 1
    if len(cuts) == 0:
        return [piece]
    if overlap == "refuse":
        at = int(cuts[0])
        kind = "repeated" if piece.seconds[at] == piece.seconds[at - 1] else "out of order"
        raise DataError(
            f"{label}: times are {kind}: snapshot {at + 1} is at {piece.seconds[at]:.10g} s, the one before it at "
            f"{piece.seconds[at - 1]:.10g} s ({len(cuts)} such place{'s' if len(cuts) > 1 else ''}). If the run was "
            'restarted, write [fields].overlap = "later" (or "earlier") to say which piece counts.'
        )
    bounds = [0, *cuts.tolist(), len(piece.seconds)]
    return [
        Piece(piece.file, piece.indices[a:b], piece.seconds[a:b]) for a, b in itertools.pairwise(bounds)
    ]


@dataclass(frozen=True)
class Joined:
    """seconds (float64, increasing); file and index: where each snapshot lies; dropped: how many repeats were left out."""

    seconds: np.ndarray
    file: np.ndarray
    index: np.ndarray
    dropped: int


def join_pieces(pieces: list[Piece], overlap: Literal["refuse", "later", "earlier"], labels: list[str]) -> Joined:
    """One increasing series out of the pieces of several files, by the rule `overlap` where they overlap.

    "later": a piece that starts later replaces what earlier ones hold from its first time on; "earlier": it only adds what
    comes after them. labels: file names by file number, for messages. Raises DataError when "refuse" meets an overlap.
    """
    parts = [
        part for piece in pieces if len(piece.seconds) for part in increasing_stretches(piece, overlap, labels[piece.file])
    ]
    if len({part.file for part in parts}) == len(parts):
        parts.sort(key=lambda part: (part.seconds[0], part.file))
    seconds, file, index = (np.empty(0), np.empty(0, np.int64), np.empty(0, np.int64))
    dropped = 0
    for part in parts:
        steps = np.diff(part.seconds)
        tolerance = 1e-6 * float(np.median(steps)) if len(steps) else 1e-9 * max(1.0, abs(float(part.seconds[0])))
        keep_old = np.ones(len(seconds), bool)
        keep_new = np.ones(len(part.seconds), bool)
        if len(seconds) and part.seconds[0] <= seconds[-1] + tolerance:
            if overlap == "refuse":
                repeats = int((part.seconds <= seconds[-1] + tolerance).sum())
                raise DataError(
                    f"{labels[part.file]} repeats {repeats} snapshot{'s' if repeats > 1 else ''} (from "
                    f"{part.seconds[0]:.10g} s) that {labels[int(file[-1])]} already holds (to {seconds[-1]:.10g} s). "
                    'Write [fields].overlap = "later" (a restart replaces what it repeats) or "earlier", or take one '
                    "of the files out of [fields].path."
                )
            if overlap == "later":
                keep_old = seconds < part.seconds[0] - tolerance
            else:
                keep_new = part.seconds > seconds[-1] + tolerance
            dropped += int((~keep_old).sum() + (~keep_new).sum())
        seconds = np.concatenate([seconds[keep_old], part.seconds[keep_new]])
        file = np.concatenate([file[keep_old], np.full(int(keep_new.sum()), part.file)])
        index = np.concatenate([index[keep_old], part.indices[keep_new]])
    return Joined(seconds, file, index, dropped)


def gap_findings(seconds: np.ndarray) -> list[Finding]:
    """Places where snapshots lie more than 1.5 times the usual interval apart, and a run of a single snapshot."""
    if len(seconds) == 1:
        return [Finding(
            "single-snapshot", "warning",
            "one snapshot only: no confidence interval in time is possible; intervals will be horizontal and labelled "
            "one realisation.", 1.0, 2.0, "snapshots",
        )]  # fmt: skip
    steps = np.diff(seconds)
    usual = float(np.median(steps)) if len(steps) else 0.0
    wide = np.flatnonzero(steps > 1.5 * usual)
    if len(wide) == 0:
        return []
    first = int(wide[0])
    return [Finding(
        "time-gap", "warning",
        f"{len(wide)} gap{'s' if len(wide) > 1 else ''} in time, the first from {seconds[first]:.10g} s to "
        f"{seconds[first + 1]:.10g} s where snapshots are usually {usual:.6g} s apart.",
        float(steps.max()), 1.5 * usual, "s",
    )]  # fmt: skip
