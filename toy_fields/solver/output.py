"""From snapshots to the canonical dataset: names, units, positions and what forced the run.

Dimensions time, z, z_face, y, x; w on z_face, everything else at cell centres; u and v are Eulerian and share the points
of the scalars (horizontal_scheme "spectral"). Forcing goes into attributes, and into variables over time where it changes.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import xarray as xr

from toy_fields.solver.forcing import Ramp
from toy_fields.solver.run import Case, Snapshot

#: name: (standard name or None, long name, units).
VARIABLES: dict[str, tuple[str | None, str, str]] = {
    "u": ("sea_water_x_velocity", "Eulerian velocity along x", "m s-1"),
    "v": ("sea_water_y_velocity", "Eulerian velocity along y", "m s-1"),
    "w": ("upward_sea_water_velocity", "upward velocity", "m s-1"),
    "theta": ("sea_water_potential_temperature", "potential temperature", "degC"),
    "nu_sgs": (None, "subgrid eddy viscosity", "m2 s-1"),
    "tracer_dye": (None, "passive tracer", "1"),
}


def dataset(case: Case, snapshots: Sequence[Snapshot]) -> xr.Dataset:
    """The canonical dataset of these snapshots, float32; coordinates and forcing in float64."""
    fields = {
        "u": [s.u for s in snapshots], "v": [s.v for s in snapshots], "w": [s.w for s in snapshots],
        "theta": [s.theta for s in snapshots], "nu_sgs": [s.nu for s in snapshots],
    }
    if snapshots[0].tracer is not None:
        fields["tracer_dye"] = [s.tracer for s in snapshots if s.tracer is not None]
    times = np.array([s.time for s in snapshots])
    variables = {}
    for name, values in fields.items():
        standard_name, long_name, units = VARIABLES[name]
        attributes = {"long_name": long_name, "units": units}
        if standard_name is not None:
            attributes["standard_name"] = standard_name
        vertical = "z_face" if name == "w" else "z"
        variables[name] = (("time", vertical, "y", "x"), np.asarray(values, dtype=np.float32), attributes)
    result = xr.Dataset(variables, coords=coordinates(case, times), attrs=attributes_of(case))
    return result.assign(forcing_over_time(case, times))


def coordinates(case: Case, times: np.ndarray) -> dict[str, tuple[str, np.ndarray, dict[str, str]]]:
    """time [s since the run's start], z, z_face, y, x [m], each with units and axis."""
    grid = case.grid
    vertical = {"units": "m", "axis": "Z", "positive": "up", "standard_name": "height"}
    return {
        "time": ("time", times, {"units": "s", "long_name": "time since the start of the run", "axis": "T"}),
        "z": ("z", grid.z, {**vertical, "long_name": "height of cell centres above the mean surface"}),
        "z_face": ("z_face", grid.z_face, {**vertical, "long_name": "height of cell faces above the mean surface"}),
        "y": ("y", grid.y, {"units": "m", "long_name": "distance along y", "axis": "Y"}),
        "x": ("x", grid.x, {"units": "m", "long_name": "distance along x", "axis": "X"}),
    }


def attributes_of(case: Case) -> dict[str, str | float | int]:
    """What the run was: geometry, conventions and forcing, in SI units; directions towards, degrees from +x."""
    forcing, grid = case.forcing, case.grid
    constants: dict[str, str | float | int] = {
        "title": case.title,
        "Conventions": "CF-1.11",
        "source": "toy_fields: small wave-averaged large-eddy solver; a source of example fields, not a research run",
        "comment": "Invented. The top three levels and the entrainment zone are poorly resolved on this grid.",
        "velocity_kind": "eulerian",
        "horizontal_scheme": "spectral",
        "Lx": grid.length_x,
        "Ly": grid.length_y,
        "coriolis_parameter": forcing.coriolis_parameter,
        "thermal_expansion": forcing.thermal_expansion,
        "gravity": forcing.gravity,
        "reference_density": forcing.reference_density,
        "specific_heat": forcing.specific_heat,
        "prandtl_number": case.subgrid.prandtl_number,
        "smagorinsky_constant": case.subgrid.smagorinsky_constant,
        "initial_mixed_layer_depth": case.initial.mixed_layer_depth,
        "initial_temperature_gradient": case.initial.temperature_gradient,
        "seed": case.initial.seed,
        "forcing_units": "m s-1 (friction velocity, Stokes drift), W m-2 (heat flux, positive into the ocean), degree "
        "(directions: towards, counter-clockwise from +x), rad m-1 (wavenumber), s-1, K-1, m s-2, kg m-3, J kg-1 K-1",
    }
    if forcing.stokes_wavenumber > 0:
        constants["stokes_wavenumber"] = forcing.stokes_wavenumber
    for name, ramp in _ramps(case).items():
        if ramp.is_constant:
            constants[name] = ramp.values[0]
    return constants


def forcing_over_time(case: Case, times: np.ndarray) -> dict[str, tuple[str, np.ndarray, dict[str, str]]]:
    """The parts of the forcing that change, as variables over time."""
    units = {
        "friction_velocity": "m s-1", "stress_direction": "degree", "surface_stokes_drift": "m s-1",
        "stokes_direction": "degree", "surface_heat_flux": "W m-2",
    }
    return {
        name: ("time", np.array([ramp.at(t) for t in times]), {"units": units[name], "long_name": name.replace("_", " ")})
        for name, ramp in _ramps(case).items()
        if not ramp.is_constant
    }


def _ramps(case: Case) -> dict[str, Ramp]:
    forcing = case.forcing
    return {
        "friction_velocity": forcing.friction_velocity,
        "stress_direction": forcing.stress_direction,
        "surface_stokes_drift": forcing.surface_stokes_drift,
        "stokes_direction": forcing.stokes_direction,
        "surface_heat_flux": forcing.surface_heat_flux,
    }
