"""Quantities of forcing that the files state themselves, in attributes or small variables, as `Hint`s.

Only what is spelled unmistakably is taken, with its evidence; the recipe always wins (`lespost.forcing.resolve`).
"""

from __future__ import annotations

import numbers
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from lespost.fields.index import Collection
from lespost.fields.names import match_name
from lespost.fields.settings import FieldsSettings
from lespost.fields.stack import StackedVariable, stack_series
from lespost.findings import Hint
from lespost.units import convert, convertible


@dataclass(frozen=True)
class Quantity:
    """spellings: normalised names, most trusted first. units: of the hint. shape: the axes it may have."""

    spellings: tuple[str, ...]
    units: str
    axes: tuple[str, ...] = ("time",)
    scale: str = ""


#: What is looked for. A bare number in an attribute is taken to be in `units`, directions as towards, degrees ccw from +x.
TABLE: Mapping[str, Quantity] = {
    "friction_velocity": Quantity(("frictionvelocity", "ustar", "utau", "ust"), "m s-1", scale="velocity"),
    "stress": Quantity(("windstress", "surfacestress", "tau", "taux0", "stressmagnitude"), "N m-2"),
    "stress_direction": Quantity(("stressdirection", "taudir", "winddirectiontowards", "staudir"), "degree"),
    "surface_heat_flux": Quantity(("surfaceheatflux", "netheatflux", "heatflux", "qnet", "q", "q0"), "W m-2"),
    "surface_temperature_flux": Quantity(("surfacetemperatureflux", "wtsurface", "wtheta0", "wt0", "tsflux"), "K m s-1"),
    "coriolis_parameter": Quantity(("coriolisparameter", "coriolis", "fcor", "f0", "f"), "s-1", ()),
    "thermal_expansion": Quantity(("thermalexpansion", "thermalexpansioncoefficient", "alphat", "alpha"), "K-1", ()),
    "gravity": Quantity(("gravity", "g", "gravitationalacceleration"), "m s-2", ()),
    "reference_density": Quantity(("referencedensity", "rho0", "rhoref", "density0"), "kg m-3", ()),
    "specific_heat": Quantity(("specificheat", "cp", "heatcapacity"), "J kg-1 K-1", ()),
    "stokes_surface_speed": Quantity(
        ("surfacestokesdrift", "stokessurfacespeed", "us0", "ustokes0", "stokes0"), "m s-1", scale="velocity"
    ),
    "stokes_direction": Quantity(("stokesdirection", "usdir", "stokesdir", "wavedirectiontowards"), "degree"),
    "stokes_wavenumber": Quantity(("stokeswavenumber", "kwave", "wavenumber"), "m-1"),
    "stokes_profile_u": Quantity(("stokesprofileu", "ustokes", "stokesdriftx", "stokesu"), "m s-1", ("z",), "velocity"),
    "stokes_profile_v": Quantity(("stokesprofilev", "vstokes", "stokesdrifty", "stokesv"), "m s-1", ("z",), "velocity"),
    "stokes_profile_shape": Quantity(("stokesprofileshape", "stokesshape"), "1", ("z",)),
    "wind_speed": Quantity(("windspeed", "u10", "windspeed10"), "m s-1"),
    "latitude": Quantity(("latitude", "lat"), "degree", ()),
    "prandtl_number": Quantity(("prandtlnumber", "turbulentprandtlnumber", "prandtl", "prt", "pr"), "1", ()),
    "initial_mixed_layer_depth": Quantity(("initialmixedlayerdepth", "mld0", "h0", "mixedlayerdepth0"), "m", (), "length"),
}  # fmt: skip


def coriolis_of(collection: Collection) -> float | None:
    """The Coriolis parameter that an attribute states [s-1], needed for times in inertial periods."""
    for file in collection.templates:
        found = match_name({"f": TABLE["coriolis_parameter"].spellings}, file.attrs)
        if found and isinstance(file.attrs[found["f"]], numbers.Real):
            return float(file.attrs[found["f"]])
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
        names = match_name({key: quantity.spellings for key, quantity in TABLE.items()}, file.attrs)
        for key, name in names.items():
            value = file.attrs[name]
            if isinstance(value, bool) or not isinstance(value, numbers.Real) or not np.isfinite(float(value)):
                continue
            number = float(value) * _scale(TABLE[key], settings)
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
