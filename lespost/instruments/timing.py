"""What happens between snapshots: measured decorrelation, and the mode of time that does not lie.

Interpolated: pings are linear in time between snapshots; honest only while a snapshot still resembles its neighbour at the same place.
Frozen: the pattern of the nearest snapshot is carried past the instrument by one velocity; honest only while the pattern outlives an
ensemble. Both are held to the same limit: a correlation of 0.8, at which either misstates the variance of an ensemble by about 7 %
(derived: linear interpolation keeps (2 + r)/3 of it on average; the mean over T of a signal of memory τ = T/ln(1/r) keeps
2 (x - 1 + e^-x)/x², x = T/τ).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
import xarray as xr

from lespost.errors import DataError
from lespost.fields.geometry import domain_lengths, spacing
from lespost.instruments.settings import InstrumentSettings

#: Smallest correlation, between neighbouring snapshots (interpolated) or over an ensemble (frozen), that counts as resolved.
SMALLEST_CORRELATION = 0.8
#: A peak of the correlation between snapshots counts as the same pattern where it stands out by so many standard deviations.
PEAK_DEVIATIONS = 4.0
#: Ensembles made of a lone snapshot that stands still.
ENSEMBLES_OF_ONE_SNAPSHOT = 60


@dataclass(frozen=True)
class Decorrelation:
    """How alike neighbouring snapshots are.

    interval: time between them [s]. fixed: correlation at the same place. moving: the largest correlation at any horizontal shift.
    velocity: that shift over the interval [m s-1] (u, v; may be off by a domain length per interval). significant: whether the peak
    stands out. component: what was correlated. All NaN for a single snapshot.
    """

    interval: float
    fixed: float
    moving: float
    velocity: tuple[float, float]
    significant: bool
    component: str


@dataclass(frozen=True)
class TimePlan:
    """centres: (ensembles,) middle of each ensemble [s]. snapshot: (ensembles,) the snapshot it is taken from (interpolated: the earlier
    neighbour of its middle). memory: time [s] in which the pattern decorrelates as it moves; evidence: how that is known. regular:
    whether ensembles follow each other without a gap."""

    mode: Literal["frozen", "interpolated"]
    centres: np.ndarray
    snapshot: np.ndarray
    decorrelation: Decorrelation
    memory: float
    evidence: str
    regular: bool


def measure_decorrelation(fields: xr.Dataset, depths: np.ndarray) -> Decorrelation:
    """Correlation of w (of u where w does not vary) between neighbouring snapshots, at up to three depths and three pairs of snapshots.

    depths: of the cells [m]. Reads single levels only.
    """
    time = np.asarray(fields["time"].values, dtype=np.float64)
    if time.size < 2:
        return Decorrelation(float("nan"), float("nan"), float("nan"), (float("nan"), float("nan")), False, "none")
    interval = float(np.median(np.diff(time)))
    pairs = sorted({0, (time.size - 2) // 2, time.size - 2})
    for name in ("w", "u"):
        heights = np.asarray(fields["z_face" if "z_face" in fields[name].dims else "z"].values, dtype=np.float64)
        levels = sorted({int(np.argmin(np.abs(heights + d))) for d in np.quantile(depths, [0.1, 0.5, 0.9])})
        surfaces = [_correlation(fields, name, pair, level) for pair in pairs for level in levels]
        known = [surface for surface in surfaces if surface is not None]
        if known:
            surface = np.mean(known, axis=0)
            row, column = np.unravel_index(int(surface.argmax()), surface.shape)
            dx, dy = spacing(fields)
            shift = [(index + size // 2) % size - size // 2 for index, size in zip((column, row), surface.shape[::-1], strict=True)]
            return Decorrelation(interval, float(surface[0, 0]), float(surface[row, column]),
                                 (float(shift[0]) * dx / interval, float(shift[1]) * dy / interval),
                                 bool(surface[row, column] > PEAK_DEVIATIONS * surface.std()), name)
    # nothing varies: every snapshot is like the other
    return Decorrelation(interval, 1.0, 1.0, (0.0, 0.0), True, "none")


def _correlation(fields: xr.Dataset, name: str, pair: int, level: int) -> np.ndarray | None:
    """Correlation (y, x) of a level between snapshots pair and pair + 1 by shift of the later one; None where it does not vary."""
    one, two = (np.asarray(fields[name][pair + step, level].values, dtype=np.float64) for step in (0, 1))
    one, two = one - one.mean(), two - two.mean()
    scale = np.sqrt((one**2).mean() * (two**2).mean())
    if not scale > 1e-12:  # far below any resolved eddy [m2 s-2]
        return None
    product = np.conj(np.fft.rfft2(one)) * np.fft.rfft2(two)
    return np.asarray(np.fft.irfft2(product, s=one.shape) / one.size / scale)


def pattern_memory(found: Decorrelation, profiles: xr.Dataset, depths: np.ndarray) -> tuple[float, str]:
    """(time [s] in which the moving pattern decorrelates to 1/e, how that is known).

    From the correlation of snapshots where the same pattern is found in both; else the eddy turnover time, depth of the deepest cell
    over rms w (common practice, no source), and no longer than the snapshots allow.
    """
    heights = -np.asarray(depths, dtype=np.float64)
    z = np.asarray(profiles["z"].values, dtype=np.float64)
    inside = (z >= heights.min() - 1e-9) & (z <= heights.max() + 1e-9)
    speed = float(np.sqrt(np.nanmean(profiles["ww"].values[:, inside]))) if inside.any() else 0.0
    turnover = float(np.max(depths)) / speed if speed > 0.0 else float("inf")
    if not np.isfinite(found.interval):
        return turnover, f"eddy turnover time (one snapshot; rms w {speed:.2g} m/s)"
    if found.moving >= 1.0:
        return float("inf"), "snapshots are alike"
    measured = found.interval / float(np.log(1.0 / max(found.moving, 1e-3)))
    if found.significant:
        return measured, f"correlation {found.moving:.2f} between snapshots {found.interval:g} s apart, moving with the pattern"
    return min(turnover, measured), (f"no pattern survives from one snapshot to the next (correlation at most {found.moving:.2f} after "
                                     f"{found.interval:g} s); eddy turnover {turnover:.0f} s")


def plan_time(
    settings: InstrumentSettings, fields: xr.Dataset, profiles: xr.Dataset, depths: np.ndarray, speed: float, windows: Sequence[Any] = ()
) -> TimePlan:
    """When ensembles are taken and from which snapshots, for cells at `depths` [m] and a pattern carried at `speed` [m s-1].

    windows: only snapshots from the earliest start to the latest end are used (all without windows). Raises DataError, with the
    numbers, where the mode asked for, or every mode, would lie.
    """
    time = np.asarray(fields["time"].values, dtype=np.float64)
    used = np.arange(time.size)
    if windows:
        inside = (time >= min(w.start for w in windows)) & (time <= max(w.end for w in windows))
        used = used[inside] if inside.any() else used
    found = measure_decorrelation(fields.isel(time=used), depths)
    memory, evidence = pattern_memory(found, profiles.isel(time=used), depths)
    resolved = bool(np.isfinite(found.fixed) and found.fixed >= SMALLEST_CORRELATION)
    longest = memory * float(np.log(1.0 / SMALLEST_CORRELATION))
    lasting = settings.averaging_interval <= longest
    asked, where = settings.time_mode, f'instrument "{settings.name}"'
    not_resolved = (
        "there is only one snapshot" if used.size < 2 else
        f"snapshots {found.interval:g} s apart correlate by {found.fixed:.2f} at the same place (limit {SMALLEST_CORRELATION:g})")
    not_lasting = (f"the pattern changes within an ensemble of {settings.averaging_interval:g} s (limit {longest:.3g} s; memory "
                   f"{memory:.3g} s: {evidence})")
    if asked == "interpolated" and not resolved:
        raise DataError(f"{where}: time_mode interpolated would take variance away: {not_resolved}. Store snapshots more often, or write "
                        'time_mode = "auto".')
    if asked == "frozen" and not lasting:
        raise DataError(f"{where}: time_mode frozen would invent variance: {not_lasting}. Shorten averaging_interval.")
    if asked == "auto" and not resolved and not lasting:
        raise DataError(f"{where}: neither mode of time is honest: {not_resolved}, and {not_lasting}. Shorten averaging_interval, or store "
                        "snapshots more often.")
    if asked == "interpolated" or (asked == "auto" and resolved):
        count = int(np.floor((time[used[-1]] - time[used[0]]) / settings.averaging_interval + 1e-9))
        if count < 1:
            raise DataError(f"{where}: an ensemble of {settings.averaging_interval:g} s is longer than the time between the first and the "
                            "last snapshot; shorten averaging_interval.")
        centres = time[used[0]] + settings.averaging_interval * (np.arange(count) + 0.5)
        snapshot = np.clip(np.searchsorted(time, centres, side="right") - 1, used[0], used[-1] - 1)
        return TimePlan("interpolated", centres, snapshot, found, memory, evidence, True)
    centres, snapshot, regular = _frozen_ensembles(settings, time, used, memory, speed, min(domain_lengths(fields)))
    return TimePlan("frozen", centres, snapshot, found, memory, evidence, regular)


def _frozen_ensembles(
    settings: InstrumentSettings, time: np.ndarray, used: np.ndarray, memory: float, speed: float, width: float
) -> tuple[np.ndarray, np.ndarray, bool]:
    """(centres, snapshots, whether without a gap): each snapshot stands for the time nearest to it, but for no longer than the pattern
    takes to pass a domain `width` [m] wide, lest the instrument meets the same water twice."""
    step = settings.averaging_interval
    passing = width / speed if speed > 0.0 else float("inf")
    mine = time[used]
    if mine.size == 1:
        covered = max(step, min(memory, passing, step * ENSEMBLES_OF_ONE_SNAPSHOT))
        count = int(np.floor(covered / step + 1e-9))
        return mine[0] + step * (np.arange(count) + 0.5 - 0.5 * count), np.full(count, used[0]), True
    before, after = 0.5 * (mine[1] - mine[0]), 0.5 * (mine[-1] - mine[-2])
    count = max(1, int(np.floor((mine[-1] + after - mine[0] + before) / step + 1e-9)))
    centres = mine[0] - before + step * (np.arange(count) + 0.5)
    nearest = np.abs(centres[:, None] - mine[None]).argmin(axis=1)
    keep = np.abs(centres - mine[nearest]) <= 0.5 * max(passing - step, 0.0) + 1e-9
    keep |= np.abs(centres - mine[nearest]) <= 0.5 * step
    return centres[keep], used[nearest[keep]], bool(keep.all())
