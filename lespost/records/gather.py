"""One variable of a record as (time, level) in its unit, with one QARTOD flag per sample.

Which variable it is was settled in `roles.py`; what its flag numbers mean is settled in `flags.py`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from lespost.errors import RecordError
from lespost.findings import Decision, Finding
from lespost.records.faults import valid_range
from lespost.records.flags import (
    FAIL,
    MISSING,
    NOT_EVALUATED,
    flag_table,
    normalise,
    set_aside,
    to_qartod,
    worst,
)
from lespost.records.raw import RawRecord, RawVariable
from lespost.records.roles import ROLES
from lespost.records.settings import RecordSettings
from lespost.units import convert

_SUFFIXES = ("_qc", "_QC", "_flag", "_flags", "_quality_flag", "_qc_agg", "_quality", "_qartod")


@dataclass(frozen=True)
class Gathered:
    """values, flags: (time, level). units: as in the file."""

    name: str
    values: np.ndarray
    flags: np.ndarray
    units: str
    findings: tuple[Finding, ...] = ()
    decisions: tuple[Decision, ...] = ()

    def at(self, keep: np.ndarray) -> Gathered:
        """The samples where `keep` (time,) is true."""
        return replace(self, values=self.values[keep], flags=self.flags[keep])


def _two_axes(variable: RawVariable, time_dim: str, level_dim: str | None, file: str) -> np.ndarray:
    """Values as (time, level); axes of length 1 are dropped."""
    dims = list(variable.dims)
    values = variable.values
    for d in [d for d in dims if d not in (time_dim, level_dim)]:
        axis = dims.index(d)
        if values.shape[axis] != 1:
            raise RecordError(f'{file}: "{variable.name}" has a second axis of cells "{d}".')
        values = np.squeeze(values, axis=axis)
        dims.remove(d)
    if time_dim not in dims:
        raise RecordError(f'{file}: "{variable.name}" has no time axis "{time_dim}".')
    if level_dim is None or level_dim not in dims:
        return values.reshape(values.shape[0], 1)
    return values if dims.index(time_dim) == 0 else values.T


def quality_variables(
    record: RawRecord, variable: RawVariable
) -> tuple[RawVariable | None, tuple[RawVariable, ...]]:
    """(aggregate flags, flags of single tests) that belong to a variable.

    Companions are those named in ancillary_variables, in whatever case, else the usual suffixes. A companion
    is a single test if its standard name says so, or its name holds "_test" or follows the pattern
    name_qartod_test.
    """
    lower = {name.lower(): v for name, v in record.variables.items()}
    named = [lower.get(n.lower()) for n in str(variable.attributes.get("ancillary_variables", "")).split()]
    companions = [v for v in named if v is not None and v.is_quality]
    if not companions:
        for suffix in _SUFFIXES:
            twin = lower.get((variable.name + suffix).lower())
            if twin is not None and twin.name != variable.name:
                companions.append(twin)
                break
    tests: list[RawVariable] = []
    aggregates: list[RawVariable] = []
    for v in companions:
        standard, name = v.standard_name, v.name.lower()
        single = standard.endswith("_test_quality_flag") or name.endswith("_test") or "_test_" in name
        is_aggregate = standard == "aggregate_quality_flag" or name.endswith(
            ("_agg", "_aggregate", "_primary_flag")
        )
        (tests if single and not is_aggregate else aggregates).append(v)
    aggregates.sort(key=lambda v: v.standard_name != "aggregate_quality_flag")
    return (aggregates[0] if aggregates else None), tuple(tests)


def gather_variable(
    record: RawRecord,
    role: str,
    variable: RawVariable,
    time_dim: str,
    level_dim: str | None,
    settings: RecordSettings,
) -> Gathered:
    """A variable with its flags, converted to the unit of its role.

    Raises RecordError for absent or unusable units and for flags whose meaning is not known.
    """
    file = record.path.name
    where = f'{file}, "{variable.name}"'
    if variable.is_text:
        raise RecordError(f"{where}: holds texts where numbers are needed.")
    units = settings.column_units.get(variable.name, variable.units)
    if units is None:
        if role in ("temperature", "salinity"):
            units = ROLES[role].unit
        else:
            raise RecordError(
                f'{where}: has no units; state them: column_units = {{ {variable.name} = "m s-1" }}.'
            )
    values = _two_axes(variable, time_dim, level_dim, file).astype(np.float64)
    if role != "salinity":
        values = np.asarray(convert(values, units, ROLES[role].unit, where), dtype=np.float64)
    if role == "direction_to" and "from_direction" in variable.standard_name:
        values = values + 180.0
    flags, findings, decisions = _flags(record, variable, values.shape, time_dim, level_dim, settings)
    low, high = valid_range(variable)
    stored = _two_axes(variable, time_dim, level_dim, file)
    with np.errstate(invalid="ignore"):
        outside = (stored < low) | (stored > high)
    if (
        0 < outside.mean() <= 0.5
    ):  # a range that excludes most of the data is itself the fault; cf.py reports it
        flags = np.where(outside, worst(flags, np.int8(FAIL)), flags).astype(np.int8)
    if role not in ("temperature", "salinity", "direction_to"):
        with np.errstate(invalid="ignore"):
            wild = np.abs(values) > settings.largest_speed
        finite = np.isfinite(values)
        if finite.any() and wild.sum() > 0.5 * finite.sum():
            raise RecordError(
                f"{where}: {100 * wild.sum() / finite.sum():.0f} % of the values exceed "
                f"{settings.largest_speed:g} m s-1 with the "
                f'unit "{units}"; the unit is wrong. State it: column_units = '
                f'{{ {variable.name} = "cm s-1" }}.'
            )
        if wild.any():
            flags = np.where(wild, worst(flags, np.int8(FAIL)), flags).astype(np.int8)
            findings.append(
                Finding(
                    "speed-impossible", "warning",
                    f"{where}: {int(wild.sum())} values exceed {settings.largest_speed:g} m s-1 and were "
                    "flagged fail.",
                    float(np.nanmax(np.abs(values))), settings.largest_speed, "m s-1",
                )
            )  # fmt: skip
    flags = np.where(np.isfinite(values), flags, MISSING).astype(np.int8)
    return Gathered(variable.name, values, flags, units, tuple(findings), tuple(decisions))


def _flags(
    record: RawRecord,
    variable: RawVariable,
    shape: tuple[int, ...],
    time_dim: str,
    level_dim: str | None,
    settings: RecordSettings,
) -> tuple[np.ndarray, list[Finding], list[Decision]]:
    """QARTOD flags of a variable, the ignored tests set aside."""
    file = record.path.name
    findings: list[Finding] = []
    decisions: list[Decision] = []
    unevaluated = np.full(shape, NOT_EVALUATED, dtype=np.int8)
    if settings.flag_scheme == "none":
        return unevaluated, findings, [Decision("flags", "ignored", "recipe", 'flag_scheme = "none"')]
    aggregate, tests = quality_variables(record, variable)
    if aggregate is None and not tests:
        findings.append(Finding("no-flags", "note", f'{file}: "{variable.name}" has no quality flags.'))
        return unevaluated, findings, decisions
    ignore = [normalise(i) for i in settings.ignore_tests]
    context = [
        str(v)
        for k, v in record.attributes.items()
        if "qc" in k.lower() or "flag" in k.lower() or k == "Conventions"
    ]

    def flags_of(flag: RawVariable) -> np.ndarray:
        where = f'{file}, "{flag.name}"'
        table = flag_table(
            flag.attributes,
            where,
            context,
            settings.flag_scheme,
            settings.flag_meanings,
            settings.probably_good,
        )
        values = _two_axes(flag, time_dim, level_dim, file)
        if values.shape not in (shape, (shape[0], 1)):
            raise RecordError(f"{where}: flags have shape {values.shape}, their data {shape}.")
        result, more = to_qartod(np.broadcast_to(values, shape), table, where, ignore)
        findings.extend([*table.findings, *more])
        words = ", ".join(f"{n} {w} -> {table.to_qartod[n]}" for n, w in sorted(table.words.items()))
        decisions.append(
            Decision(f"flags of {variable.name}", flag.name, "metadata", f"{table.evidence}: {words}")
        )
        return result

    by_name = {t.name: flags_of(t) for t in tests}
    ignored = [
        n for n in by_name if any(i in normalise(n) or i in record.variables[n].standard_name for i in ignore)
    ]
    others = _worst_of([f for n, f in by_name.items() if n not in ignored], shape)
    result = others if aggregate is None else flags_of(aggregate)
    if aggregate is not None and ignored:
        result = set_aside(result, _worst_of([by_name[n] for n in ignored], shape), others)
    masks = aggregate is not None and "flag_masks" in aggregate.attributes
    if ignore and not ignored and not masks:
        have = ", ".join(by_name) or "no single test, only a verdict over all"
        findings.append(
            Finding(
                "test-not-found", "warning",
                f'{file}: ignore_tests {", ".join(settings.ignore_tests)} matches no test of '
                f'"{variable.name}" (it has {have}).',
            )
        )  # fmt: skip
    for name, flags in by_name.items():
        share = float(np.isin(flags, (3, 4)).mean())
        if name not in ignored and "vertical" in normalise(name) and share > 0.05:
            findings.append(
                Finding(
                    "vertical-velocity-test", "warning",
                    f'{file}: test "{name}" flags {100 * share:.0f} % of "{variable.name}"; such tests flag '
                    'convective and Langmuir '
                    'downwelling, so the variance that is left is too small: consider ignore_tests = '
                    '["vertical_velocity"].',
                    share, 0.05,
                )
            )  # fmt: skip
    return result, findings, decisions


def _worst_of(flags: Sequence[np.ndarray], shape: tuple[int, ...]) -> np.ndarray:
    out = np.full(shape, NOT_EVALUATED, dtype=np.int8)
    for f in flags:
        out = worst(out, f)
    return out
