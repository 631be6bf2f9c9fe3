"""Which variable of a file plays which role: by the recipe, then by CF standard name, OceanSITES name, usual
name.

Names: CF standard name table v93; OceanSITES data format reference manual 1.4, table 6 (WCUR is not in that
table but is in use). Bare names come last because they are only habits.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from lespost.errors import RecordError
from lespost.findings import Decision
from lespost.records.raw import RawRecord, RawVariable


@dataclass(frozen=True)
class Role:
    """How a quantity is recognised and the unit it is needed in."""

    standard_names: tuple[str, ...]
    oceansites: tuple[str, ...]
    habits: tuple[str, ...]
    unit: str


_ERROR_VELOCITY = "indicative_error_from_multibeam_acoustic_doppler_velocity_profiler_in_sea_water"

ROLES: Mapping[str, Role] = {
    "time": Role(("time",), ("TIME",), ("time", "datetime", "date_time", "timestamp"), "s"),
    "depth": Role(("depth",), ("DEPTH",), ("depth", "bin_depth", "bindepth"), "m"),
    "height": Role(("height", "height_above_mean_sea_level", "altitude"), ("HEIGHT",), ("z",), "m"),
    "pressure": Role(
        ("sea_water_pressure", "sea_water_pressure_due_to_sea_water"),
        ("PRES",),
        ("bin_pressure", "pressure"),
        "dbar",
    ),
    "latitude": Role(("latitude",), ("LATITUDE",), ("latitude", "lat"), "degrees_north"),
    "longitude": Role(("longitude",), ("LONGITUDE",), ("longitude", "lon"), "degrees_east"),
    "eastward": Role(
        ("eastward_sea_water_velocity",),
        ("UCUR", "EWCT"),
        ("east_velocity", "u_east", "east", "ve", "u"),
        "m s-1",
    ),
    "northward": Role(
        ("northward_sea_water_velocity",),
        ("VCUR", "NSCT"),
        ("north_velocity", "v_north", "north", "vn", "v"),
        "m s-1",
    ),
    "upward": Role(
        ("upward_sea_water_velocity",),
        ("WCUR", "VCSP"),
        ("up_velocity", "w_up", "vertical_velocity", "up", "w"),
        "m s-1",
    ),
    "downward": Role(("downward_sea_water_velocity",), (), ("down_velocity",), "m s-1"),
    "x": Role(("sea_water_x_velocity",), (), ("u_x", "x_velocity"), "m s-1"),
    "y": Role(("sea_water_y_velocity",), (), ("v_y", "y_velocity"), "m s-1"),
    "speed": Role(("sea_water_speed",), ("CSPD", "HCSP"), ("speed", "current_speed"), "m s-1"),
    "direction_to": Role(
        ("sea_water_velocity_to_direction", "direction_of_sea_water_velocity"),
        ("CDIR", "HCDT"),
        ("current_direction",),
        "degree",
    ),
    "error_velocity": Role(
        (_ERROR_VELOCITY,), ("ECUR",), ("error_velocity", "err_velocity", "err_vel"), "m s-1"
    ),
    "temperature": Role(
        ("sea_water_temperature", "sea_water_potential_temperature", "sea_water_conservative_temperature"),
        ("TEMP",),
        ("temperature", "temp"),
        "degC",
    ),
    "salinity": Role(
        ("sea_water_practical_salinity", "sea_water_salinity", "sea_water_absolute_salinity"),
        ("PSAL",),
        ("salinity",),
        "1",
    ),
    "conductivity": Role(("sea_water_electrical_conductivity",), ("CNDC",), ("conductivity",), "S m-1"),
    "pitch": Role(
        ("platform_pitch", "platform_pitch_fore_up", "platform_pitch_fore_down"), (), ("pitch",), "degree"
    ),
    "roll": Role(
        ("platform_roll", "platform_roll_starboard_up", "platform_roll_starboard_down"),
        (),
        ("roll",),
        "degree",
    ),
}

VELOCITY_ROLES: tuple[str, ...] = ("eastward", "northward", "upward", "downward", "x", "y", "speed")

How = Literal["recipe", "metadata", "detected", "default"]


@dataclass(frozen=True)
class Found:
    """A variable and the reason it was taken for its role."""

    variable: RawVariable
    how: How
    evidence: str

    def decision(self, role: str) -> Decision:
        """The finding as a decision for run.json."""
        return Decision(subject=role, choice=self.variable.name, how=self.how, evidence=self.evidence)


def find_role(record: RawRecord, role: str, columns: Mapping[str, str] | None = None) -> Found | None:
    """The variable that plays `role`, or None.

    Raises RecordError where the recipe names a variable that is absent, or where two variables claim the role
    equally.
    """
    columns = columns or {}
    if role in columns:
        name = columns[role]
        if name not in record.variables:
            have = ", ".join(sorted(record.variables))
            raise RecordError(
                f'{record.path.name}: columns.{role} = "{name}" is not in the file; it holds {have}.'
            )
        return Found(record.variables[name], "recipe", f'columns.{role} = "{name}"')
    spec = ROLES[role]
    # variables the recipe gave another role are not candidates here
    taken = set(columns.values())
    candidates = [v for v in record.variables.values() if not v.is_quality and v.name not in taken]
    for wanted in spec.standard_names:
        hits = [v for v in candidates if v.standard_name == wanted or v.name.lower() == wanted]
        if role in ("time", "depth", "height", "latitude", "longitude") and len(hits) > 1:
            # a coordinate variable, one named like its own dimension, is the axis; its twins are auxiliary
            hits = [v for v in hits if v.dims == (v.name,)] or hits
        if len(hits) > 1:
            hits = [v for v in hits if v.name in spec.oceansites] or hits
        if len(hits) > 1 and role == "pressure":
            # cell pressures beside the instrument's own: the one with more axes positions the cells
            most = max(v.values.ndim for v in hits)
            hits = [v for v in hits if v.values.ndim == most]
        if len(hits) > 1:
            names = ", ".join(v.name for v in hits)
            raise RecordError(
                f"{record.path.name}: {names} all carry the standard name {wanted}; say which one to use: "
                f'columns.{role} = "{hits[0].name}".'
            )
        if hits:
            return Found(hits[0], "metadata", f"standard name {wanted}")
    by_name = {v.name: v for v in candidates}
    for name in spec.oceansites:
        if name in by_name:
            return Found(by_name[name], "metadata", f"OceanSITES name {name}")
    lower = {
        v.name.lower(): v for v in candidates if not v.standard_name or v.standard_name in spec.standard_names
    }
    # a time axis need not carry a standard name: its unit says "since"
    if role == "time":
        since = [v for v in candidates if " since " in (v.units or "") and v.dims == (v.name,)]
        if since:
            return Found(since[0], "metadata", f'units "{since[0].units}"')
    for name in spec.habits:
        if name in lower:
            return Found(lower[name], "detected", f'name "{lower[name].name}", no standard name')
    return None


def roles_of(record: RawRecord, columns: Mapping[str, str] | None = None) -> dict[str, Found]:
    """Every role that some variable of the record plays."""
    found = {}
    for role in ROLES:
        hit = find_role(record, role, columns)
        if hit is not None:
            found[role] = hit
    return found


def velocity_roles(found: Mapping[str, Found]) -> tuple[str, ...]:
    """The velocity roles among `found`."""
    return tuple(role for role in VELOCITY_ROLES if role in found)
