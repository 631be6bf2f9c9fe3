"""The door of the package: from [fields] to the canonical dataset, with everything that was decided and found on the way.

`survey` does it in steps, each of which `lespost.fields.describe` can report on its own; `open_fields` runs them all.
"""

from __future__ import annotations

import json
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from lespost.errors import LayoutError
from lespost.fields import axes as axes_module
from lespost.fields import checks, gaps, hints, netcdf
from lespost.fields.axes import Axes
from lespost.fields.canonical import AxisPlan, CanonicalArray, variable
from lespost.fields.fingerprint import fingerprint
from lespost.fields.index import Collection, collect
from lespost.fields.layout import Layout, decide
from lespost.fields.names import Choice, choose
from lespost.fields.settings import FieldsSettings
from lespost.fields.stack import Stacked, StackedVariable, TimeAxis, stack
from lespost.fields.units import unit_of
from lespost.fields.variable import RawFile, RawVariable
from lespost.findings import Decision, Finding, Hint

LONG_NAMES = {
    "u": "velocity along x", "v": "velocity along y", "w": "upward velocity", "theta": "potential temperature",
    "salinity": "salinity", "p": "kinematic pressure", "tke_sgs": "subgrid turbulent kinetic energy",
    "nu_sgs": "subgrid viscosity",
}  # fmt: skip


@dataclass(frozen=True)
class OpenedFields:
    """dataset: canonical, lazy. decisions, findings: to print and to store. hints: forcing that the files state.

    fingerprint: hexadecimal identity of the input files.
    """

    dataset: xr.Dataset
    decisions: tuple[Decision, ...]
    findings: tuple[Finding, ...]
    hints: dict[str, Hint]
    fingerprint: str


def open_fields(settings: FieldsSettings, base: Path) -> OpenedFields:
    """The canonical dataset of the files that `settings` name, paths relative to `base`.

    Nothing but headers, coordinates and a small sample is read here. Raises DataError for files that cannot be used,
    LayoutError where the layout cannot be decided, UnitError and RecipeError as their names say.
    """
    try:
        collection = collect(settings, base)
        choice = recognise(collection, settings)
        return assemble(collection, choice, settings)
    finally:
        netcdf.handles.close_all()  # an open handle would keep the simulation from writing on


def recognise(collection: Collection, settings: FieldsSettings) -> Choice:
    """Which variables are u, v, w, ... among those with three axes in space."""
    return choose(field_variables(collection, settings), settings, collection.where())


def field_variables(collection: Collection, settings: FieldsSettings) -> list[RawVariable]:
    """Variables that may be fields: three axes besides time, none of them of unknown role twice."""
    found: dict[str, RawVariable] = {}
    for file in collection.templates:
        time = axes_module.time_dimension(file, settings)
        for name, candidate in file.variables.items():
            space = [d for d in candidate.dims if d != time]
            if name in found or len(space) != 3 or len(candidate.dims) > 4:
                continue
            found[name] = candidate
    return list(found.values())


def assemble(collection: Collection, choice: Choice, settings: FieldsSettings) -> OpenedFields:
    """Everything after the names are known."""
    stacked = stack(collection, choice.variables, settings, hints.coriolis_of(collection))
    whole = gaps.find(stacked.fields, stacked.time.seconds, settings)
    if len(whole.keep) < len(stacked.time.seconds):
        stacked = Stacked(
            {name: field.select(whole.keep) for name, field in stacked.fields.items()},
            replace(stacked.time, seconds=stacked.time.seconds[whole.keep]),
        )
    files = {name: collection.first_with(choice.variables[name]) for name in stacked.fields}
    roles = {name: spatial_axes(files[name], field, settings) for name, field in stacked.fields.items()}
    layout = decide(stacked.fields, roles, files, settings, collection.where())
    decisions = [*collection.decisions, *choice.decisions, *stacked.time.decisions, *layout.decisions]
    findings = [*collection.findings, *stacked.time.findings, *whole.findings, *layout.findings]
    dataset = _dataset(stacked, layout, settings, files, decisions, findings)
    z_dim = stacked.fields["u"].dims[1 + layout.roles["u"].index("z")]
    found = hints.find(collection, stacked.fields["u"], z_dim, layout.grid.surface_first, settings)
    paths = [entry.path for entry in collection.entries]
    dataset.attrs["source"] = collection.where()
    dataset.attrs["source_paths"] = json.dumps([str(path) for path in paths])
    sample = checks.take(dataset)
    findings += checks.run(dataset, sample, found, settings.rigid_lid, settings.scales is not None)
    findings += checks.chunk_cost(dataset)
    dataset.attrs["decisions"] = json.dumps([d.to_dict() for d in decisions])
    dataset.attrs["findings"] = json.dumps([f.to_dict() for f in findings])
    return OpenedFields(dataset, tuple(decisions), tuple(findings), found, fingerprint(paths))


