"""Checks of the profiles themselves: what would quietly spoil an average, found from the one pass alone.

Each function looks for one thing and returns findings (none when all is well). The comparison with the declared forcing is
made in `lespost.profiles.closure`; both are gathered by `check_profiles`.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import xarray as xr

from lespost.findings import Finding
from lespost.profiles.closure import (
    Declared,
    check_momentum_flux,
    check_stokes_direction,
    check_stress_direction,
    check_temperature_flux,
)
from lespost.profiles.settings import IntervalSettings

#: Largest |mean w| over w rms that storing in 14 significant bits explains (4.7e-7 seen on 6400 points), with room.
MEAN_W = 1e-5
#: From here on a mean vertical motion is no matter of storage.
MEAN_W_LARGE = 1e-2
#: Share of the variance of w at the grid scale: 0.05 to 0.13 in resolved turbulence (two real runs), 0.5 in white noise.
GRID_SCALE_SHARE = 0.3
#: Discrete divergence over the size of its terms on a staggered grid: rounding to float32 gives 1e-3 at most.
DIVERGENCE = 1e-2
#: Share of the variance of w that averaging to cell centres may take before it is worth a word.
CENTRING_LOSS = 0.1
#: Width of the domain in layer depths (common practice, no source).
DOMAIN_WIDTHS = 5.0
#: Time between snapshots, in turnover times, above which a change between them goes unseen.
SPARSE = 5.0
#: Drift of the kinetic energy between the halves of a window that is worth a word.
DRIFT = 0.1


def check_profiles(
    profiles: xr.Dataset, declared: Declared, layer_depth: float, intervals: Sequence[IntervalSettings] = ()
) -> list[Finding]:
    """All findings about a run. layer_depth: depth of the turbulent layer, m (NaN: unknown); intervals: averaging windows."""
    found = [
        *check_missing_values(profiles), *check_negative_variances(profiles), *check_constant_levels(profiles),
        *check_mean_w(profiles), *check_divergence(profiles), *check_grid_scale(profiles), *check_centring(profiles),
        *check_snapshots(profiles, layer_depth), *check_domain_width(profiles, layer_depth),
        *check_momentum_flux(profiles, declared), *check_temperature_flux(profiles, declared),
        *check_stress_direction(profiles, declared), *check_stokes_direction(declared),
    ]  # fmt: skip
    for interval in intervals:
        found += check_drift(profiles, interval, layer_depth)
    return found


def check_missing_values(profiles: xr.Dataset) -> list[Finding]:
    """Values that are not finite make every statistic of their level empty."""
    count = profiles["nan_count"].values
    if not count.any():
        return []
    t, k = np.argwhere(count > 0)[0]
    return [
        Finding(
            "missing-values", "error",
            f"{int(count.sum())} values are not finite, on {int((count > 0).sum())} levels, first in snapshot {t + 1} "
            f"(t = {profiles['time'].values[t]:g} s) at z = {profiles['z'].values[k]:g} m: statistics there are empty.",
            float(count.sum()), 0.0, "1",
        )
    ]  # fmt: skip


def check_negative_variances(profiles: xr.Dataset) -> list[Finding]:
    """A variance below zero: only a negative subgrid energy in the files can make one."""
    names = [f"{pair}{part}" for pair in ("uu", "vv", "ww", "thetatheta") for part in ("", "_sgs", "_total")]
    bad = [name for name in names if name in profiles and (profiles[name].values < 0).any()]
    if not bad:
        return []
    lowest = float(profiles[bad[0]].min())
    return [
        Finding(
            "negative-variance", "error",
            f"{', '.join(bad)} fall below zero (lowest {lowest:.3g}): the files' subgrid energy is negative somewhere.",
            lowest, 0.0, "m2 s-2",
        )
    ]  # fmt: skip


def check_constant_levels(profiles: xr.Dataset) -> list[Finding]:
    """Levels on which a velocity component takes one value only: never written, or at rest."""
    found = []
    for name in ("u", "v", "w"):
        flat = profiles[f"{name}_min"].values == profiles[f"{name}_max"].values
        if not flat.any():
            continue
        t, k = np.argwhere(flat)[0]
        found.append(
            Finding(
                "constant-level", "warning",
                f"{name} has one value only on {int(flat.sum())} of {flat.size} levels, first in snapshot {t + 1} at "
                f"z = {profiles['z'].values[k]:g} m: never written, or a fluid at rest.",
                float(flat.sum()), 0.0, "1",
            )
        )  # fmt: skip
    return found


def check_mean_w(profiles: xr.Dataset) -> list[Finding]:
    """The horizontal mean of w vanishes in a periodic box with a lid."""
    largest = np.sqrt(np.nanmax(profiles["ww"].values, axis=1, initial=0.0))[:, None]
    mean = np.abs(profiles["w"].values)
    ratio = np.divide(mean, largest, out=np.zeros_like(mean), where=largest > 0)
    if not np.nanmax(ratio, initial=0.0) > MEAN_W:
        return []
    t, k = np.unravel_index(np.nanargmax(ratio), ratio.shape)
    value = float(ratio[t, k])
    return [
        Finding(
            "mean-w", "warning" if value > MEAN_W_LARGE else "note",
            f"the horizontal mean of w reaches {value:.2g} of its largest root mean square (snapshot {t + 1}, z = "
            f"{profiles['z'].values[k]:g} m). Fluxes use departures from it; an open boundary, or a wrong vertical position of "
            "w, would do this.", value, MEAN_W, "1",
        )
    ]  # fmt: skip


def check_divergence(profiles: xr.Dataset) -> list[Finding]:
    """On a fully staggered grid the discrete divergence must vanish but for rounding."""
    if not profiles.attrs.get("divergence_is_exact", 0):
        return []
    scale = float(np.sqrt(np.nanmean(profiles["divergence_scale"].values ** 2)))
    if not scale > 0:
        return []
    ratio = float(np.sqrt(np.nanmean(profiles["divergence_rms"].values ** 2))) / scale
    if ratio <= DIVERGENCE:
        return []
    return [
        Finding(
            "divergence", "warning",
            f"the velocity is not solenoidal on its grid: divergence {ratio:.2g} of its terms. Positions of u, v, w may be "
            "wrong ([fields].u_position and so on), or components come from different times.", ratio, DIVERGENCE, "1",
        )
    ]  # fmt: skip


def check_grid_scale(profiles: xr.Dataset) -> list[Finding]:
    """Much variance of w at the grid scale: noise of the scheme, or a field stored too coarsely."""
    weight = profiles["ww"].values
    share = profiles["w_grid_scale_share"].values
    known = np.isfinite(share) & (weight > 0)
    if not known.any():
        return []
    value = float((share[known] * weight[known]).sum() / weight[known].sum())
    if value <= GRID_SCALE_SHARE:
        return []
    return [
        Finding(
            "grid-scale-energy", "warning",
            f"{value:.2f} of the variance of w sits at the grid scale (resolved turbulence 0.05 to 0.15, white noise 0.5): "
            "numerical noise, or points left out when the fields were stored.", value, GRID_SCALE_SHARE, "1",
        )
    ]  # fmt: skip


def check_centring(profiles: xr.Dataset) -> list[Finding]:
    """What the two-point average of w to cell centres takes away."""
    if "ww_face" not in profiles:
        return []
    face, centre = profiles["ww_face"].values, profiles["ww"].values
    native = float(np.nansum(0.5 * (face[:, 1:] + face[:, :-1])))
    if not native > 0:
        return []
    loss = 1.0 - float(np.nansum(centre)) / native
    if loss <= CENTRING_LOSS:
        return []
    return [
        Finding(
            "centring-loss", "note",
            f"averaging w to cell centres takes {100 * loss:.0f} % of its variance (half at wavelengths of four levels): "
            "ww_face holds it where the model has it.", loss, CENTRING_LOSS, "1",
        )
    ]  # fmt: skip


def turnover_time(profiles: xr.Dataset, layer_depth: float) -> float:
    """layer_depth over the root mean square of w in the layer, s; NaN where unknown or at rest."""
    inside = profiles["z"].values > -layer_depth
    if not np.isfinite(layer_depth) or not inside.any():
        return float("nan")
    speed = float(np.sqrt(np.nanmean(profiles["ww"].values[:, inside])))
    return layer_depth / speed if speed > 0 else float("nan")


def check_snapshots(profiles: xr.Dataset, layer_depth: float) -> list[Finding]:
    """How many snapshots there are, and how far apart in turnover times."""
    time = profiles["time"].values
    if len(time) == 1:
        return [
            Finding(
                "single-snapshot", "warning",
                "there is one snapshot only: every number is one realisation, and intervals come from its spatial scatter alone.",
                1.0, 2.0, "1",
            )
        ]  # fmt: skip
    turnover = turnover_time(profiles, layer_depth)
    spacing = float(np.median(np.diff(time)))
    if not np.isfinite(turnover):
        return []
    ratio = spacing / turnover
    if ratio < 1.0:
        span = (time[-1] - time[0]) / turnover
        return [
            Finding(
                "snapshots-close", "note",
                f"snapshots are {spacing:g} s apart, {ratio:.2g} turnover times: they are not independent; {len(time)} snapshots "
                f"span {span:.2g} turnover times.", ratio, 1.0, "1",
            )
        ]  # fmt: skip
    if ratio > SPARSE:
        return [
            Finding(
                "snapshots-far", "note",
                f"snapshots are {spacing:g} s apart, {ratio:.2g} turnover times: they are independent, but what happens between "
                "them goes unseen.", ratio, SPARSE, "1",
            )
        ]  # fmt: skip
    return []


def check_domain_width(profiles: xr.Dataset, layer_depth: float) -> list[Finding]:
    """A domain of few layer depths holds few cells and locks their spacing."""
    width = min(float(profiles.attrs["Lx"]), float(profiles.attrs["Ly"]))
    if not layer_depth > 0 or width >= DOMAIN_WIDTHS * layer_depth:
        return []
    return [
        Finding(
            "narrow-domain", "warning",
            f"the domain is {width:g} m wide, {width / layer_depth:.2g} layer depths: it holds few cells, and their spacing must "
            "divide it.", width / layer_depth, DOMAIN_WIDTHS, "1",
        )
    ]  # fmt: skip


def check_drift(profiles: xr.Dataset, interval: IntervalSettings, layer_depth: float) -> list[Finding]:
    """Kinetic energy of the layer that differs between the halves of a window by more than its scatter: still spinning up.

    The scatter is that about a straight line, so that the drift itself does not hide it. Needs four snapshots.
    """
    time = profiles["time"].values
    inside = (time >= interval.start) & (time <= interval.end)
    if inside.sum() < 4:
        return []
    deep = profiles["z"].values > (-layer_depth if np.isfinite(layer_depth) else -np.inf)
    energy = sum(0.5 * profiles[name].values[inside][:, deep].mean(axis=1) for name in ("uu", "vv", "ww"))
    t = time[inside]
    half = len(t) // 2
    early, late = float(energy[:half].mean()), float(energy[-half:].mean())
    residual = energy - np.polyval(np.polyfit(t, energy, 1), t)
    scatter = float(residual.std(ddof=2)) * np.sqrt(2.0 / half)
    change = (late - early) / float(energy.mean()) if energy.mean() > 0 else 0.0
    if abs(late - early) <= 2.0 * scatter or abs(change) <= DRIFT:
        return []
    way = "grows" if change > 0 else "decays"
    return [
        Finding(
            "drift", "warning",
            f'window "{interval.name}": turbulent kinetic energy {way} by {100 * abs(change):.0f} % from its first to its second '
            "half: a longer spin-up, or shorter windows, would keep the average meaningful.", change, DRIFT, "1",
        )
    ]  # fmt: skip
