"""What a record holds, how much of it is good, what it can resolve: the answer of `lespost record`.

Works on any file that can be read, velocities or not; nothing is decided here that `read.py` would refuse.
"""

from __future__ import annotations

import warnings
from dataclasses import asdict, dataclass
from datetime import timedelta
from typing import Any

import numpy as np

from lespost.errors import LespostError
from lespost.findings import Finding
from lespost.records import fold
from lespost.records.flags import flag_table, to_qartod
from lespost.records.gather import quality_variables
from lespost.records.noise import lag_zero_noise_variance, plateau_noise_variance
from lespost.records.raw import RawRecord, RawVariable
from lespost.records.read import time_axis
from lespost.records.roles import ROLES, VELOCITY_ROLES, find_role
from lespost.records.time import Sampling, TimeAxis, check_order, iso, parse_iso, sampling
from lespost.units import convert, convertible


@dataclass(frozen=True)
class VariableDescription:
    """One data variable. good_share: share of values present whose flag is pass or not evaluated; None
    without flags.

    noise_lag_zero, noise_plateau: noise standard deviation in the variable's unit, median over its cells;
    None where the series is too short or irregular. minimum to standard_deviation: over all values present.
    """

    name: str
    role: str | None
    standard_name: str
    units: str | None
    axes: tuple[str, ...]
    count: int
    missing_share: float
    good_share: float | None
    minimum: float | None
    maximum: float | None
    mean: float | None
    standard_deviation: float | None
    noise_lag_zero: float | None
    noise_plateau: float | None

    def to_text(self) -> str:
        """One line of the terminal's table."""
        good = "-" if self.good_share is None else f"{100 * self.good_share:.1f}%"
        return (
            f"  {self.name[:21]:<22}{(self.role or '')[:15]:<16}{(self.units or '')[:15]:<16}"
            f"{100 * (1 - self.missing_share):>7.1f}%{good:>8}{_short(self.mean):>11}"
            f"{_short(self.standard_deviation):>11}{_short(self.noise_lag_zero):>14}{_short(self.noise_plateau):>11}"
        )


@dataclass(frozen=True)
class RecordDescription:
    """A record in numbers. Times are ISO texts; depths [m, positive down]; intervals and periods [s]."""

    file: str
    layout: str
    feature_type: str
    title: str
    dimensions: dict[str, int]
    time_start: str | None
    time_end: str | None
    sampling_interval: float | None
    regular: bool | None
    time_gaps: int | None
    shortest_period: float | None
    longest_period: float | None
    latitude: float | None
    longitude: float | None
    shallowest: float | None
    deepest: float | None
    usable_for_comparison: bool
    reason: str
    variables: tuple[VariableDescription, ...]
    findings: tuple[Finding, ...]

    def to_dict(self) -> dict[str, Any]:
        """Plain dict for JSON, NaN as None."""
        return _plain(asdict(self))

    def to_text(self) -> str:
        """A readable page for the terminal."""
        lines = [
            f"{self.file}: {self.layout}",
            f"  {self.feature_type or 'no feature type'}; " + _sizes(self.dimensions),
        ]
        if self.title:
            lines.append(f"  title: {self.title}")
        if self.time_start:
            steps = "" if self.sampling_interval is None else f", every {self.sampling_interval:g} s"
            steps += "" if self.regular in (True, None) else " (irregular)"
            steps += f", {self.time_gaps} gaps" if self.time_gaps else ""
            lines.append(f"  time: {self.time_start} to {self.time_end}{steps}")
        if self.shortest_period and self.longest_period and self.longest_period > self.shortest_period:
            lines.append(
                f"  resolves periods from {self.shortest_period:g} s to about {self.longest_period:g} s"
            )
        elif self.shortest_period:
            lines.append("  too short to resolve any period ten times over")
        if self.shallowest is not None:
            lines.append(f"  depth: {self.shallowest:g} to {self.deepest:g} m")
        if self.latitude is not None and self.longitude is not None:
            lines.append(f"  position: {self.latitude:.4f} degrees north, {self.longitude:.4f} degrees east")
        lines.append("")
        head = (
            f"  {'variable':<22}{'taken as':<16}{'unit':<16}{'present':>8}{'good':>8}{'mean':>11}{'sd':>11}"
        )
        lines.append(head + f"{'noise, lag 0':>14}{'plateau':>11}")
        lines += [v.to_text() for v in self.variables]
        lines.append("")
        lines.append(
            f"  {'can' if self.usable_for_comparison else 'cannot'} be compared with virtual velocities: "
            f"{self.reason}"
        )
        lines += _grouped(self.findings, self.file)
        return "\n".join(lines)