def spatial_axes(file: RawFile, field: StackedVariable, settings: FieldsSettings) -> Axes:
    """Roles of the axes in space of a stacked field, in the order of the file."""
    found = axes_module.assign(file, file.variables[field.name], settings)
    roles = tuple(role for role in found.roles if role != "time")
    if len(roles) != 3:
        raise LayoutError(
            f"{field.describe()}: its axes {file.variables[field.name].dims} are not time and three axes in space; write "
            "[fields].axes."
        )
    return replace(found, roles=roles)


def _dataset(
    stacked: Stacked, layout: Layout, settings: FieldsSettings, files: dict[str, RawFile], decisions: list[Decision],
    findings: list[Finding],
) -> xr.Dataset:
    time: TimeAxis = stacked.time
    dx, dy = layout.x.spacing, layout.y.spacing
    x, y = _positions(layout.x, layout.nx), _positions(layout.y, layout.ny)
    variables: dict[str, xr.Variable] = {}
    for name, field in stacked.fields.items():
        try:
            variables[name] = _canonical(name, field, layout, settings, time.seconds, decisions)
        except LayoutError as error:
            if name in ("u", "v", "w"):
                raise
            findings.append(Finding("field-left-out", "warning", f"{name} is left out: {error}"))
    coords: dict[str, Any] = {
        "time": ("time", time.seconds, {"units": "s", "long_name": "run time", "axis": "T"}),
        "z": ("z", layout.grid.z, {"units": "m", "positive": "up", "axis": "Z", "long_name": "height above the mean surface"}),
        "z_face": ("z_face", layout.grid.z_face, {"units": "m", "positive": "up", "long_name": "height of cell faces"}),
        "y": ("y", y, {"units": "m", "axis": "Y", "long_name": "y of cell centres"}),
        "x": ("x", x, {"units": "m", "axis": "X", "long_name": "x of cell centres"}),
    }
    if "x_face" in variables["u"].dims:
        coords["x_face"] = ("x_face", x - dx / 2, {"units": "m", "long_name": "x of low-side cell faces"})
    if "y_face" in variables["v"].dims:
        coords["y_face"] = ("y_face", y - dy / 2, {"units": "m", "long_name": "y of low-side cell faces"})
    kind, kind_decision = _velocity_kind(files, settings)
    decisions.append(kind_decision)
    attrs = {
        "velocity_kind": kind, "horizontal_scheme": layout.verdict.candidate.score.scheme, "Lx": dx * layout.nx,
        "Ly": dy * layout.ny, "divergence_residual": layout.verdict.candidate.score.residual,
    }  # fmt: skip
    if time.origin:
        attrs["time_origin"] = time.origin
    return xr.Dataset(variables, coords, attrs)


def _positions(axis: Any, count: int) -> np.ndarray:
    if axis.positions is None:
        return (np.arange(count) + 0.5) * axis.spacing
    positions: np.ndarray = axis.positions[axis.size - count :] if axis.reversed else axis.positions[:count]
    return positions


def _velocity_kind(files: dict[str, RawFile], settings: FieldsSettings) -> tuple[str, Decision]:
    if settings.velocity_kind != "auto":
        return settings.velocity_kind, Decision("velocity kind", settings.velocity_kind, "recipe", "[fields].velocity_kind")
    stated = str(files["u"].attrs.get("velocity_kind", "")).strip().lower()
    if stated in ("eulerian", "lagrangian"):
        return stated, Decision("velocity kind", stated, "metadata", "attribute velocity_kind")
    return "eulerian", Decision("velocity kind", "eulerian", "default", "the files do not say")


