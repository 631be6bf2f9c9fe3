"""A closed-form flow by its name and NAME=VALUE settings, as the command line asks for it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import fields as fields_of
from typing import Any

import numpy as np
import xarray as xr

from toy_fields.closed_form.cellular import Cellular
from toy_fields.closed_form.layout import Flow, check_arrangement, dataset
from toy_fields.closed_form.lines import ConvergenceLines
from toy_fields.closed_form.roll import Roll
from toy_fields.closed_form.simple import AbcFlow, LinearShear, PureStrain, SolidRotation
from toy_fields.errors import ToyRequestError
from toy_fields.solver.grid import Grid

FLOWS: dict[str, type] = {
    "roll": Roll, "cellular": Cellular, "lines": ConvergenceLines, "abc": AbcFlow, "rotation": SolidRotation,
    "strain": PureStrain, "shear": LinearShear,
}


def make_flow(
    name: str, grid: Grid, arrangement: str, times: Sequence[float], settings: Sequence[str] = (), continuum: bool = False
) -> xr.Dataset:
    """The canonical dataset of the flow `name` in the box of `grid`, with `settings` such as "jet=0.03".

    Wavelengths that are not set fit the box. Unless `continuum`, rolls, cellular flows and lines are free of divergence on
    the grid. Raises ToyRequestError for a name, setting or value that is not known, or a wave that does not fit the box.
    """
    placed = check_arrangement(arrangement)
    if name not in FLOWS:
        raise ToyRequestError(f'flow "{name}" is not known; the flows are {", ".join(FLOWS)}.')
    values: dict[str, Any] = _fitting(name, grid) | _read(name, settings)
    flow: Flow = FLOWS[name](**values)
    _check_fits(flow, grid)
    if isinstance(flow, Roll | Cellular | ConvergenceLines) and not continuum:
        flow = flow.on_grid(grid, placed)
    stated = {f"flow_{key}": value for key, value in values.items()}
    return dataset(flow, grid, placed, times, "float64", **stated)


def _fitting(name: str, grid: Grid) -> dict[str, Any]:
    """Parameters that make the flow fit the box."""
    if name == "roll":
        return {"depth": grid.depth, "wavelength": grid.length_y / 2}
    if name == "cellular":
        return {
            "k": 4 * np.pi / grid.length_x, "l": 4 * np.pi / grid.length_y, "m": np.pi / grid.depth,
        }
    if name == "lines":
        box = {"length_x": grid.length_x, "length_y": grid.length_y, "depth": grid.depth}
        return {"waves_x": 0, "waves_y": 4, **box}
    if name == "abc":
        return {"wavenumber": 2 * np.pi / grid.length_x}
    if name in ("rotation", "strain"):
        return {"rate": 1.0e-3, "x0": grid.length_x / 2, "y0": grid.length_y / 2}
    return {"shear_x": 1.0e-3}


def _read(name: str, settings: Sequence[str]) -> dict[str, Any]:
    known = {f.name: f.type for f in fields_of(FLOWS[name]) if not f.name.endswith("on_grid")}
    values: dict[str, Any] = {}
    for setting in settings:
        key, _, text = setting.partition("=")
        if key not in known:
            raise ToyRequestError(f'setting "{setting}" of {name}: write NAME=VALUE with one of {", ".join(known)}.')
        try:
            values[key] = int(text) if known[key] == "int" else float(text)
        except ValueError:
            kind = "a whole number" if known[key] == "int" else "a number"
            raise ToyRequestError(f'setting "{setting}" of {name}: the value must be {kind}.') from None
    return values


def _check_fits(flow: Flow, grid: Grid) -> None:
    """Raises ToyRequestError where a wave has no whole number of periods in the box."""
    waves = {}
    if isinstance(flow, Roll):
        waves = {"wavelength": grid.length_y / flow.wavelength}
    elif isinstance(flow, Cellular):
        waves = {"k": flow.k * grid.length_x / (2 * np.pi), "l": flow.l * grid.length_y / (2 * np.pi)}
    elif isinstance(flow, AbcFlow):
        waves = {
            "wavenumber along x": flow.wavenumber * grid.length_x / (2 * np.pi),
            "wavenumber along y": flow.wavenumber * grid.length_y / (2 * np.pi),
        }
    for name, count in waves.items():
        if abs(count - round(count)) > 1e-6:
            raise ToyRequestError(f"{name}: {count:.4g} waves in the box; a periodic box needs a whole number.")
