"""Checks of a small sample of the canonical fields: what could make every later number wrong, said before computing it.

Each check is a function from a `LevelSample` (a few whole levels of one snapshot) to `Finding`s. Layout and continuity
are checked in `lespost.fields.detect`, unwritten data in `lespost.fields.gaps`.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import xarray as xr

from lespost.errors import DataError, LayoutError
from lespost.fields.continuity import significant_bits
from lespost.findings import Finding, Hint

#: Levels looked at; all levels of a store whose chunks span the whole depth cost no more.
SAMPLE_LEVELS = 8
#: Bytes that the sample may decode: with very large chunks fewer levels are looked at, but at least three.
SAMPLE_BYTES = 512 << 20
#: |horizontal mean of w| above this fraction of its rms is not round-off (common practice, no source).
MEAN_W = 1e-6
#: Fraction of horizontal variance in the top third of wavenumbers above which the flow is called under-resolved.
GRID_SCALE = 0.10
#: w at the surface face must be below this fraction of its largest rms under a rigid lid.
SURFACE_W = 1e-3


@dataclass(frozen=True)
class LevelSample:
    """levels: numbers of the z (or z_face, for w on faces) levels. values: name -> (level, y, x), float32 or float64.

    seconds: time of the snapshot. height: name -> z of its levels, m.
    """

    values: Mapping[str, np.ndarray]
    height: Mapping[str, np.ndarray]
    seconds: float


def take(fields: xr.Dataset) -> LevelSample:
    """Read the sample: a few levels from bottom to surface of the last snapshot.

    Adjacent levels are read in one go when the stored chunks hold them together.
    """
    t = fields.sizes["time"] - 1
    values: dict[str, np.ndarray] = {}
    height: dict[str, np.ndarray] = {}
    for name in ("u", "v", "w", "theta"):
        if name not in fields:
            continue
        field = fields[name]
        vertical = str(field.dims[1])
        size = field.sizes[vertical]
        chunks = field.encoding.get("preferred_chunks", {})
        per_level = math.prod(chunks.values()) * field.dtype.itemsize if chunks else 0
        count = int(np.clip(SAMPLE_BYTES // (4 * max(per_level, 1)), 3, SAMPLE_LEVELS))
        levels = np.unique(np.linspace(0, size - 1, min(count, size)).round().astype(int))
        chunk = chunks.get(vertical, 1)
        groups: dict[int, list[int]] = {}
        for level in levels:
            groups.setdefault(int(level) // max(int(chunk), 1), []).append(int(level))
        parts = [
            field[t, group[0] : group[-1] + 1].values[np.array(group) - group[0]] for group in groups.values()
        ]
        values[name] = np.concatenate(parts)
        height[name] = fields[vertical].values[levels]
    return LevelSample(values, height, float(fields["time"].values[t]))


def run(fields: xr.Dataset, sample: LevelSample, hints: Mapping[str, Hint], rigid_lid: bool, scaled: bool) -> list[Finding]:
    """Every check. Raises DataError for NaN, LayoutError where the data contradict the vertical axis."""
    refuse_not_finite(fields, sample)
    if rigid_lid:
        refuse_moving_lid(fields, sample)
    refuse_upside_down(fields, sample, hints)
    findings = [
        *constant_levels(sample), *mean_w(sample), *grid_scale(fields, sample), *magnitudes(sample),
        *looks_scaled(fields, sample, hints, scaled), *lagrangian(fields, sample, hints), *packed(fields),
    ]  # fmt: skip
    return findings


def refuse_not_finite(fields: xr.Dataset, sample: LevelSample) -> None:
    """Raise DataError if the sample holds NaN or infinity."""
    for name, values in sample.values.items():
        bad = ~np.isfinite(values)
        if bad.any():
            level = int(np.flatnonzero(bad.any(axis=(1, 2)))[0])
            raise DataError(
                f"{fields.attrs.get('source', 'fields')}: {name} at {sample.seconds:.10g} s holds {int(bad.sum())} values "
                f"that are not numbers in {bad.shape[0]} sampled levels, the first at z = {sample.height[name][level]:.4g} m; "
                "the run blew up or the file is incomplete. Take the snapshot out of [fields].path or write it again."
            )


def refuse_moving_lid(fields: xr.Dataset, sample: LevelSample) -> None:
    """Raise LayoutError if w on faces does not vanish at the surface although a rigid lid is assumed."""
    w = sample.values["w"]
    if "z_face" not in fields["w"].dims or sample.height["w"][-1] < -1e-9:
        return
    rms = np.sqrt(np.mean(np.square(w, dtype=np.float64), axis=(1, 2)))
    if rms.max() > 0 and rms[-1] > SURFACE_W * rms.max():
        raise LayoutError(
            f"{fields.attrs.get('source', 'fields')}: w is {rms[-1]:.3g} m s-1 (rms) at the surface face z = 0 where it must "
            f"vanish ({rms.max():.3g} below). Either w sits elsewhere (write [fields].w_position, e.g. \"centre\" or "
            '"faces_without_surface"), or the surface is at the other end (surface), or it moves (rigid_lid = false).'
        )


def refuse_upside_down(fields: xr.Dataset, sample: LevelSample, hints: Mapping[str, Hint]) -> None:
    """Raise LayoutError if two of three signs of the vertical say that the file is upside down.

    The signs: temperature increases upward below the layer; w is strong near the surface and weak far below; the Stokes
    drift decays downward.
    """
    votes: dict[str, bool] = {}
    if "theta" in sample.values:
        mean = sample.values["theta"].mean(axis=(1, 2), dtype=np.float64)
        change = float(mean[-1] - mean[0])
        if abs(change) > 1e-3:
            votes[f"temperature changes by {change:+.3g} K from the bottom to the surface"] = change > 0
    w = np.sqrt(np.mean(np.square(sample.values["w"], dtype=np.float64), axis=(1, 2)))
    third = max(1, len(w) // 3)
    top, bottom = float(w[-third:].max()), float(w[:third].max())
    if max(top, bottom) > 2.0 * min(top, bottom):
        votes[f"w has an rms of {top:.2g} m s-1 in the upper third and {bottom:.2g} in the lower"] = top > bottom
    shape = next((hints[k] for k in ("stokes_profile_shape", "stokes_profile_u") if k in hints), None)
    if shape is not None and shape.dims == ("z",):
        profile = np.abs(np.asarray(shape.value))
        if max(profile[0], profile[-1]) > 2.0 * min(profile[0], profile[-1]):
            votes["the Stokes drift is strongest at the " + ("top" if profile[-1] > profile[0] else "bottom")] = bool(
                profile[-1] > profile[0]
            )
    against = [text for text, agrees in votes.items() if not agrees]
    if len(against) >= 2:
        raise LayoutError(
            f"{fields.attrs.get('source', 'fields')}: the vertical axis looks upside down: {'; '.join(against)}. If the "
            "label in the file is wrong, write [fields].z_sense or surface (and w_positive) as they really are."
        )


def constant_levels(sample: LevelSample) -> list[Finding]:
    """Levels on which a component does not vary at all, other than w at the boundaries."""
    found = []
    for name, values in sample.values.items():
        flat = np.ptp(values.reshape(len(values), -1), axis=1) == 0
        if name == "w":
            flat[0] = flat[-1] = False
        if flat.any() and name != "theta":
            heights = ", ".join(f"{z:.4g}" for z in sample.height[name][flat][:4])
            found.append(Finding(
                "constant-levels", "warning",
                f"{name} has the same value everywhere on {int(flat.sum())} of {len(values)} sampled levels (z = {heights} m): "
                "still water, or levels that were never written.",
                float(flat.sum()), 0.0, "levels",
            ))  # fmt: skip
    return found


def mean_w(sample: LevelSample) -> list[Finding]:
    """Horizontal mean of w, which continuity makes zero in a periodic domain, beyond what rounding can leave."""
    w = np.asarray(sample.values["w"], np.float64)
    rms = float(np.sqrt(np.mean(w**2)))
    if rms == 0.0:
        return []
    largest = float(np.max(np.abs(w.mean(axis=(1, 2))))) / rms
    rounding = 2.0 ** -significant_bits(sample.values["w"]) / math.sqrt(w.shape[1] * w.shape[2])
    limit = max(MEAN_W, 10.0 * rounding)
    if largest <= limit:
        return []
    return [Finding(
        "mean-w", "warning",
        f"the horizontal mean of w reaches {largest:.2g} of its rms where a periodic domain leaves {limit:.1g}: boundaries are "
        "open, the domain is cut out of a larger one, or a column is repeated. Fluxes are taken about the level mean.",
        largest, limit, "1",
    )]  # fmt: skip


def grid_scale(fields: xr.Dataset, sample: LevelSample) -> list[Finding]:
    """Share of horizontal variance of w beyond two thirds of the largest wavenumber in x or y."""
    w = np.asarray(sample.values["w"], np.float64)
    w = w - w.mean(axis=(1, 2), keepdims=True)
    power = np.abs(np.fft.rfft2(w)) ** 2
    power[..., 1 : (w.shape[2] + 1) // 2] *= 2.0
    total = float(power.sum())
    if total == 0.0 or min(w.shape[1:]) < 8:
        return []
    ky, kx = np.abs(np.fft.fftfreq(w.shape[1]))[:, None], np.fft.rfftfreq(w.shape[2])[None, :]
    share = float(power[:, np.maximum(kx, ky) > 1.0 / 3.0].sum()) / total
    if share <= GRID_SCALE:
        return []
    return [Finding(
        "grid-scale-energy", "warning",
        f"{100 * share:.0f} % of the variance of w lies at wavelengths shorter than three grid lengths: the flow is "
        "under-resolved or noisy, and the subgrid part is not small.",
        share, GRID_SCALE, "1",
    )]  # fmt: skip


def magnitudes(sample: LevelSample) -> list[Finding]:
    """Velocities that no ocean boundary layer has."""
    largest = max(float(np.max(np.abs(sample.values[n]))) for n in ("u", "v", "w"))
    if largest <= 5.0:
        return []
    return [Finding(
        "velocity-magnitude", "warning",
        f"velocities reach {largest:.3g} m s-1: check the units (cm s-1?) in [fields].units, or give [fields.scales] if the "
        "file is non-dimensional.",
        largest, 5.0, "m s-1",
    )]  # fmt: skip


def looks_scaled(fields: xr.Dataset, sample: LevelSample, hints: Mapping[str, Hint], scaled: bool) -> list[Finding]:
    """Signs of a non-dimensional file that was read as metres and seconds."""
    if scaled:
        return []
    signs = []
    depth = float(fields["z_face"].values[-1] - fields["z_face"].values[0])
    if depth < 5.0:
        signs.append(f"the domain is {depth:.3g} m deep")
    friction = hints.get("friction_velocity")
    if friction is not None and abs(float(np.mean(friction.value)) - 1.0) < 0.05:
        signs.append("the friction velocity is 1")
    time = fields["time"].values
    steps = np.diff(time)
    if len(time) > 1 and float(time[-1]) < 1e3 and float(np.median(steps)) < 1.0:
        signs.append(f"{len(time)} snapshots are {float(np.median(steps)):.3g} s apart")
    if float(np.sqrt(np.mean(np.square(sample.values["w"], dtype=np.float64)))) > 0.3:
        signs.append("w has an rms above 0.3 m s-1")
    if len(signs) < 2:
        return []
    return [Finding(
        "looks-scaled", "warning",
        f"looks scaled: {', '.join(signs)}. If the file is non-dimensional, write [fields.scales] length, velocity (and time).",
        float(len(signs)), 1.0, "signs",
    )]  # fmt: skip


def lagrangian(fields: xr.Dataset, sample: LevelSample, hints: Mapping[str, Hint]) -> list[Finding]:
    """Whether the mean current sheared like the Stokes drift suggests that u, v include it.

    Only with a Stokes profile and a surface value in the files. Near the surface the shear of the mean current along the
    drift is compared with that of the drift; in a well-mixed Eulerian current it is a small part of it.
    """
    shape, surface = hints.get("stokes_profile_shape"), hints.get("stokes_surface_speed")
    if shape is None or surface is None or shape.dims != ("z",) or fields.attrs.get("velocity_kind") == "lagrangian":
        return []
    speed = float(np.ravel(surface.value)[-1])
    direction = hints.get("stokes_direction")
    angle = math.radians(float(np.ravel(direction.value)[-1])) if direction is not None else 0.0
    if speed <= 0.0:
        return []
    drift = speed * np.asarray(shape.value, np.float64)
    upper = int((np.abs(shape.value) > 0.1 * np.abs(shape.value).max()).sum())
    count = max(2, min(upper, 12))
    if fields.sizes["z"] < count:
        return []
    t = fields.sizes["time"] - 1
    mean = [fields[n][t, -count:].values.mean(axis=(1, 2), dtype=np.float64) for n in ("u", "v")]
    along = mean[0] * math.cos(angle) + mean[1] * math.sin(angle)
    a, b = np.diff(along), np.diff(drift[-count:])
    if float(np.dot(b, b)) == 0.0:
        return []
    slope = float(np.dot(a, b) / np.dot(b, b))
    if not 0.7 < slope < 1.3:
        return []
    return [Finding(
        "lagrangian-velocity", "warning",
        f"the mean current near the surface is sheared {slope:.2f} times as the Stokes drift: u and v may include the drift. If "
        'so, write [fields].velocity_kind = "lagrangian"; otherwise Stokes production would be counted as shear production.',
        slope, 0.7, "1",
    )]  # fmt: skip


def packed(fields: xr.Dataset) -> list[Finding]:
    """Velocities stored as packed integers: their resolution limits small variances."""
    names = [str(n) for n in ("u", "v", "w", "theta") if n in fields and fields[n].attrs.get("packed_resolution")]
    if not names:
        return []
    grain = max(float(fields[n].attrs["packed_resolution"]) for n in names)
    return [Finding(
        "packed-integers", "note",
        f"{', '.join(names)} are stored as packed integers (coarsest step {grain:.2g}); variances below its square / 12 are "
        "rounding. Scale and offset are taken from each file.",
        grain, 0.0, "m s-1",
    )]  # fmt: skip


def chunk_cost(fields: xr.Dataset) -> list[Finding]:
    """Bytes read over bytes needed for one level, where the stored chunks make it more than four."""
    costly: dict[str, float] = {}
    shape: Mapping[str, int] = {}
    for name in ("u", "v", "w", "theta"):
        if name not in fields or not fields[name].encoding.get("preferred_chunks"):
            continue
        ratio = read_ratio(fields[name], {str(fields[name].dims[1]): 1, "time": 1})
        if ratio > 4.0:
            costly[name], shape = ratio, shape or fields[name].encoding["preferred_chunks"]
    if not costly:
        return []
    worst = max(costly.values())
    text = ", ".join(f"{dim} {count}" for dim, count in shape.items())
    return [Finding(
        "chunk-shape", "warning",
        f"{', '.join(costly)} are stored in chunks of {text}: one level of one snapshot reads {worst:.0f} times the bytes it "
        "needs. Statistics of whole snapshots are hardly slowed; plan views and time series at one level are.",
        worst, 4.0, "1",
    )]  # fmt: skip


def read_ratio(field: xr.DataArray, wanted: Mapping[str, int]) -> float:
    """Bytes decoded / bytes needed to read `wanted` points along each dimension (all points along the others)."""
    chunks = field.encoding.get("preferred_chunks", {})
    ratio = 1.0
    for dim, chunk in chunks.items():
        need = min(wanted.get(str(dim), field.sizes[dim]), field.sizes[dim])
        read = min(math.ceil(need / chunk) * chunk, max(field.sizes[dim], need))
        ratio *= read / need
    return ratio
