"""Departures from CF and OceanSITES that real record files show, each as a finding; nothing is repaired
here."""

from __future__ import annotations

from typing import Any

import numpy as np

from lespost.findings import Finding
from lespost.records.raw import RawRecord, RawVariable
from lespost.units import convert, convertible

#: Spellings that UDUNITS or the CF tables do not have, and what they stand for.
ODD_UNITS = {
    "psu": "1", "pss-78": "1", "decibar": "dbar", "decibars": "dbar", "degree_north": "degrees_north",
    "degree_east": "degrees_east", "meter/second": "m s-1", "meters/second": "m s-1", "meter": "m",
    "meters": "m", "deg c": "degree_Celsius",
}  # fmt: skip

#: Plausible range of sea water values in SI; outside it a unit label is suspected (common practice, no
#: source).
PLAUSIBLE = {
    "sea_water_electrical_conductivity": ("S m-1", 0.0, 10.0),
    "sea_water_temperature": ("degC", -3.0, 45.0),
}


def convention_faults(record: RawRecord) -> list[Finding]:
    """The departures from CF and OceanSITES that real files show, each as a finding."""
    file, out = record.path.name, []

    def add(code: str, message: str, severity: str = "note", **numbers: float) -> None:
        out.append(Finding(code, severity, f"{file}: {message}", **numbers))  # type: ignore[arg-type]

    if "featureType" not in record.attributes:
        add("feature-type-absent", "no featureType attribute; the layout was taken from the dimensions.")
    duration = str(record.attributes.get("time_coverage_duration", ""))
    if "nan" in duration.lower():
        add("duration-not-a-number", f'time_coverage_duration is "{duration}".')
    looking = {
        str(v).lower()
        for k, v in record.attributes.items()
        if "orientation" in k.lower() and isinstance(v, str)
    }
    if {"up", "down"} <= looking:
        add(
            "orientation-contradicts",
            "attributes call the instrument both up- and down-looking; check the depths of its cells.",
            "warning",
        )
    title = str(record.attributes.get("title", ""))
    for variable in record.variables.values():
        name, own = variable.name, variable.attributes
        if variable.is_quality:
            if variable.stored_dtype.startswith("float"):
                add("flags-not-integers", f'quality flags "{name}" are stored as {variable.stored_dtype}.')
            if "flag_meanings" not in own and not variable.is_text:
                add("flag-meanings-absent", f'quality flags "{name}" have no flag_meanings.', "warning")
            if (variable.units or "1") not in ("1", ""):
                add("flags-with-units", f'quality flags "{name}" carry the unit "{variable.units}".')
            continue
        if variable.dims == (name,) and "_FillValue" in own:
            add("fill-on-coordinate", f'coordinate "{name}" has a _FillValue, which CF forbids.')
        if str(own.get("axis", "")) in ("x", "y", "z", "t"):
            add("axis-lower-case", f'axis of "{name}" is "{own["axis"]}"; CF writes capitals.')
        if variable.units is not None and variable.units.strip().lower() in ODD_UNITS:
            meant = ODD_UNITS[variable.units.strip().lower()]
            add("unit-spelling", f'unit "{variable.units}" of "{name}" was read as "{meant}".')
        for companion in str(own.get("ancillary_variables", "")).split():
            if companion not in record.variables:
                twins = [v for v in record.variables if v.lower() == companion.lower()]
                what = f'"{twins[0]}", which differs in case, was taken' if twins else "no such variable"
                add(
                    "ancillary-name",
                    f'ancillary variable "{companion}" of "{name}": {what}.',
                    "note" if twins else "warning",
                )
        _range_faults(record, variable, add)
        if "velocity" in variable.standard_name and "ctd" in title.lower():
            add("title-misleads", f'title "{title}" speaks of a CTD but the file holds velocities.')
            title = ""
    return out


def _range_faults(record: RawRecord, variable: RawVariable, add: Any) -> None:
    """Values outside their declared or plausible range, which betray a wrong unit label."""
    values = variable.values
    if (
        variable.is_text
        or values.size == 0
        or values.dtype.kind not in "fiu"
        or not np.isfinite(values).any()
    ):
        return
    low, high = valid_range(variable)
    finite = values[np.isfinite(values)]
    outside = float(np.mean((finite < low) | (finite > high)))
    if outside > 0:
        add(
            "outside-valid-range",
            f'{100 * outside:.1f} % of "{variable.name}" lie outside its valid range {low:g} to {high:g}'
            + ("; the range or the unit label is wrong." if outside > 0.5 else "."),
            "warning" if outside > 0.5 else "note",
            value=outside,
            limit=0.0,
        )
    if variable.standard_name in PLAUSIBLE and variable.units:
        unit, least, most = PLAUSIBLE[variable.standard_name]
        if convertible(variable.units, unit):
            median = float(np.median(convert(finite.astype(np.float64), variable.units, unit)))
            if not least <= median <= most:
                add(
                    "unit-implausible",
                    f'median of "{variable.name}" is {median:g} {unit} by its unit "{variable.units}", '
                    f"outside {least:g} to "
                    f"{most:g}; the label is probably wrong.",
                    "warning",
                    value=median,
                    limit=most,
                    units=unit,
                )


def valid_range(variable: RawVariable) -> tuple[float, float]:
    """The declared valid range in unpacked units; infinite where none is declared or the values were
    packed."""
    own = variable.attributes
    if "scale_factor" in own or "add_offset" in own:
        return -np.inf, np.inf  # CF states it in packed units, files in either: not safe to use
    try:
        if "valid_range" in own:
            low, high = (float(v) for v in np.atleast_1d(own["valid_range"]))
        else:
            low, high = float(own.get("valid_min", -np.inf)), float(own.get("valid_max", np.inf))
    except (TypeError, ValueError):
        return -np.inf, np.inf
    return (low, high) if low <= high else (-np.inf, np.inf)
