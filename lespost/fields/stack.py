"""Joining files in time: one variable over all files of a run, and the run's time axis.

Every field leaves this module with its time axis first, whatever the files do; the axes in space keep the file's order.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Literal

import numpy as np

from lespost.errors import DataError, LayoutError
from lespost.fields.axes import time_dimension
from lespost.fields.index import Collection, FileEntry, time_name
from lespost.fields.settings import FieldsSettings
from lespost.fields.time import (
    Clock,
    Joined,
    Piece,
    check_precision,
    clock,
    gap_findings,
    join_pieces,
    number_in_name,
)
from lespost.fields.variable import RawVariable
from lespost.findings import Decision, Finding


@dataclass(frozen=True, eq=False)
class StackedVariable(RawVariable):
    """A variable over several files. parts: it in each file; file, index: where snapshot t lies.

    dims = ("time", *axes in space in the files' order). time_axis: its position in the files, None if they have none.
    """

    parts: tuple[RawVariable, ...] = ()
    file: np.ndarray | None = None
    index: np.ndarray | None = None
    time_axis: int | None = None

    def runs(self, start: int, stop: int) -> list[tuple[int, int, int, int]]:
        """Stretches of consecutive snapshots in one file within [start, stop): (position, length, file, index)."""
        assert self.file is not None and self.index is not None
        found: list[tuple[int, int, int, int]] = []
        for t in range(start, stop):
            file, index = int(self.file[t]), int(self.index[t])
            if found and self.time_axis is not None:
                position, length, last_file, first = found[-1]
                if file == last_file and index == first + length:
                    found[-1] = (position, length + 1, file, first)
                    continue
            found.append((t - start, 1, file, index))
        return found

    def read(self, slices: tuple[slice, ...]) -> np.ndarray:
        time, space = slices[0], slices[1:]
        pieces = []
        for _, length, file, index in self.runs(time.start, time.stop):
            part = self.parts[file]
            if self.time_axis is None:
                pieces.append(part.read(space)[np.newaxis])
                continue
            where = list(space)
            where.insert(self.time_axis, slice(index, index + length))
            pieces.append(np.moveaxis(part.read(tuple(where)), self.time_axis, 0))
        if len(pieces) == 1:
            return pieces[0]
        if not pieces:
            return np.empty((0, *(s.stop - s.start for s in space)), self.dtype)
        return np.concatenate(pieces)

    def select(self, keep: np.ndarray) -> StackedVariable:
        """Only the snapshots numbered `keep`."""
        assert self.file is not None and self.index is not None
        file, index = self.file[keep], self.index[keep]
        return StackedVariable(
            self.path, self.name, self.dims, (len(file), *self.shape[1:]), self.stored, self.attrs, self.chunks,
            self.parts, file, index, self.time_axis,
        )

    def snapshot_source(self, t: int) -> tuple[Path, int]:
        """The file that snapshot t lies in, and its position there."""
        assert self.file is not None and self.index is not None
        return self.parts[int(self.file[t])].path, int(self.index[t])


@dataclass(frozen=True)
class TimeAxis:
    """seconds: float64 run time of each snapshot. origin: ISO text of zero, or ""."""

    seconds: np.ndarray
    origin: str
    decisions: tuple[Decision, ...]
    findings: tuple[Finding, ...]


@dataclass(frozen=True)
class Stacked:
    """fields: our name -> its variable over all files. time: the common axis."""

    fields: dict[str, StackedVariable]
    time: TimeAxis


def stack(
    collection: Collection, names: dict[str, str], settings: FieldsSettings, coriolis: float | None
) -> Stacked:
    """Join the fields `names` (ours -> the files') over all files of the run.

    Raises DataError for disorder, overlaps and unequal times, LayoutError where times must be declared.
    """
    joined: dict[tuple[int, ...], tuple[Joined, Clock | None, list[FileEntry]]] = {}
    per_name: dict[str, tuple[Joined, list[FileEntry]]] = {}
    clock_used: Clock | None = None
    for ours, theirs in names.items():
        holders = collection.holders(theirs)
        key = tuple(id(entry) for entry in holders)
        if key not in joined:
            joined[key] = _join(collection, holders, settings, coriolis)
        series, own_clock, entries = joined[key]
        clock_used = clock_used or own_clock
        per_name[ours] = (series, entries)
    reference = per_name["u"][0]
    decisions: list[Decision] = [clock_used.decision] if clock_used is not None else []
    findings: list[Finding] = list(clock_used.findings) if clock_used is not None else []
    if reference.dropped:
        findings.append(Finding(
            "overlap", "note",
            f"{reference.dropped} repeated snapshots were left out (overlap = \"{settings.overlap}\").",
            float(reference.dropped), 0.0, "snapshots",
        ))  # fmt: skip
    common, per_name = _reconcile(per_name, settings, findings)
    fields = {
        ours: _stacked(collection, names[ours], series, entries, settings)
        for ours, (series, entries) in per_name.items()
    }
    findings += gap_findings(common)
    axis = TimeAxis(common, clock_used.origin if clock_used else "", tuple(decisions), tuple(findings))
    return Stacked(fields, axis)


def _join(
    collection: Collection, entries: list[FileEntry], settings: FieldsSettings, coriolis: float | None
) -> tuple[Joined, Clock, list[FileEntry]]:
    labels = [str(entry.path) for entry in entries]
    source, clock_used = _time_source(collection, entries, settings, coriolis)
    pieces = []
    before = 0
    for number, entry in enumerate(entries):
        indices = np.arange(entry.count)
        if source == "index":
            seconds = clock_used.seconds(before + indices)
        elif source == "names":
            step = number_in_name(entry.path)
            if step is None or entry.count > 1:
                raise LayoutError(
                    f"{entry.path}: its name holds no step number for its {entry.count} snapshot(s); write "
                    '[fields].time_from = "index" with time_interval.'
                )
            seconds = clock_used.seconds(np.array([float(step)]))
        else:
            assert entry.numbers is not None
            numbers = np.array(entry.numbers)
            if not np.isfinite(numbers).all() or (np.abs(numbers) > 1e30).any():
                raise DataError(f"{entry.path}: a time is not a number (never written?); leave the file out or repair it.")
            seconds = clock_used.seconds(numbers)
        before += entry.count
        pieces.append(Piece(number, indices, seconds))
    if source == "numbers":
        header = collection.header(entries[0])
        name = time_name(header, settings)
        if name is not None:
            every = np.concatenate([np.array(entry.numbers) for entry in entries])
            check_precision(every, header.variables[name].stored, f"{collection.where()}, time variable \"{name}\"")
    return join_pieces(pieces, settings.overlap, labels), clock_used, entries


def _time_source(
    collection: Collection, entries: list[FileEntry], settings: FieldsSettings, coriolis: float | None
) -> tuple[Literal["index", "names", "numbers"], Clock]:
    """Where the times of these files come from, and the clock that turns the numbers into run time."""
    have = all(entry.numbers is not None for entry in entries)
    header = collection.header(entries[0])
    name = time_name(header, settings)
    unit = header.variables[name].units if name is not None else None
    no_unit = (unit or "1").strip() in ("1", "", "-")
    where = f'{entries[0].path}: time variable "{name}"' if name else f"{entries[0].path}: time"
    choice = settings.time_from
    if choice == "auto":
        if have and settings.time_step is not None and no_unit and not settings.time_unit:
            choice = "step"
        elif have:
            choice = "variable"
        elif settings.time_interval is not None:
            choice = "index"
        elif settings.time_step is not None:
            choice = "step"
        elif sum(entry.count for entry in entries) == 1:
            return "index", Clock(1.0, settings.time_start, "", Decision("time", "one snapshot at 0 s", "default", "no time"))
        else:
            raise LayoutError(
                f"{collection.where()}: the files state no times; write [fields].time_interval = \"<seconds> s\" (and "
                'time_start), or time_from = "step" with time_step where file names carry step numbers.'
            )
    if choice == "index":
        interval = settings.time_interval
        assert interval is not None
        text = f"snapshot number x {interval:g} s from {settings.time_start:g} s"
        return "index", Clock(interval, settings.time_start, "", Decision("time", text, "recipe", "[fields].time_interval"))
    if choice == "step":
        step = settings.time_step
        assert step is not None
        text = f"step number x {step:g} s from {settings.time_start:g} s"
        evidence = f'variable "{name}"' if have else "digits in the file names"
        made = Clock(step, settings.time_start, "", Decision("time", text, "recipe", f"[fields].time_step, {evidence}"))
        return ("numbers" if have else "names"), made
    if not have:
        named = settings.names.get("time")
        looked = f'no variable "{named}"' if named else "no time variable"
        raise LayoutError(
            f'{collection.where()}: {looked}; write [fields].names = {{time = "..."}}, or time_from = "index" with '
            "time_interval."
        )
    numbers = entries[0].numbers
    calendar = header.variables[name].attrs.get("calendar") if name is not None else None
    first = min(entry.numbers[0] for entry in entries if entry.numbers)
    assert numbers is not None
    return "numbers", clock(unit, str(calendar) if calendar else None, first, settings, coriolis, where)


def _reconcile(
    per_name: dict[str, tuple[Joined, list[FileEntry]]], settings: FieldsSettings, findings: list[Finding]
) -> tuple[np.ndarray, dict[str, tuple[Joined, list[FileEntry]]]]:
    """The times common to u, v and w, and every field on them; optional fields on other times are left out."""
    reference = per_name["u"][0].seconds
    steps = np.diff(reference)
    tolerance = 1e-3 * float(np.median(steps)) if len(steps) else 1e-6
    common = reference
    for name in ("v", "w"):
        seconds = per_name[name][0].seconds
        if len(seconds) == len(reference) and np.allclose(seconds, reference, rtol=0.0, atol=tolerance):
            continue
        if not settings.allow_gaps:
            raise DataError(
                f"u has {len(reference)} snapshots ({reference[0]:.10g} to {reference[-1]:.10g} s), {name} has "
                f"{len(seconds)} ({seconds[0]:.10g} to {seconds[-1]:.10g} s); add the missing files to [fields].path, "
                "or set allow_gaps = true to use only the times they share."
            )
        common = common[_member(common, seconds, tolerance)]
    if len(common) == 0:
        raise DataError("u, v and w share no time; check which files [fields].path names.")
    kept: dict[str, tuple[Joined, list[FileEntry]]] = {}
    for name, (series, entries) in per_name.items():
        where = np.flatnonzero(_member(series.seconds, common, tolerance))
        if len(where) == len(common):
            kept[name] = (Joined(common, series.file[where], series.index[where], series.dropped), entries)
            continue
        findings.append(Finding(
            "field-left-out", "warning",
            f"{name} is left out: it has {len(where)} of the {len(common)} times of u, v and w.",
            float(len(where)), float(len(common)), "snapshots",
        ))  # fmt: skip
    if len(common) < len(reference):
        findings.append(Finding(
            "times-left-out", "warning", f"{len(reference) - len(common)} snapshots of u lack v or w and are left out.",
            float(len(reference) - len(common)), 0.0, "snapshots",
        ))  # fmt: skip
    return common, kept


def _member(values: np.ndarray, among: np.ndarray, tolerance: float) -> np.ndarray:
    """Which of `values` lie within `tolerance` of one of the ascending `among`."""
    right = np.clip(np.searchsorted(among, values), 0, len(among) - 1)
    left = np.clip(right - 1, 0, len(among) - 1)
    near: np.ndarray = np.minimum(np.abs(among[right] - values), np.abs(among[left] - values)) <= tolerance
    return near


def _stacked(
    collection: Collection, name: str, series: Joined, entries: list[FileEntry], settings: FieldsSettings
) -> StackedVariable:
    first_file = collection.header(entries[0])
    first = first_file.variables[name]
    time = time_dimension(first_file, settings)
    axis = first.dims.index(time) if time in first.dims else None
    space = [i for i in range(len(first.dims)) if i != axis]
    parts: list[RawVariable] = []
    for entry in entries:
        variable = collection.header(entry).variables[name]
        same = [i for i in range(len(variable.dims)) if variable.dims[i] in {first.dims[j] for j in space}]
        if [variable.shape[i] for i in same] != [first.shape[i] for i in space] or len(same) != len(space):
            raise DataError(
                f"{entry.path}: {name} has axes {variable.dims} of sizes {variable.shape}, but {first.path} has "
                f"{first.dims} of {first.shape}; give files of one run with one grid."
            )
        if variable.units != first.units:
            raise DataError(
                f'{entry.path}: {name} is in "{variable.units}", but in {first.path} in "{first.units}"; give files '
                "with one unit."
            )
        shape = tuple(entry.count if i == axis else n for i, n in enumerate(variable.shape))
        parts.append(variable.at(entry.path, variable.dims, shape))
    chunks = None
    if first.chunks is not None:
        chunks = (first.chunks[axis] if axis is not None else 1, *(first.chunks[i] for i in space))
    return StackedVariable(
        first.path, name, ("time", *(first.dims[i] for i in space)),
        (len(series.seconds), *(first.shape[i] for i in space)), first.stored, first.attrs, chunks,
        tuple(parts), series.file, series.index, axis,
    )


def stack_series(collection: Collection, name: str, reference: StackedVariable) -> np.ndarray | None:
    """A series over time (forcing written beside the fields) at the snapshots of `reference`; None if files lack it."""
    assert reference.file is not None and reference.index is not None
    out = np.full(reference.shape[0], np.nan)
    header_of = {entry.path: collection.header(entry) for entry in collection.entries}
    for number, part in enumerate(reference.parts):
        here = np.flatnonzero(reference.file == number)
        if len(here) == 0:
            continue
        file = header_of[part.path]
        if name not in file.variables:
            return None
        variable = file.variables[name]
        values = np.ravel(file.values(name) if variable.path == part.path else _read_from(variable, part.path))
        if len(values) <= int(reference.index[here].max()):
            return None
        out[here] = values[reference.index[here]]
    return out


def _read_from(variable: RawVariable, path: Path) -> np.ndarray:
    return variable.at(path, variable.dims, ()).read(()) if not variable.dims else _whole(variable, path)


def _whole(variable: RawVariable, path: Path) -> np.ndarray:
    # the number of snapshots of this file is not in the shared header: read to the end
    return variable.at(path, variable.dims, variable.shape).read((slice(0, None),))
