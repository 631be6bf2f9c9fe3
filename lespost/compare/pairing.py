"""Which cell is compared with which, and over which stretch of time.

Depths are paired by nearness or by interpolating the statistic (never the series, which would lose variance).
Windows must have the same length, because a second moment is only defined for a stretch of time.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import xarray as xr

from lespost.compare.settings import ComparisonSettings
from lespost.errors import DataError, RequestError

#: Two windows are equally long if their lengths agree to this share (a sample at either end).
SAME_LENGTH = 0.05


@dataclass(frozen=True)
class DepthPairs:
    """record: indices of the record's cells. depth: their depths [m]. model: weights (pair, model level),
    each row summing to 1. distance: to the nearest model cell used [m]."""

    record: np.ndarray
    depth: np.ndarray
    model: np.ndarray
    distance: np.ndarray


def _spacing(depths: np.ndarray) -> float:
    return float(np.median(np.diff(depths))) if depths.size > 1 else 0.0


def pair_depths(
    record: np.ndarray, model: np.ndarray, settings: ComparisonSettings, where: str
) -> DepthPairs:
    """Pairs of record and model cells; depths [m, positive down], ascending.

    Raises DataError where no cell of the record has a partner.
    """
    tolerance = settings.depth_tolerance
    if tolerance is None:
        tolerance = max(0.5 * max(_spacing(record), _spacing(model)), 1e-6)
        if record.size == 1 and model.size == 1:
            tolerance = max(tolerance, 1.0)
    chosen = np.arange(record.size)
    if settings.depths:
        nearest = [int(np.argmin(np.abs(record - d))) for d in settings.depths]
        far = [
            d
            for d, i in zip(settings.depths, nearest, strict=True)
            if abs(record[i] - d) > tolerance * (1 + 1e-9)
        ]
        if far:
            raise RequestError(
                f"{where}: [comparison].depths {far[0]:g} m has no cell of the record within {tolerance:g} "
                "m; its cells lie at "
                f"{record[0]:g} to {record[-1]:g} m."
            )
        chosen = np.array(sorted(set(nearest)))
    rows, weights, distances = [], [], []
    for i in chosen:
        at = record[i]
        distance = np.abs(model - at)
        row = np.zeros(model.size)
        j = int(np.argmin(distance))
        if settings.depth_pairing == "interpolate" and model.size > 1 and model[0] <= at <= model[-1]:
            above = int(np.clip(np.searchsorted(model, at, side="right") - 1, 0, model.size - 2))
            share = (at - model[above]) / (model[above + 1] - model[above])
            row[above], row[above + 1] = 1.0 - share, share
        elif distance[j] <= tolerance * (1 + 1e-9):
            row[j] = 1.0
        else:
            continue
        rows.append(i)
        weights.append(row)
        distances.append(distance[j])
    if not rows:
        raise DataError(
            f"{where}: no cell of the record ({record[0]:g} to {record[-1]:g} m) lies within {tolerance:g} m "
            "of a cell of the "
            f"instrument ({model[0]:g} to {model[-1]:g} m); move the instrument's cells or set "
            "[comparison].depth_tolerance."
        )
    index = np.array(rows, dtype=np.int64)
    return DepthPairs(index, record[index], np.array(weights), np.array(distances))


def duration(series: xr.Dataset) -> float:
    """Length of a series [s], each sample standing for one interval; NaN for a single sample."""
    time = np.asarray(series["time"], dtype=np.float64)
    if time.size < 2:
        return float("nan")
    return float(time[-1] - time[0] + np.median(np.diff(time)))


def in_window(series: xr.Dataset, start: float, end: float) -> xr.Dataset:
    """The samples of a virtual series with start <= time < end [s of the run]; the last window includes its
    end."""
    time = np.asarray(series["time"], dtype=np.float64)
    interval = float(np.median(np.diff(time))) if time.size > 1 else 0.0
    keep = (time >= start - 1e-6 * interval) & (time < end - 1e-6 * interval)
    return series.isel(time=np.flatnonzero(keep))


def match_windows(
    record: xr.Dataset, model: xr.Dataset, settings: ComparisonSettings, where: str
) -> tuple[xr.Dataset, str]:
    """(the record over as long a stretch as the model's, a note). Raises DataError where lengths differ and
    nothing was allowed: naming both lengths and the three remedies.
    """
    recorded, simulated = duration(record), duration(model)
    if not (np.isfinite(recorded) and np.isfinite(simulated)):
        raise DataError(
            f"{where}: a series of a single time has no window; more than one sample is needed on both sides."
        )
    if abs(recorded - simulated) <= SAME_LENGTH * max(recorded, simulated):
        return record, ""
    if settings.cut_record and recorded > simulated:
        return cut_record(record, simulated), f"record cut into pieces of {simulated:g} s"
    if settings.allow_windows:
        return record, f"windows differ: record {recorded:g} s, model {simulated:g} s"
    raise DataError(
        f"{where}: the record lasts {recorded:g} s, the model's window {simulated:g} s; a variance depends "
        "on the length it is "
        "taken over. Set time_window of the record or the [windows], or [comparison].cut_record = true (a "
        "longer record in "
        "pieces), or allow_windows = true."
    )


def cut_record(record: xr.Dataset, length: float) -> xr.Dataset:
    """The record as pieces of `length` [s], each a deployment; a remainder shorter than a piece is left
    out."""
    time = np.asarray(record["time"], dtype=np.float64)
    interval = float(np.median(np.diff(time)))
    per_piece = round(length / interval)
    pieces = time.size // per_piece if per_piece else 0
    if pieces < 1 or per_piece < 2:
        raise DataError(f"a record of {time.size} samples cannot be cut into pieces of {length:g} s.")
    used = record.isel(time=slice(0, pieces * per_piece))
    out: dict[str, Any] = {}
    for name, variable in used.data_vars.items():
        if variable.dims != ("deployment", "time", "depth"):
            out[str(name)] = variable
            continue
        values = variable.values
        shape = (values.shape[0] * pieces, per_piece, values.shape[2])
        out[str(name)] = (variable.dims, values.reshape(shape), variable.attrs)
    coords = {
        "time": ("time", time[:per_piece], record["time"].attrs),
        "depth": record["depth"],
        "deployment": np.arange(record.sizes["deployment"] * pieces),
    }
    kept = {k: v for k, v in out.items() if isinstance(v, tuple) or "deployment" not in v.dims}
    return xr.Dataset(kept, coords=coords, attrs=record.attrs)


def chains_of(sides: Sequence[xr.Dataset]) -> tuple[str, ...]:
    """The steps already applied to each side, as JSON texts."""
    return tuple(str(s.attrs.get("chain", "[]")) for s in sides)
