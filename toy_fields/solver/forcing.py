"""What drives a run: wind stress, waves, heat, rotation; constant or piecewise linear in time.

Signs and directions as everywhere: directions are *towards*, degrees counter-clockwise from +x; a heat flux is positive
into the ocean (cooling is negative). The Stokes drift enters as means over the cells, never as surface values.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from lespost.constants import REFERENCE_DENSITY
from toy_fields.errors import ToyRequestError, UnresolvedStokesDepth
from toy_fields.solver.grid import Grid


@dataclass(frozen=True)
class Ramp:
    """A quantity that is piecewise linear in time: `values` at `times` [s], constant before and after."""

    times: tuple[float, ...]
    values: tuple[float, ...]

    def __post_init__(self) -> None:
        if len(self.times) != len(self.values) or not self.times:
            raise ToyRequestError(f"ramp: {len(self.times)} times for {len(self.values)} values; give as many of each.")
        if any(b <= a for a, b in zip(self.times[:-1], self.times[1:], strict=True)):
            raise ToyRequestError(f"ramp: times {self.times} must increase.")
        if not all(np.isfinite(self.times + self.values)):
            raise ToyRequestError("ramp: times and values must be finite numbers.")

    @classmethod
    def constant(cls, value: float) -> Ramp:
        """The same value at all times."""
        return cls((0.0,), (float(value),))

    @property
    def is_constant(self) -> bool:
        """Whether the value never changes."""
        return len(set(self.values)) == 1

    def at(self, time: float) -> float:
        """The value at `time` [s]."""
        return float(np.interp(time, self.times, self.values))


#: Nothing, at all times.
NONE = Ramp((0.0,), (0.0,))


@dataclass(frozen=True)
class Forcing:
    """Everything that drives a run.

    friction_velocity [m s-1], stress_direction [degree]; surface_stokes_drift [m s-1] at z = 0, stokes_direction
    [degree], stokes_wavenumber k [rad m-1] with us = us0 exp(2 k z); stokes_shape "linear" gives us = us0 (1 + z / depth)
    instead (for the instability test). surface_heat_flux [W m-2], tracer_flux [tracer m s-1, upward];
    coriolis_parameter [s-1]; thermal_expansion [K-1], gravity [m s-2], reference_density [kg m-3],
    specific_heat [J kg-1 K-1].
    """

    friction_velocity: Ramp = NONE
    stress_direction: Ramp = NONE
    surface_stokes_drift: Ramp = NONE
    stokes_direction: Ramp = NONE
    stokes_wavenumber: float = 0.0
    stokes_shape: Literal["exponential", "linear"] = "exponential"
    surface_heat_flux: Ramp = NONE
    tracer_flux: float = 0.0
    coriolis_parameter: float = 0.0
    thermal_expansion: float = 2.0e-4
    gravity: float = 9.81
    reference_density: float = REFERENCE_DENSITY
    specific_heat: float = 3990.0

    def __post_init__(self) -> None:
        if min(self.friction_velocity.values) < 0 or min(self.surface_stokes_drift.values) < 0:
            raise ToyRequestError(
                "friction velocity and surface Stokes drift are moduli and cannot be negative; turn the direction by 180."
            )
        if max(self.surface_stokes_drift.values) > 0 and self.stokes_shape == "exponential" and self.stokes_wavenumber <= 0:
            raise ToyRequestError("waves need a positive wavenumber: give stokes_wavenumber in rad m-1 (0.105 for 60 m).")

    def check_resolved(self, grid: Grid) -> None:
        """Raises UnresolvedStokesDepth if the drift decays within 1.5 levels (common practice asks for 3)."""
        if max(self.surface_stokes_drift.values) == 0 or self.stokes_shape == "linear":
            return
        decay = 0.5 / self.stokes_wavenumber
        if decay < 1.5 * grid.dz:
            levels = int(np.ceil(3.0 * grid.depth / decay))
            raise UnresolvedStokesDepth(
                f"the Stokes drift decays over {decay:.3g} m, which is {decay / grid.dz:.2g} of the level thickness "
                f"{grid.dz:.3g} m: use nz = {levels} (three levels per decay depth) or longer waves."
            )

    def stress(self, time: float) -> tuple[float, float]:
        """Upward kinematic momentum flux (Fu, Fv) at the surface [m2 s-2]; minus u*² along the stress direction."""
        angle = np.deg2rad(self.stress_direction.at(time))
        modulus = self.friction_velocity.at(time) ** 2
        return -modulus * float(np.cos(angle)), -modulus * float(np.sin(angle))

    def temperature_flux(self, time: float) -> float:
        """Upward kinematic temperature flux at the surface [K m s-1]; positive when the ocean is cooled."""
        return -self.surface_heat_flux.at(time) / (self.reference_density * self.specific_heat)

    def buoyancy_coefficient(self) -> float:
        """b per kelvin: g alpha [m s-2 K-1]."""
        return self.gravity * self.thermal_expansion

    def stokes(self, time: float, grid: Grid) -> tuple[np.ndarray, np.ndarray]:
        """Cell-mean Stokes drift (us, vs) [m s-1], each (nz,)."""
        angle = np.deg2rad(self.stokes_direction.at(time))
        profile = self.surface_stokes_drift.at(time) * self.stokes_shape_means(grid)
        return profile * np.cos(angle), profile * np.sin(angle)

    def stokes_shape_means(self, grid: Grid) -> np.ndarray:
        """Cell means of us / us0 [1], (nz,)."""
        if self.stokes_shape == "linear":
            return 1.0 + grid.z / grid.depth
        if self.stokes_wavenumber <= 0:
            return np.zeros(grid.nz)
        k = self.stokes_wavenumber
        return np.exp(2 * k * grid.z) * np.sinh(k * grid.dz) / (k * grid.dz)