def _grouped(findings: tuple[Finding, ...], file: str) -> list[str]:
    """One line per kind of finding: the first message, and how many more there are like it."""
    groups: dict[tuple[str, str], list[Finding]] = {}
    for f in findings:
        groups.setdefault((f.severity, f.code), []).append(f)
    order = {"error": 0, "warning": 1, "note": 2}
    lines = []
    for (severity, _), members in sorted(groups.items(), key=lambda item: order[item[0][0]]):
        more = f" ({len(members) - 1} more like it)" if len(members) > 1 else ""
        text = members[0].message.removeprefix(file).lstrip(":, ")
        lines.append(f"  {severity}: {text}{more}")
    return lines


def _short(number: float | None) -> str:
    return "-" if number is None else f"{number:.4g}"


def _sizes(dimensions: dict[str, int]) -> str:
    return ", ".join(f"{name} {size}" for name, size in dimensions.items()) or "no axes"


def _plain(value: Any) -> Any:
    """Nested plain Python, NaN and infinity as None."""
    if isinstance(value, dict):
        return {k: _plain(v) for k, v in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(v) for v in value]
    if isinstance(value, float | np.floating):
        return float(value) if np.isfinite(value) else None
    if isinstance(value, np.integer):
        return int(value)
    return value


def describe(record: RawRecord) -> RecordDescription:
    """The description of a raw record. Faults that would stop `read_record` become findings of severity
    "error"."""
    findings = list(record.findings)

    def attempt(what: str, action: Any) -> Any:
        try:
            return action()
        except LespostError as error:
            findings.append(Finding(what, "error", str(error)))
            return None

    roles: dict[str, str] = {}
    found = {}
    for role in ROLES:
        hit = attempt("role-undecided", lambda role=role: find_role(record, role))
        if hit is not None:
            found[role] = hit
            roles.setdefault(hit.variable.name, role)
    axis = attempt("time-unreadable", lambda: time_axis(record, found["time"])) if "time" in found else None
    if "time" not in found:
        findings.append(Finding("time-absent", "error", f"{record.path.name}: no time axis was found."))
    seconds, time_dim, grid = None, None, None
    if axis is not None:
        seconds = axis.seconds
        time_dim = found["time"].variable.dims[0] if found["time"].variable.dims else None
        if time_dim == "row" and "depth" in found:
            folded = attempt("table-undecided", lambda: fold.fold_table(record, found))
            if folded is not None and "row" not in folded.dimensions:
                seconds = np.unique(seconds)
        grid = attempt(
            "time-order", lambda: _checked_sampling(TimeAxis(seconds, axis.origin), record.path.name)
        )
    regular = grid is not None and grid.regular and grid.gaps == 0
    variables = tuple(
        _variable(record, v, roles.get(v.name), time_dim if regular else None, findings)
        for v in record.variables.values()
        if not v.is_quality and not v.is_text
    )
    velocities = [r for r in VELOCITY_ROLES if r in found]
    moving = record.feature_type.lower().startswith(("trajectory", "profile"))
    usable = bool(velocities) and grid is not None and not moving
    if not velocities:
        reason = "it holds no water velocity."
    elif moving:
        reason = f"it is a {record.feature_type} record, of a moving instrument."
    elif grid is None:
        reason = "its time axis cannot be used."
    else:
        reason = f"it holds {', '.join(velocities)} velocity."
    depths = _depth_range(found)
    return RecordDescription(
        file=record.path.name,
        layout=record.layout,
        feature_type=record.feature_type,
        title=str(record.attributes.get("title", "")),
        dimensions=dict(record.dimensions),
        time_start=None if axis is None else _moment(axis.origin, float(np.min(axis.seconds))),
        time_end=None if axis is None else _moment(axis.origin, float(np.max(axis.seconds))),
        sampling_interval=None if grid is None or not np.isfinite(grid.interval) else grid.interval,
        regular=None if grid is None else grid.regular,
        time_gaps=None if grid is None else grid.gaps,
        shortest_period=None if grid is None or not np.isfinite(grid.interval) else 2.0 * grid.interval,
        # ten periods in the record: fewer leave the variance of a band unknown by more than half (Lenschow et
        # al. 1994)
        longest_period=None
        if grid is None or seconds is None or seconds.size < 2
        else float(np.ptp(seconds)) / 10.0,
        latitude=_median(found, "latitude"),
        longitude=_median(found, "longitude"),
        shallowest=depths[0],
        deepest=depths[1],
        usable_for_comparison=usable,
        reason=reason,
        variables=variables,
        findings=tuple(dict.fromkeys(findings)),
    )


