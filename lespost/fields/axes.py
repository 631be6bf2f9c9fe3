"""Which dimension of a variable is time, z, y or x: from the recipe, CF attributes of the coordinates, or their names.

A dimension that neither decides stays open (role None); `lespost.fields.detect` then asks continuity.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from lespost.errors import LayoutError
from lespost.fields.settings import FieldsSettings
from lespost.fields.variable import RawFile, RawVariable
from lespost.units import convertible

Role = Literal["time", "z", "y", "x"]

_SUFFIX = (
    r"_?(?:c|f|u|v|w|t|h|p|s|q|m|l|r|mid|half|full|stag|left|right|cent(?:er|re)s?|faces?|edges?|coord(?:inate)?"
    r"|axis|dim|\d)?$"
)
_NAMES: Mapping[Role, re.Pattern[str]] = {
    "x": re.compile(rf"^(?:(?:n|n_|dim_?|axis_?|coord_?)?x|nx|i|ni|lon|longitude|east|easting){_SUFFIX}"),
    "y": re.compile(rf"^(?:(?:n|n_|dim_?|axis_?|coord_?)?y|ny|j|nj|lat|latitude|north|northing){_SUFFIX}"),
    "z": re.compile(
        rf"^(?:(?:n|n_|dim_?|axis_?|coord_?)?z|nz|k|nk|depths?|dep|lev|levels?|heights?|altitude|vertical){_SUFFIX}"
    ),
    "time": re.compile(r"^(?:n?t|.*time.*|rec(?:ord)?s?|n?steps?|iter(?:ation)?s?|snapshots?|frames?)$"),
}
_STANDARD: Mapping[str, Role] = {
    "time": "time", "depth": "z", "height": "z", "altitude": "z", "height_above_mean_sea_level": "z",
    "height_above_sea_floor": "z", "projection_x_coordinate": "x", "projection_y_coordinate": "y",
    "grid_longitude": "x", "grid_latitude": "y", "longitude": "x", "latitude": "y",
}  # fmt: skip


@dataclass(frozen=True)
class Axes:
    """roles: one per dimension of the variable, None where undecided. evidence: how they were found."""

    roles: tuple[Role | None, ...]
    evidence: str
    how: Literal["recipe", "metadata", "detected", "default"]

    @property
    def decided(self) -> bool:
        """Whether every dimension has a role."""
        return None not in self.roles

    def index(self, role: Role) -> int | None:
        """Position of the dimension with `role`."""
        return self.roles.index(role) if role in self.roles else None


def coordinate_of(file: RawFile, dim: str, role: Role | None, settings: FieldsSettings) -> RawVariable | None:
    """The one-dimensional variable that gives positions along `dim`.

    The recipe's names first ([fields].names.z for a dimension whose role is z), then the variable named as the dimension,
    then the only one-dimensional variable along it that looks like a coordinate.
    """
    if role is not None:
        keys = {"z": ("z", "z_face"), "x": ("x", "x_face"), "y": ("y", "y_face"), "time": ("time",)}[role]
        for key in keys:
            found = file.variables.get(settings.names.get(key, ""))
            if found is not None and found.dims == (dim,):
                return found
    own = file.coordinate(dim)
    if own is not None:
        return own
    along = [v for v in file.variables.values() if v.dims == (dim,) and name_role(v.name) is not None]
    if role is not None:
        along = [v for v in along if name_role(v.name) == role]
    return along[0] if len(along) == 1 else None


def name_role(name: str) -> Role | None:
    """The role that a name alone suggests, None if it suggests none."""
    plain = name.rsplit("/", 1)[-1].casefold()
    for role, pattern in _NAMES.items():
        if pattern.match(plain):
            return role
    return None


def dimension_role(file: RawFile, dim: str, settings: FieldsSettings) -> tuple[Role | None, str]:
    """Role of one dimension and the evidence for it; (None, "") where nothing decides."""
    for key in ("time", "x", "y", "z", "z_face", "x_face", "y_face"):
        named = settings.names.get(key)
        if named is None:
            continue
        variable = file.variables.get(named)
        if dim == named or (variable is not None and variable.dims == (dim,)):
            return key.removesuffix("_face"), f"[fields].names.{key}"  # type: ignore[return-value]
    found = coordinate_of(file, dim, None, settings)
    if found is not None:
        attrs = found.attrs
        axis = str(attrs.get("axis", "")).strip().lower()
        if axis in ("x", "y", "z"):
            return axis, f'axis = "{axis.upper()}" of {found.name}'  # type: ignore[return-value]
        if axis == "t":
            return "time", f'axis = "T" of {found.name}'
        standard = _STANDARD.get(str(attrs.get("standard_name", "")).strip())
        if standard is not None:
            return standard, f"standard_name of {found.name}"
        if str(attrs.get("positive", "")).strip().lower() in ("up", "down"):
            return "z", f'attribute "positive" of {found.name}'
        units = str(attrs.get("units", ""))
        if " since " in units or (units and not units.isdigit() and convertible(units, "s") and units != "1"):
            return "time", f'units "{units}" of {found.name}'
    role = name_role(dim)
    if role is None and found is not None:
        role = name_role(found.name)
    if role is not None:
        return role, f'name "{dim}"'
    if dim in file.unlimited:
        return "time", f'unlimited dimension "{dim}"'
    return None, ""


def time_dimension(file: RawFile, settings: FieldsSettings) -> str | None:
    """The dimension of `file` along which snapshots follow each other, None if it holds a single one."""
    dims = dict.fromkeys(d for v in file.variables.values() if len(v.dims) >= 3 for d in v.dims)
    for dim in dims:
        if dimension_role(file, dim, settings)[0] == "time":
            return dim
    for variable in file.variables.values():
        if len(variable.dims) == 4:
            if "time" in settings.axes:
                return variable.dims[settings.axes.index("time")]
            return variable.dims[0]
    return None


def assign(file: RawFile, variable: RawVariable, settings: FieldsSettings) -> Axes:
    """Roles of the dimensions of a field variable. Raises LayoutError if they contradict each other."""
    if settings.axes:
        names = settings.axes
        if len(names) == len(variable.dims) + 1 and "time" in names:
            names = tuple(name for name in names if name != "time")
        if len(names) == len(variable.dims):
            return Axes(names, f"[fields].axes = {list(settings.axes)}", "recipe")
        if len(variable.dims) == 4 and len(names) == 3:
            return Axes(("time", *names), f"[fields].axes = {list(settings.axes)}, time first", "recipe")
        raise LayoutError(
            f"{variable.describe()} has {len(variable.dims)} axes where [fields].axes names {len(settings.axes)}."
        )
    found = [dimension_role(file, dim, settings) for dim in variable.dims]
    roles: list[Role | None] = [role for role, _ in found]
    if len(roles) == 4 and "time" not in roles:
        roles[roles.index(None) if None in roles else 0] = "time"
    known = [role for role in roles if role is not None]
    doubled = sorted({role for role in known if known.count(role) > 1})
    if doubled:
        raise LayoutError(
            f"{variable.describe()} has two axes that look like {doubled[0]} ({', '.join(variable.dims)}); write "
            '[fields].axes in the order of the file, e.g. axes = ["time", "z", "y", "x"].'
        )
    if roles.count(None) == 1:
        open_axis = roles.index(None)
        remaining: tuple[Role, ...] = ("x", "y", "z")
        last = next(role for role in remaining if role not in known)
        roles[open_axis] = last
        found[open_axis] = (last, f"the remaining axis is {last}")
    evidence = ", ".join(text for _, text in found if text) or "no name or attribute"
    return Axes(tuple(roles), evidence, "metadata" if None not in roles else "detected")
