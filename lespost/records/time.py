"""Times of a record: numbers or texts to seconds since the first sample, with the faults that ruin a time
axis refused.

The conversion is done here, not by a general decoder, so that its precision and its calendar are known.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

import numpy as np

from lespost.errors import RecordError
from lespost.findings import Finding

_SECONDS = {
    "second": 1.0, "seconds": 1.0, "sec": 1.0, "secs": 1.0, "s": 1.0,
    "minute": 60.0, "minutes": 60.0, "min": 60.0, "mins": 60.0,
    "hour": 3600.0, "hours": 3600.0, "hr": 3600.0, "hrs": 3600.0, "h": 3600.0,
    "day": 86400.0, "days": 86400.0, "d": 86400.0,
    "millisecond": 1e-3, "milliseconds": 1e-3, "msec": 1e-3, "ms": 1e-3,
    "microsecond": 1e-6, "microseconds": 1e-6,
    "nanosecond": 1e-9, "nanoseconds": 1e-9,
}  # fmt: skip
_CALENDARS = ("standard", "gregorian", "proleptic_gregorian", "none", "")


@dataclass(frozen=True)
class TimeAxis:
    """Times of the samples in file order.

    seconds: float64 since `origin`. origin: ISO 8601 UTC of the first sample.
    """

    seconds: np.ndarray
    origin: str
    findings: tuple[Finding, ...] = ()


def iso(moment: datetime) -> str:
    """ISO 8601 text in UTC, to 0.1 ms (days in float64 carry no more), the fraction only where there is
    one."""
    tenths = round(moment.microsecond / 100.0) * 100
    moment = moment.replace(microsecond=0) + timedelta(microseconds=tenths)
    return moment.astimezone(UTC).isoformat(timespec="auto").replace("+00:00", "Z")


def parse_iso(text: str, where: str) -> datetime:
    """A datetime in UTC from an ISO 8601 text (no zone means UTC). Raises RecordError."""
    cleaned = text.strip().replace("/", "-")
    cleaned = re.sub(r"\s*(UTC|GMT)$", "Z", cleaned)
    try:
        moment = datetime.fromisoformat(cleaned)
    except ValueError:
        raise RecordError(
            f'{where}: "{text}" is not an ISO 8601 time such as 2026-01-31T12:00:00Z.'
        ) from None
    return moment.replace(tzinfo=UTC) if moment.tzinfo is None else moment.astimezone(UTC)


def _reference(text: str, where: str) -> datetime:
    """The date after "since", which UDUNITS lets people write loosely: 1950-1-1 00:00:0.0."""
    match = re.match(
        r"^\s*(\d{1,4})-(\d{1,2})-(\d{1,2})(?:[T\s]+(\d{1,2}):(\d{1,2})(?::(\d{1,2}(?:\.\d+)?))?)?\s*"
        r"(Z|UTC|GMT|[+-]\d{1,2}:?\d{2})?\s*$",
        text,
    )
    if match is None:
        raise RecordError(
            f'{where}: reference time "{text}" cannot be read; expected for example 1950-01-01T00:00:00Z.'
        )
    year, month, day, hour, minute = (int(g or 0) for g in match.groups()[:5])
    second = float(match.group(6) or 0.0)
    try:
        moment = datetime(year, month, day, hour, minute, tzinfo=UTC) + timedelta(seconds=second)
    except ValueError as error:
        raise RecordError(f'{where}: reference time "{text}" is no date ({error}).') from None
    zone = match.group(7)
    if zone and zone[0] in "+-":
        digits = zone[1:].replace(":", "").zfill(4)
        offset = timedelta(hours=int(digits[:-2]), minutes=int(digits[-2:]))
        moment = moment - offset if zone[0] == "+" else moment + offset
    return moment


def numeric_times(
    values: np.ndarray, units: str | None, calendar: str, where: str, stored_dtype: str = "float64"
) -> TimeAxis:
    """A time axis from numbers and a unit text such as "days since 1950-01-01T00:00:00Z".

    Raises RecordError for a missing or unreadable unit, an unusual calendar, missing or non-finite times, and
    times that repeat because they were stored in too few digits.
    """
    if not units or " since " not in units:
        raise RecordError(
            f'{where}: units "{units or ""}" name no reference time; expected "seconds since <date>".'
        )
    if calendar.lower() not in _CALENDARS:
        raise RecordError(
            f'{where}: calendar "{calendar}" is not a real one; observations need the standard calendar.'
        )
    step_text, reference_text = units.split(" since ", 1)
    factor = _SECONDS.get(step_text.strip().lower())
    if factor is None:
        raise RecordError(f'{where}: time unit "{step_text.strip()}" is not second, minute, hour or day.')
    numbers = np.asarray(values, dtype=np.float64)
    bad = ~np.isfinite(numbers)
    if bad.any():
        raise RecordError(
            f"{where}: {int(bad.sum())} of {numbers.size} times are missing (first at index "
            f"{int(np.argmax(bad))}); a record "
            "needs the time of every sample. Cut the file to its written part."
        )
    if numbers.size == 0:
        raise RecordError(f"{where}: the record holds no samples.")
    reference = _reference(reference_text, where)
    try:
        first = reference + timedelta(seconds=float(numbers[0]) * factor)
        # the last one only to see that it is a date at all
        reference + timedelta(seconds=float(np.max(np.abs(numbers))) * factor)
    except (OverflowError, ValueError):
        raise RecordError(
            f'{where}: {numbers[0]} "{units}" is no date; the unit or the values are wrong.'
        ) from None
    seconds = (numbers - numbers[0]) * factor
    if stored_dtype == "float32" and np.unique(numbers).size < numbers.size:
        raise RecordError(
            f"{where}: times are stored as float32, {numbers.size - np.unique(numbers).size} of "
            f"{numbers.size} coincide: the "
            "sampling times are lost. Rewrite the time from the sampling interval as float64."
        )
    return TimeAxis(seconds, iso(first))


def text_times(texts: np.ndarray, where: str) -> TimeAxis:
    """A time axis from ISO 8601 texts. Raises RecordError naming the first one that is no time."""
    if len(texts) == 0:
        raise RecordError(f"{where}: the record holds no samples.")
    moments = [parse_iso(str(t), f"{where}, row {i + 1}") for i, t in enumerate(texts)]
    first = moments[0]
    return TimeAxis(np.array([(m - first).total_seconds() for m in moments]), iso(first))


def check_order(axis: TimeAxis, where: str) -> None:
    """Raises RecordError where times repeat or go back; both make every spectrum and integral scale wrong."""
    steps = np.diff(axis.seconds)
    if np.any(steps < 0):
        at = int(np.argmax(steps < 0)) + 1
        raise RecordError(
            f"{where}: time goes back by {-steps[at - 1]:g} s at sample {at} ({int(np.sum(steps < 0))} times "
            "in all); sort or "
            "split the file, or use time_window to keep one part."
        )
    if np.any(steps == 0):
        at = int(np.argmax(steps == 0)) + 1
        raise RecordError(
            f"{where}: {int(np.sum(steps == 0))} times repeat, first at sample {at}; remove the duplicates "
            "or use time_window."
        )


@dataclass(frozen=True)
class Sampling:
    """How a time axis is sampled.

    interval: median step [s]. regular: whether every step is a whole number of intervals to 10 %. index:
    position of each sample on the regular grid. gaps: number of steps longer than 1.5 intervals. jitter:
    largest departure of a step from a whole number of intervals, as a share of the interval.
    """

    interval: float
    regular: bool
    index: np.ndarray
    gaps: int
    jitter: float


def sampling(seconds: np.ndarray) -> Sampling:
    """The sampling of increasing times [s], by the median step."""
    if seconds.size < 2:
        return Sampling(float("nan"), True, np.arange(seconds.size), 0, 0.0)
    steps = np.diff(seconds)
    interval = float(np.median(steps))
    if interval <= 0:
        return Sampling(interval, False, np.arange(seconds.size), 0, float("inf"))
    multiples = np.maximum(np.round(steps / interval), 0)
    jitter = float(np.max(np.abs(steps / interval - multiples)))
    regular = jitter <= 0.1 and bool(np.all(multiples >= 1))
    index = (
        np.concatenate(([0], np.cumsum(multiples))).astype(np.int64)
        if np.max(multiples) < 1e9
        else np.arange(seconds.size)
    )
    return Sampling(interval, regular, index, int(np.sum(multiples > 1)), jitter)
