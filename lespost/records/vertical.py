"""Where the cells of a record lie: depths from depth, height or pressure, fixed or moving with the mooring.

Depth is positive down from the mean surface. `series.py` uses these positions to put every profile on one set
of depths.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from lespost.errors import RecordError
from lespost.findings import Decision, Finding
from lespost.records.raw import RawRecord, RawVariable
from lespost.records.roles import Found, find_role
from lespost.records.settings import RecordSettings
from lespost.units import convert, convertible


@dataclass(frozen=True)
class CellDepths:
    """Depths of the cells [m, positive down]: (level,) where they stand still, (time, level) where they
    move."""

    values: np.ndarray
    decision: Decision
    findings: tuple[Finding, ...] = ()


def _to_axes(
    variable: RawVariable, dims: tuple[str, ...], time_dim: str, level_dim: str | None
) -> np.ndarray | None:
    """Values as (level,) or (time, level), or None where the variable's axes cannot position the cells."""
    kept = tuple(
        d
        for d, n in zip(variable.dims, variable.values.shape, strict=True)
        if n > 1 or d in (time_dim, level_dim)
    )
    values = variable.values.astype(np.float64).reshape(
        [variable.values.shape[variable.dims.index(d)] for d in kept]
    )
    if level_dim is None:
        if kept == ():
            return values.reshape(1)
        if kept == (time_dim,):
            return values[:, None]
        return values.reshape(1) if values.size == 1 else None
    if kept == (level_dim,):
        return values
    if kept == (time_dim, level_dim):
        return values
    if kept == (level_dim, time_dim):
        return values.T
    return None


def _upward(found: Found, role: str, settings: RecordSettings, file: str) -> bool:
    """Whether the coordinate increases upward."""
    if settings.depth_positive != "auto":
        return settings.depth_positive == "up"
    stated = str(found.variable.attributes.get("positive", "")).lower()
    return stated == "up" if stated in ("up", "down") else role == "height"


def cell_depths(
    record: RawRecord,
    settings: RecordSettings,
    found: Mapping[str, Found],
    dims: tuple[str, ...],
    time_dim: str,
    level_dim: str | None,
) -> CellDepths:
    """The depths of the cells of variables with dimensions `dims`.

    Raises RecordError where no variable positions them, or where they lie above the surface.
    """
    file = record.path.name
    if settings.depth is not None and level_dim is None:
        return CellDepths(
            np.array([settings.depth]), Decision("depth", f"{settings.depth:g} m", "recipe", "key depth")
        )
    for role in ("depth", "height"):
        hit = found.get(role)
        if hit is None:
            continue
        values = _to_axes(hit.variable, dims, time_dim, level_dim)
        if values is None:
            continue
        unit = settings.column_units.get(hit.variable.name, hit.variable.units or "m")
        values = np.asarray(
            convert(values, unit, "m", f'{file}, unit of "{hit.variable.name}"'), dtype=np.float64
        )
        if _upward(hit, role, settings, file):
            values = -values
        return CellDepths(_checked(values, hit.variable.name, file), hit.decision("depth"))
    for variable in record.variables.values():
        is_pressure = (
            variable.standard_name.startswith("sea_water_pressure") or "pres" in variable.name.lower()
        )
        if (
            not is_pressure
            or variable.is_quality
            or variable.is_text
            or not convertible(variable.units or "", "dbar")
        ):
            continue
        values = _to_axes(variable, dims, time_dim, level_dim)
        if values is None:
            continue
        return _from_pressure(record, variable, values, found)
    if level_dim is None:
        raise RecordError(
            f'{file}: nothing states the depth of the sensor; write depth = "<number> m" for this record.'
        )
    raise RecordError(
        f'{file}: no depth, height or pressure positions the cells along "{level_dim}"; name the variable '
        "with columns.depth."
    )


def _from_pressure(
    record: RawRecord, variable: RawVariable, values: np.ndarray, found: Mapping[str, Found]
) -> CellDepths:
    """Depths from pressure by the TEOS-10 relation at the record's latitude (45 degrees where it has
    none)."""
    import gsw

    latitude, evidence = 45.0, "latitude unknown, 45 degrees taken: 0.3 % of depth at most"
    place = found.get("latitude")
    if place is not None and np.isfinite(place.variable.values.astype(np.float64)).any():
        latitude = float(np.nanmedian(place.variable.values.astype(np.float64)))
        evidence = f"latitude {latitude:.2f} degrees"
    pressure = convert(values, variable.units or "dbar", "dbar", variable.name)
    depth = -np.asarray(gsw.z_from_p(pressure, latitude), dtype=np.float64)
    decision = Decision("depth", variable.name, "metadata", f"from pressure by TEOS-10, {evidence}")
    return CellDepths(_checked(depth, variable.name, record.path.name), decision)


def _checked(depths: np.ndarray, name: str, file: str) -> np.ndarray:
    """The depths, refused where they are above the surface, absent or not finite for a whole cell."""
    if depths.size == 0 or not np.isfinite(depths).any():
        raise RecordError(f'{file}: "{name}" holds no depths.')
    if np.nanmedian(depths) < 0:
        raise RecordError(
            f'{file}: cells lie above the surface by "{name}" (median depth {np.nanmedian(depths):.3g} m); '
            "its sign and its "
            'attribute positive disagree: write depth_positive = "up" if the values are heights, "down" if '
            "they are depths."
        )
    if depths.ndim == 1 and not np.isfinite(depths).all():
        raise RecordError(
            f'{file}: {int((~np.isfinite(depths)).sum())} of {depths.size} depths in "{name}" are missing.'
        )
    return depths


def onto_fixed_depths(values: np.ndarray, depths: np.ndarray, target: np.ndarray) -> np.ndarray:
    """Profiles (time, level) at moving depths (time, level), interpolated linearly to `target` (level,) [m].

    A value between a good and a missing cell is missing; so is one outside the profile: nothing is
    extrapolated.
    """
    out = np.full((values.shape[0], target.size), np.nan)
    for i in range(values.shape[0]):
        known = np.isfinite(depths[i])
        if known.sum() < 2:
            continue
        order = np.argsort(depths[i][known])
        at, column = depths[i][known][order], values[i][known][order]
        if np.any(np.diff(at) <= 0):
            continue
        inside = (target >= at[0]) & (target <= at[-1])
        # numpy's interpolation passes a NaN neighbour on to the whole interval, which is the gap wanted here;
        # the value exactly on a good cell is kept even if its neighbour is missing
        result = np.interp(target, at, column)
        exact = np.isin(target, at)
        if exact.any():
            result[exact] = column[np.searchsorted(at, target[exact])]
        out[i] = np.where(inside, result, np.nan)
    return out


def resolve_role(record: RawRecord, role: str, settings: RecordSettings) -> Found | None:
    """`find_role` with the columns of the settings."""
    return find_role(record, role, {str(k): v for k, v in settings.columns.items()})