def _checked_sampling(axis: TimeAxis, file: str) -> Sampling:
    check_order(axis, file)
    return sampling(axis.seconds)


def _moment(origin: str, seconds: float) -> str:
    return iso(parse_iso(origin, "time") + timedelta(seconds=seconds))


def _median(found: dict[str, Any], role: str) -> float | None:
    if role not in found or found[role].variable.is_text:
        return None
    values = found[role].variable.values.astype(np.float64)
    return float(np.nanmedian(values)) if np.isfinite(values).any() else None


def _depth_range(found: dict[str, Any]) -> tuple[float | None, float | None]:
    for role, unit, sign in (("depth", "m", 1.0), ("height", "m", -1.0)):
        if role in found and not found[role].variable.is_text:
            v: RawVariable = found[role].variable
            values = v.values.astype(np.float64)
            if np.isfinite(values).any() and convertible(v.units or unit, unit):
                metres = sign * np.asarray(convert(values, v.units or unit, unit))
                return float(np.nanmin(metres)), float(np.nanmax(metres))
    return None, None


def _variable(
    record: RawRecord, variable: RawVariable, role: str | None, time_dim: str | None, findings: list[Finding]
) -> VariableDescription:
    values = np.asarray(variable.values, dtype=np.float64)
    finite = np.isfinite(values)
    present = values[finite]
    return VariableDescription(
        name=variable.name,
        role=role,
        standard_name=variable.standard_name,
        units=variable.units,
        axes=variable.dims,
        count=int(values.size),
        missing_share=float(1.0 - finite.mean()) if values.size else 1.0,
        good_share=_good_share(record, variable, finite, findings),
        minimum=float(present.min()) if present.size else None,
        maximum=float(present.max()) if present.size else None,
        mean=float(present.mean()) if present.size else None,
        standard_deviation=float(present.std()) if present.size else None,
        **_noise(variable, values, role, time_dim),
    )


def _good_share(
    record: RawRecord, variable: RawVariable, finite: np.ndarray, findings: list[Finding]
) -> float | None:
    """Share of the values present that are flagged pass or not evaluated."""
    aggregate, _ = quality_variables(record, variable)
    if aggregate is None or not finite.any():
        return None
    where = f'{record.path.name}, "{aggregate.name}"'
    context = [
        str(v)
        for k, v in record.attributes.items()
        if "qc" in k.lower() or "flag" in k.lower() or k == "Conventions"
    ]
    try:
        table = flag_table(aggregate.attributes, where, context)
        flags, more = to_qartod(aggregate.values, table, where)
    except LespostError as error:
        findings.append(Finding("flags-unreadable", "error", str(error)))
        return None
    findings.extend([*table.findings, *more])
    if flags.shape != finite.shape:
        return None
    return float(np.isin(flags[finite], (1, 2)).mean())


def _noise(
    variable: RawVariable, values: np.ndarray, role: str | None, time_dim: str | None
) -> dict[str, float | None]:
    """Noise standard deviations of a series on a regular time axis of at least 64 samples."""
    none: dict[str, float | None] = {"noise_lag_zero": None, "noise_plateau": None}
    if (
        time_dim is None
        or time_dim not in variable.dims
        or role in ("time", "depth", "latitude", "longitude", None)
    ):
        return none
    series = np.moveaxis(values, variable.dims.index(time_dim), 0)
    if series.shape[0] < 64:
        return none
    series = series.reshape(series.shape[0], -1)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", RuntimeWarning)  # cells without a single good sample
        lag = float(np.nanmedian(np.sqrt(lag_zero_noise_variance(series))))
        plateau = float(np.nanmedian(np.sqrt(plateau_noise_variance(series))))
    return {
        "noise_lag_zero": lag if np.isfinite(lag) else None,
        "noise_plateau": plateau if np.isfinite(plateau) else None,
    }
