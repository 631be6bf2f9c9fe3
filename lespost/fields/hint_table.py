"""How files spell the quantities of forcing: the table behind `lespost.fields.hints`, and what tells two runs apart."""

from __future__ import annotations

import numbers
from collections.abc import Mapping
from dataclasses import dataclass

from lespost.fields.names import match_name
from lespost.fields.variable import RawFile


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


def stated(file: RawFile) -> dict[str, tuple[str, float]]:
    """Quantities that the attributes of a file state: our name -> (attribute, its number as it stands)."""
    names = match_name({key: quantity.spellings for key, quantity in TABLE.items()}, file.attrs)
    return {
        key: (name, float(file.attrs[name]))
        for key, name in names.items()
        if isinstance(file.attrs[name], numbers.Real) and not isinstance(file.attrs[name], bool)
    }


def differences(first: RawFile, other: RawFile) -> list[str]:
    """Quantities that both files state with different numbers, in words: signs that they are of two runs."""
    ours, theirs = stated(first), stated(other)
    return [
        f"{name} = {value:g} in {first.path.name} and {theirs[key][1]:g} in {other.path.name}"
        for key, (name, value) in ours.items()
        if key in theirs and value != theirs[key][1]
    ]