def _canonical(
    name: str, field: StackedVariable, layout: Layout, settings: FieldsSettings, seconds: np.ndarray,
    decisions: list[Decision],
) -> xr.Variable:
    """One field as a lazy canonical variable."""
    roles = layout.roles[name]
    z_plan, z_dim = _z_plan(name, field, layout, decisions)
    x_plan, x_dim = _horizontal_plan(name, field, layout, "x", roles.index("x") + 1)
    y_plan, y_dim = _horizontal_plan(name, field, layout, "y", roles.index("y") + 1)
    unit, factor, offset, how = unit_of(name, field, settings)
    if name == "w" and settings.w_positive == "down":
        factor = -factor
        decisions.append(Decision("sign of w", "positive down in the file, turned", "recipe", "[fields].w_positive"))
    if how is not None:
        decisions.append(how)
    array = CanonicalArray(field, (z_plan, y_plan, x_plan), name, seconds, factor, offset)
    attrs: dict[str, Any] = {
        "units": unit, "long_name": LONG_NAMES.get(name, name.replace("_", " ")), "cell_methods": "time: point",
        "source_name": field.name, "source_axes": " ".join(_stored_order(field, roles)),
    }  # fmt: skip
    if field.packed:
        attrs["packed_resolution"] = abs(float(np.ravel(field.attrs.get("scale_factor", 1.0))[0]) * factor)
    return variable(array, ("time", z_dim, y_dim, x_dim), attrs)


def _stored_order(field: StackedVariable, roles: tuple[str, ...]) -> list[str]:
    """The axes as the file has them, time included."""
    order = list(roles)
    if field.time_axis is not None:
        order.insert(field.time_axis, "time")
    return order


def _z_plan(name: str, field: StackedVariable, layout: Layout, decisions: list[Decision]) -> tuple[AxisPlan, str]:
    axis = layout.roles[name].index("z") + 1
    count, cells = field.shape[axis], len(layout.grid.z)
    score = layout.verdict.candidate.score
    flip = layout.grid.surface_first
    with_w = name == "w" or (field.dims[axis] == layout.w_dim and layout.w_dim != layout.u_dim and count == layout.w_levels)
    if not with_w:
        if count == cells:
            return AxisPlan(axis, count, flip), "z"
        if count == cells + 1:
            return AxisPlan(axis, count, flip), "z_face"
        raise LayoutError(f"{field.describe()} has {count} levels for {cells} cells.")
    if score.w_offset == "centre":
        return AxisPlan(axis, count, flip), "z"
    if score.w_offset == "faces":
        return AxisPlan(axis, count, flip), "z_face"
    lower = (score.w_offset == "low") == (score.z_sign > 0)
    low = 1 if score.w_offset == "interior" or not lower else 0
    high = 1 if score.w_offset == "interior" or lower else 0
    ends = " and ".join(e for e, missing in (("bottom", low), ("surface", high)) if missing)
    decisions.append(Decision(f"{name} at the {ends} face", "filled with 0", "default", "the file holds no such level"))
    return AxisPlan(axis, count, flip, pad_low=low, pad_high=high), "z_face"


def _horizontal_plan(
    name: str, field: StackedVariable, layout: Layout, role: str, axis: int
) -> tuple[AxisPlan, str]:
    centre, count = (layout.x, layout.nx) if role == "x" else (layout.y, layout.ny)
    own = layout.u_x if role == "x" else layout.v_y
    mover = "u" if role == "x" else "v"
    score = layout.verdict.candidate.score
    position = score.u_position if role == "x" else score.v_position
    staggered = position != "centre" and (name == mover or (own.dim != centre.dim and field.dims[axis] == own.dim))
    if field.shape[axis] not in (count, count + 1):
        raise LayoutError(f"{field.describe()} has {field.shape[axis]} points along {role} for {count} cells.")
    if field.shape[axis] == count + 1 and centre.size == count and not staggered and name != mover:
        raise LayoutError(f"{field.describe()} has one point more along {role} than the velocity.")
    if not staggered:
        return AxisPlan(axis, count, centre.reversed), role
    return AxisPlan(axis, count, centre.reversed, roll=1 if position == "high_face" else 0), f"{role}_face"
