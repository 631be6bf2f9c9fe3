"""The three shipped runs: one per regime, small enough to make again over a cup of tea.

langmuir   wind 0.0061 m s-1 of friction velocity, waves of 60 m and 0.068 m s-1, weak cooling: the set-up of McWilliams,
           Sullivan & Moeng (1997) in a smaller box nearer the equator, turbulent Langmuir number 0.3
shear      the same wind without waves and without cooling
convective strong cooling under almost no wind
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import fields, replace
from typing import Any

import numpy as np

from toy_fields.errors import ToyRequestError
from toy_fields.solver.forcing import Forcing, Ramp
from toy_fields.solver.grid import Grid
from toy_fields.solver.initial import Initial
from toy_fields.solver.run import Case

#: Wavenumber of 60 m waves [rad m-1].
_SIXTY_METRES = 2 * np.pi / 60.0

#: Latitude 12°: the wind's stress keeps its direction through the mixed layer, so that the regimes stand out clearly.
_CORIOLIS = 3.0e-5

_GRID = Grid(nx=64, ny=64, nz=40, length_x=160.0, length_y=160.0, depth=60.0)

CASES: dict[str, Case] = {
    "langmuir": Case(
        name="langmuir",
        title="Langmuir turbulence: wind and waves aligned, turbulent Langmuir number 0.3",
        grid=_GRID,
        forcing=Forcing(
            friction_velocity=Ramp.constant(0.0061), surface_stokes_drift=Ramp.constant(0.068),
            stokes_wavenumber=_SIXTY_METRES, surface_heat_flux=Ramp.constant(-5.0), coriolis_parameter=_CORIOLIS,
        ),
        initial=Initial(mixed_layer_depth=33.0, temperature_gradient=0.01, seed=11),
        output_times=tuple(16200.0 + 900.0 * n for n in range(5)),
        sponge_depth=12.0,
    ),
    "shear": Case(
        name="shear",
        title="Shear turbulence: wind without waves",
        grid=_GRID,
        forcing=Forcing(friction_velocity=Ramp.constant(0.0061), coriolis_parameter=_CORIOLIS),
        initial=Initial(mixed_layer_depth=33.0, temperature_gradient=0.01, seed=12),
        output_times=tuple(28800.0 + 900.0 * n for n in range(4)),
        sponge_depth=12.0,
    ),
    "convective": Case(
        name="convective",
        title="Convective turbulence: strong cooling under almost no wind",
        grid=_GRID,
        forcing=Forcing(
            friction_velocity=Ramp.constant(0.001), surface_heat_flux=Ramp.constant(-200.0), coriolis_parameter=_CORIOLIS
        ),
        initial=Initial(mixed_layer_depth=33.0, temperature_gradient=0.01, seed=13),
        output_times=tuple(10800.0 + 900.0 * n for n in range(4)),
        sponge_depth=12.0,
    ),
}


def case(name: str) -> Case:
    """The case of this name. Raises ToyRequestError for an unknown name."""
    if name not in CASES:
        raise ToyRequestError(f'case "{name}" is not known; the cases are {", ".join(CASES)}.')
    return CASES[name]


def changed(original: Case, changes: Mapping[str, Any]) -> Case:
    """The case with some of its settings changed: keys are field names of Case, Grid, Forcing, Initial or Subgrid.

    Raises ToyRequestError for a name that none of them has, and whatever the settings themselves refuse.
    """
    parts: dict[str, Any] = {
        "grid": original.grid, "forcing": original.forcing, "initial": original.initial, "subgrid": original.subgrid,
    }
    by_part: dict[str, dict[str, Any]] = {part: {} for part in parts}
    own: dict[str, Any] = {}
    for key, value in changes.items():
        part = next((p for p, settings in parts.items() if key in {f.name for f in fields(settings)}), None)
        if part is not None:
            by_part[part][key] = value
        elif key in {f.name for f in fields(original)} - set(parts):
            own[key] = value
        else:
            raise ToyRequestError(f'setting "{key}" is not known to the solver.')
    replaced: dict[str, Any] = {part: replace(settings, **by_part[part]) for part, settings in parts.items()}
    return replace(original, **replaced, **own)
