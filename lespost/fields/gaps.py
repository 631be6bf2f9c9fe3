"""Snapshots that are not really there: records and chunks never written, blocks that are no numbers.

A chunk that a zarr store lacks reads as its fill value. If that is NaN it is a gap. If it is a number, mostly 0, it may
be data all the same (writers skip chunks of zeros: still water, a component that vanishes): it is judged by its
surroundings, never by its value.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np

from lespost.errors import DataError
from lespost.fields.canonical import unwritten
from lespost.fields.settings import FieldsSettings
from lespost.fields.stack import StackedVariable
from lespost.fields.variable import FILL_LIMIT
from lespost.fields.zarr_chunks import absent, fill_value
from lespost.fields.zarr_store import ZarrVariable
from lespost.findings import Finding

#: Bytes that looking for unwritten snapshots may decode, and the largest number of files opened or values read for it.
PROBE_BYTES, PROBE_FILES, PROBE_VALUES = 256 << 20, 64, 512
#: An absent chunk is still water if what adjoins it is below this fraction of the chunks around it.
STILL = 0.02
#: Absent chunks of one variable and time that are judged one by one.
JUDGED = 32

CHECKED = ("u", "v", "w", "theta", "salinity")


@dataclass(frozen=True)
class Gaps:
    """keep: snapshots that are whole. reasons: one paragraph per snapshot left out. findings: to print."""

    keep: np.ndarray
    reasons: tuple[str, ...]
    findings: tuple[Finding, ...]


def find(fields: dict[str, StackedVariable], seconds: np.ndarray, settings: FieldsSettings) -> Gaps:
    """Which snapshots are whole. Raises DataError at the first gap unless the recipe allows gaps."""
    reasons: dict[int, str] = {}
    findings: list[Finding] = []
    for name in CHECKED:
        if name not in fields:
            continue
        _absent_chunks(name, fields[name], seconds, settings, reasons, findings)
        _unwritten_records(name, fields[name], seconds, reasons)
    keep = np.array([t for t in range(len(seconds)) if t not in reasons], np.int64)
    if reasons:
        texts = tuple(reasons[t] for t in sorted(reasons))
        if not settings.allow_gaps:
            more = f" {len(texts) - 1} more snapshots are like it." if len(texts) > 1 else ""
            raise DataError(texts[0] + more)
        if len(keep) == 0:
            raise DataError(f"{texts[0]} No whole snapshot is left.")
        findings.append(Finding(
            "gaps", "warning",
            f"{len(texts)} of {len(seconds)} snapshots are left out, as allow_gaps allows; windows are shorter by them. "
            f"The first: {texts[0]}",
            float(len(texts)), 0.0, "snapshots",
        ))  # fmt: skip
    return Gaps(keep, tuple(reasons.values()), tuple(findings))


def _unwritten_records(name: str, field: StackedVariable, seconds: np.ndarray, reasons: dict[int, str]) -> None:
    """Look at one value of as many snapshots as can be afforded; the rest is looked at when it is read."""
    assert field.file is not None
    middle = [slice(n // 2, n // 2 + 1) for n in field.shape[1:]]
    per_probe = int(np.prod(field.chunks)) * field.stored.itemsize if field.chunks else 4096
    most = int(np.clip(PROBE_BYTES // max(per_probe, 1), 3, PROBE_VALUES))
    if len(field.parts) > PROBE_FILES:
        most = min(most, PROBE_FILES)
    for t in np.unique(np.linspace(0, field.shape[0] - 1, min(most, field.shape[0])).round().astype(int)):
        if int(t) in reasons:
            continue
        value = float(field.read((slice(int(t), int(t) + 1), *middle)).ravel()[0])
        if abs(value) > FILL_LIMIT:
            reasons[int(t)] = unwritten(name, field, int(t), seconds)
        elif value != value:
            path, index = field.snapshot_source(int(t))
            reasons[int(t)] = (
                f'{path}: {name} ("{field.name}") at {seconds[t]:.10g} s (snapshot {index + 1} of the file) is not a number '
                "in the middle of the domain: it was never written or the run had blown up. Write it again, or set "
                "[fields].allow_gaps = true to leave such snapshots out."
            )


def _absent_chunks(
    name: str, field: StackedVariable, seconds: np.ndarray, settings: FieldsSettings, reasons: dict[int, str],
    findings: list[Finding],
) -> None:
    assert field.file is not None and field.index is not None
    for number, part in enumerate(field.parts):
        if not isinstance(part, ZarrVariable):
            continue
        grid = absent(part)
        if not grid.any():
            continue
        axis = field.time_axis
        grid = np.moveaxis(grid, axis, 0) if axis is not None else grid[np.newaxis]
        assert part.chunks is not None
        length = part.chunks[axis] if axis is not None else 1
        here = np.flatnonzero(field.file == number)
        zeros = 0
        for chunk in np.flatnonzero(grid.any(axis=(1, 2, 3))):
            times = [int(t) for t in here if field.index[t] // length == chunk]
            if not times:
                continue
            keys = np.argwhere(grid[chunk])
            gap = _first_gap(field, part, grid, int(chunk), keys, times[0], settings)
            if gap is None:
                zeros += len(keys)
                continue
            for t in times:
                reasons.setdefault(t, (
                    f'{part.path}: {name} ("{part.name}") at {seconds[t]:.10g} s (snapshot {int(field.index[t]) + 1} of the '
                    f"store): {len(keys)} of {grid[chunk].size} chunks are not in the store, among them {gap}; the job that "
                    "wrote it was probably killed. Write it again, set [fields].allow_gaps = true to leave such snapshots "
                    'out, or absent_chunks = "zero" if they are true zeros.'
                ))  # fmt: skip
        if zeros:
            why = "as the recipe says" if settings.absent_chunks == "zero" else (
                "the flow around them is still, or they are absent at all times"
            )
            findings.append(Finding(
                "absent-chunks", "note",
                f"{part.path}: {zeros} chunks of {name} are not in the store and are taken for zeros ({why}).",
                float(zeros), 0.0, "chunks",
            ))  # fmt: skip


def _first_gap(
    field: StackedVariable, part: ZarrVariable, grid: np.ndarray, chunk: int, keys: np.ndarray, t: int, settings: FieldsSettings
) -> str | None:
    """The first absent chunk of one time that is a gap, in words; None if all of them are true zeros."""
    words = [f"chunk ({', '.join(str(int(i)) for i in (chunk, *key))})" for key in keys]
    fill = fill_value(part)
    if not np.isfinite(fill) or abs(fill) > FILL_LIMIT or settings.absent_chunks == "gap":
        return words[0]
    if settings.absent_chunks == "zero":
        return None
    if grid[chunk].all() and not grid.all():
        return words[0]
    if grid.all():
        return f"{words[0]} and all others"
    for key, text in list(zip(keys, words, strict=True))[:JUDGED]:
        always = grid.shape[0] > 1 and grid[(slice(None), *key)].all()
        if not always and not _still_around(field, grid[chunk], tuple(int(k) for k in key), t):
            return text
    return None


def _still_around(field: StackedVariable, missing: np.ndarray, key: tuple[int, ...], t: int) -> bool:
    """Whether the planes that adjoin an absent chunk are still compared with the chunks that they belong to."""
    assert field.chunks is not None
    chunks, sizes = field.chunks[1:], field.shape[1:]
    adjoining, around = [], []
    for axis, step in itertools.product(range(3), (-1, 1)):
        other = list(key)
        other[axis] += step
        if not 0 <= other[axis] < missing.shape[axis] or missing[tuple(other)]:
            continue
        box = [slice(k * c, min((k + 1) * c, n)) for k, c, n in zip(other, chunks, sizes, strict=True)]
        values = np.asarray(field.read((slice(t, t + 1), *box))[0], np.float64)
        face = np.take(values, -1 if step < 0 else 0, axis)
        adjoining.append(float(np.sqrt(np.mean(face**2))))
        around.append(float(np.sqrt(np.mean(values**2))))
    return bool(adjoining) and max(adjoining) <= STILL * max(around)
