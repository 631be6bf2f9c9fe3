"""Units, long name and cell methods of every profile variable, and the dataset that carries them.

The table is spelled out rather than derived at run time from the fields' attributes: files are wrong too often, and a
squared velocity must not inherit "m s-1".
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import xarray as xr

from lespost.profiles.layout import Layout
from lespost.profiles.settings import ProfilesSettings

#: What the letters of a moment's name stand for, with the unit of one factor.
FACTORS = {"u": ("x velocity", "m s-1"), "v": ("y velocity", "m s-1"), "w": ("upward velocity", "m s-1")}
#: Units of powers of a velocity.
VELOCITY_POWERS = {1: "m s-1", 2: "m2 s-2", 3: "m3 s-3", 4: "m4 s-4"}
#: CF cell methods by kind of statistic.
METHODS = {
    "mean": "time: point area: mean", "second": "time: point area: mean (of products of departures from the level mean)",
    "min": "time: point area: minimum", "max": "time: point area: maximum", "sum": "time: point area: sum",
    "tile": "time: point area: mean (over a tile, of products of departures from the level mean)",
    "rms": "time: point area: root_mean_square", "derived": "time: point area: mean",
}


@dataclass(frozen=True)
class Description:
    """units, long_name and cell_methods of one variable."""

    units: str
    long_name: str
    cell_methods: str

    def attributes(self) -> dict[str, str]:
        """As attributes of a variable."""
        return {"units": self.units, "long_name": self.long_name, "cell_methods": self.cell_methods}


_FIXED = {
    "dwdx_dwdx": ("s-2", "mean square of dw/dx", "second"),
    "dwdx_dwdy": ("s-2", "mean product of dw/dx and dw/dy", "second"),
    "dwdy_dwdy": ("s-2", "mean square of dw/dy", "second"),
    "w_grid_scale_share": ("1", "share of the variance of w at the grid scale: mean square step between horizontal neighbours "
                           "over four variances (1: waves of two spacings, 0.5: white noise)", "derived"),
    "divergence_rms": ("s-1", "root mean square divergence", "rms"),
    "divergence_scale": ("s-1", "root of the sum of the mean squares of the three terms of the divergence", "rms"),
    "nan_count": ("1", "number of values that are not finite", "sum"),
    "tke_sgs": ("m2 s-2", "subgrid kinetic energy", "mean"),
}

_QUALIFIERS = {"": "", "_sgs": "subgrid ", "_total": "resolved plus subgrid ", "_native": "", "_tile": ""}


def scalar_unit(fields: xr.Dataset, name: str) -> str:
    """Unit of a scalar as stated by the dataset: degC or K for theta, g kg-1 for salinity where nothing is stated."""
    default = {"theta": "degC", "salinity": "g kg-1"}.get(name, "1")
    return str(fields[name].attrs.get("units", default)) if name in fields else default


def description(name: str, units_of_scalars: Mapping[str, str]) -> Description:
    """The description of profile variable `name`. Raises KeyError for a name that is not one.

    units_of_scalars: unit of each scalar, e.g. {"theta": "degC"}.
    """
    match = re.fullmatch(r"(.+?)(_sgs|_total|_native|_tile)?(_face)?", name)
    assert match is not None
    base, part, face = match.group(1), match.group(2) or "", match.group(3)
    where = " on faces" if face else ", at its own points" if part == "_native" else ""
    if base in _FIXED and not part:
        units, text, kind = _FIXED[base]
        return Description(units, text + where, METHODS[kind])
    if base + part in _FIXED:
        units, text, kind = _FIXED[base + part]
        return Description(units, text + where, METHODS[kind])
    ranged = re.fullmatch(r"(.+)_(min|max)", base)
    if ranged:
        what = _name_of(ranged.group(1), units_of_scalars)
        words = {"min": "smallest", "max": "largest"}[ranged.group(2)]
        return Description(what[1], f"{words} {what[0]}", METHODS[ranged.group(2)])
    if base in FACTORS or base in units_of_scalars:
        what = _name_of(base, units_of_scalars)
        return Description(what[1], f"mean {what[0]}{where}", METHODS["mean"])
    factors = _factors(base, units_of_scalars)
    units = _product_unit(factors, units_of_scalars)
    text = _QUALIFIERS[part] + _moment_in_words(factors, units_of_scalars) + where
    if part == "_tile":
        return Description(units, text + " over one tile", METHODS["tile"])
    return Description(units, text, METHODS["second"])


def _name_of(name: str, units_of_scalars: Mapping[str, str]) -> tuple[str, str]:
    if name in FACTORS:
        return FACTORS[name]
    words = {"theta": "potential temperature", "salinity": "salinity"}.get(name, name.replace("_", " "))
    return words, units_of_scalars[name]


def _factors(name: str, units_of_scalars: Mapping[str, str]) -> list[str]:
    """The factors of a moment: "wwtheta" is w, w, theta; "w_tracer_dye" is w and the tracer; "tracer_dye_variance" twice it."""
    for scalar in sorted(units_of_scalars, key=len, reverse=True):
        if name == f"{scalar}_variance":
            return [scalar, scalar]
        if name == f"w_{scalar}":
            return ["w", scalar]
    factors, rest = [], name
    words = [*(s for s in ("theta", "salinity") if s in units_of_scalars), *FACTORS]
    while rest:
        word = next((word for word in words if rest.startswith(word)), None)
        if word is None:
            raise KeyError(f"{name} is not a profile variable")
        factors.append(word)
        rest = rest[len(word) :]
    return factors


def _product_unit(factors: list[str], units_of_scalars: Mapping[str, str]) -> str:
    """Unit of a product; degrees Celsius become kelvin, since departures are differences."""
    parts = []
    for scalar in dict.fromkeys(f for f in factors if f in units_of_scalars):
        unit, count = units_of_scalars[scalar], factors.count(scalar)
        unit = "K" if unit in ("degC", "K") else unit
        if unit == "1":
            continue
        if count == 1:
            parts.append(unit)
        elif re.fullmatch(r"[A-Za-z]+", unit):
            parts.append(f"{unit}{count}")
        else:
            parts.append(f"({unit}){count}")
    velocities = sum(f in FACTORS for f in factors)
    if velocities:
        parts.append(VELOCITY_POWERS[velocities])
    return " ".join(parts) or "1"


def _moment_in_words(factors: list[str], units_of_scalars: Mapping[str, str]) -> str:
    names = [_name_of(factor, units_of_scalars)[0] for factor in factors]
    different = list(dict.fromkeys(names))
    if len(different) == 1:
        return {2: "variance of ", 3: "third central moment of ", 4: "fourth central moment of "}[len(names)] + different[0]
    if len(names) == 2 and "w" in factors:
        other = next(name for name in different if name != FACTORS["w"][0])
        return f"upward flux of {other}"
    if len(names) == 2:
        return f"covariance of {different[0]} and {different[1]}"
    return "mean product of departures of " + ", ".join(names[:-1]) + f" and {names[-1]}"


def describe(data: Mapping[str, np.ndarray], fields: xr.Dataset, layout: Layout, settings: ProfilesSettings) -> xr.Dataset:
    """The profiles dataset: `data` (time, level, ...) with coordinates and attributes."""
    units = {name: scalar_unit(fields, name) for name in layout.scalars}
    variables = {}
    for name in sorted(data):
        dims = ("time", "z_face" if name.endswith("_face") else "z", *(("tile_y", "tile_x") if name.endswith("_tile") else ()))
        attributes = description(name, units).attributes()
        if name.startswith("divergence"):
            attributes["comment"] = layout.divergence
        if re.search(r"_(sgs|total)$", name) and f"{name}_face" in data:
            attributes["comment"] = "mean of the two faces; cells at the top and bottom carry their inner face"
        if name.endswith(("_sgs_face", "_total_face")) and np.isnan(data[name][:, -1]).all():
            attributes["comment"] = "empty on the lowest and highest face, where the model imposes the flux"
        variables[name] = (dims, data[name], attributes)
    out = xr.Dataset(variables)
    height = {"units": "m", "positive": "up", "axis": "Z"}
    out = out.assign_coords(
        time=("time", np.asarray(fields["time"].values, np.float64), {"units": "s", "long_name": "run time"}),
        z=("z", layout.z, {**height, "long_name": "height of cell centres"}),
        z_face=("z_face", layout.z_face, {**height, "long_name": "height of cell faces"}),
    )
    if "tile_y" in out.dims:
        tiles = {axis: out.sizes[f"tile_{axis}"] for axis in ("y", "x")}
        sizes = {"y": layout.ny, "x": layout.nx}
        out = out.assign_coords({
            f"tile_{axis}": (f"tile_{axis}", np.arange(tiles[axis]), {"units": "1", "long_name": f"tile along {axis}"})
            for axis in ("y", "x")
        })  # fmt: skip
        out.attrs.update({f"tile_{axis}_points": sizes[axis] // tiles[axis] for axis in ("y", "x")})
    out.attrs |= {
        "perturbation": "departure from the horizontal mean of the snapshot at that level",
        "positions": "all components at cell centres by two-point averages; on z_face, w where the model has it",
        "flux_sign": "kinematic, positive upward",
        "velocity_kind": str(fields.attrs.get("velocity_kind", "eulerian")),
        "higher_moments": int(settings.higher_moments),
        "points_per_level": layout.ny * layout.nx,
        "divergence_is_exact": int(layout.fully_staggered),
        "dx": layout.dx, "dy": layout.dy, "Lx": layout.dx * layout.nx, "Ly": layout.dy * layout.ny,
    }  # fmt: skip
    if layout.prandtl_number is not None:
        out.attrs["prandtl_number"] = layout.prandtl_number
    if "time_origin" in fields.attrs:
        out.attrs["time_origin"] = fields.attrs["time_origin"]
    return out
