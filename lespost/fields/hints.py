"""Quantities of forcing that the files state themselves, in attributes or small variables, as `Hint`s.

Only what is spelled unmistakably is taken, with its evidence; the recipe always wins (`lespost.forcing.resolve`).
"""

from __future__ import annotations

import numpy as np

from lespost.fields.hint_table import TABLE, Quantity, stated
from lespost.fields.index import Collection
from lespost.fields.names import match_name
from lespost.fields.settings import FieldsSettings
from lespost.fields.stack import StackedVariable, stack_series
from lespost.findings import Hint
from lespost.units import convert, convertible


def coriolis_of(collection: Collection) -> float | None:
    """The Coriolis parameter that an attribute states [s-1], needed for times in inertial periods."""
    for file in collection.templates:
        found = stated(file).get("coriolis_parameter")
        if found is not None:
            return found[1]
    return None


def find(
    collection: Collection, reference: StackedVariable, z_dim: str, surface_first: bool, settings: FieldsSettings
) -> dict[str, Hint]:
    """Every hint of the files.

    reference: u over the run, whose snapshots series follow. z_dim: its vertical dimension in the files; surface_first:
    whether profiles along it must be turned over.
    """
    hints: dict[str, Hint] = {}
    for file in collection.templates:
        for key, (name, value) in stated(file).items():
            if np.isfinite(value):
                number = value * _scale(TABLE[key], settings)
                hints.setdefault(key, Hint(number, TABLE[key].units, f'attribute "{name}"'))
    variables = collection.variables()
    small = [name for name, v in variables.items() if v.is_series]
    for key, name in match_name({k: q.spellings for k, q in TABLE.items()}, small).items():
        hint = _from_variable(key, name, collection, reference, z_dim, surface_first, settings)
        if hint is not None:
            hints[key] = hint  # a series says more than an attribute
    return hints


def _scale(quantity: Quantity, settings: FieldsSettings) -> float:
    if settings.scales is None or not quantity.scale:
        return 1.0
    return float(getattr(settings.scales, quantity.scale))


def _from_variable(
    key: str, name: str, collection: Collection, reference: StackedVariable, z_dim: str, surface_first: bool,
    settings: FieldsSettings,
) -> Hint | None:
    quantity = TABLE[key]
    file = collection.first_with(name)
    variable = file.variables[name]
    units = variable.units
    if units and not convertible(units, quantity.units):
        return None
    time = reference.parts[0].dims[reference.time_axis] if reference.time_axis is not None else None
    values: np.ndarray | None
    if variable.dims == () or variable.shape == (1,):
        per_file = time is None and reference.shape[0] > 1 and "time" in quantity.axes
        values = stack_series(collection, name, reference) if per_file else np.asarray(file.values(name), np.float64)
        dims: tuple[str, ...] = ("time",) if per_file else ()
    elif variable.dims == (time,) and "time" in quantity.axes:
        values, dims = stack_series(collection, name, reference), ("time",)
    elif variable.dims == (z_dim,) and "z" in quantity.axes:
        values, dims = np.asarray(file.values(name), np.float64), ("z",)
        values = values[::-1].copy() if surface_first else values
    else:
        return None
    if values is None or not np.isfinite(values).all():
        return None
    values = convert(values, units, quantity.units) if units else values * _scale(quantity, settings)
    evidence = f'variable "{name}"'
    return Hint(float(values[0]) if dims == () else values, quantity.units, evidence, dims)
