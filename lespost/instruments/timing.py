"""What happens between snapshots: measured decorrelation, and the mode of time that does not lie.

Interpolated: pings are linear in time between snapshots; honest only while a snapshot still resembles its neighbour.
Frozen: the pattern of the nearest snapshot is carried past the instrument; honest only while the eddies have no time to turn
over.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import xarray as xr

from lespost.errors import DataError

#: Correlation of neighbouring snapshots from which linear interpolation keeps most of the variance: between two snapshots of
#: correlation r the interpolated variance falls to (1 + r)/2 (derived here).
SMALLEST_CORRELATION = 0.8
#: Share of a turnover for which a pattern counts as frozen; common practice, no source.
LONGEST_FROZEN = 1.0


@dataclass(frozen=True)
class TimePlan:
    """mode; interval: time covered by one snapshot [s]; correlation: of w between neighbouring snapshots (NaN: one snapshot);
    turnover: eddy turnover time [s] (NaN: unknown)."""

    mode: Literal["frozen", "interpolated"]
    interval: float
    correlation: float
    turnover: float


def snapshot_correlation(fields: xr.Dataset, height: float) -> float:
    """Correlation of w on the level nearest `height` [m] between the first two snapshots; NaN for a single one."""
    if fields.sizes["time"] < 2:
        return float("nan")
    axis = "z_face" if "z_face" in fields["w"].dims else "z"
    level = int(np.argmin(np.abs(fields[axis].values - height)))
    one, two = (np.asarray(fields["w"][t, level].values, float) for t in (0, 1))
    one, two = one - one.mean(), two - two.mean()
    scale = np.sqrt((one**2).mean() * (two**2).mean())
    return float((one * two).mean() / scale) if scale > 0 else float("nan")


def plan_time(asked: Literal["auto", "frozen", "interpolated"], fields: xr.Dataset, profiles: xr.Dataset, depths: np.ndarray,
              averaging: float, name: str) -> TimePlan:
    """The mode for an instrument with cells at `depths` [m] and ensembles of `averaging` [s].

    Raises DataError, with the numbers, for a mode that would lie.
    """
    time = fields["time"].values
    interval = float(np.median(np.diff(time))) if time.size > 1 else float("nan")
    correlation = snapshot_correlation(fields, -float(np.median(depths)))
    inside = (profiles["z"].values >= -depths.max()) & (profiles["z"].values <= -depths.min())
    speed = float(np.sqrt(profiles["ww"].values[:, inside].mean())) if inside.any() else 0.0
    turnover = 2.0 * float(depths.max()) / speed if speed > 0 else float("nan")
    resolved = np.isfinite(correlation) and correlation >= SMALLEST_CORRELATION
    if asked == "interpolated" and not resolved:
        raise DataError(
            f'instrument "{name}": snapshots {interval:g} s apart correlate by {correlation:.2f} (w at {np.median(depths):.0f} m); '
            f"interpolation in time needs {SMALLEST_CORRELATION}, else it would take variance away: write time_mode = \"frozen\".")
    if asked == "interpolated" or (asked == "auto" and resolved):
        return TimePlan("interpolated", interval, correlation, turnover)
    covered = interval if np.isfinite(interval) else 10 * averaging
    if np.isfinite(turnover) and averaging > LONGEST_FROZEN * turnover:
        raise DataError(
            f'instrument "{name}": an ensemble of {averaging:g} s is longer than the eddy turnover of {turnover:.0f} s: a frozen '
            "pattern would lie, and the snapshots do not resolve the eddies; shorten averaging_interval or store snapshots more often.")
    if np.isfinite(turnover):
        covered = min(covered, max(averaging, LONGEST_FROZEN * turnover))
    return TimePlan("frozen", covered, correlation, turnover)
