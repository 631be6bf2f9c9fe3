"""The right-hand sides: divergence of the fluxes, Coriolis and Stokes-Coriolis, advection by and tilting of the Stokes
drift, buoyancy, and a sponge that absorbs internal waves above the floor. Everything but the fluxes is linear and is
done on modes.

The horizontal mean of the vertical equation only sets a hydrostatic pressure and is left out.
"""

from __future__ import annotations

from dataclasses import dataclass

import numba
import numpy as np

from toy_fields.solver.fluxes import momentum_fluxes, rates, scalar_fluxes
from toy_fields.solver.forcing import Forcing
from toy_fields.solver.grid import Grid
from toy_fields.solver.state import State
from toy_fields.solver.subgrid import Subgrid, eddy_viscosity
from toy_fields.solver.transforms import HorizontalTransforms


@dataclass(frozen=True)
class Rates:
    """What limits the time step: advective [s-1] (sum over axes of speed / spacing), viscosity [m2 s-1]."""

    advective: float
    viscosity: float


@numba.njit(cache=True, parallel=True)
def _momentum_tendency(
    u: np.ndarray, v: np.ndarray, w: np.ndarray, theta: np.ndarray,
    xx: np.ndarray, xy: np.ndarray, yy: np.ndarray, zz: np.ndarray, xz: np.ndarray, yz: np.ndarray,
    ikx: np.ndarray, iky: np.ndarray, us: np.ndarray, vs: np.ndarray, coriolis: float, buoyancy: float,
    sponge: np.ndarray, sponge_face: np.ndarray, dz: float,
    du: np.ndarray, dv: np.ndarray, dw: np.ndarray,
) -> None:
    nz, nky, nkx = u.shape
    for k in numba.prange(nz):
        us_z = 0.0
        vs_z = 0.0
        us_face = 0.0
        vs_face = 0.0
        if k > 0:
            us_z = (us[k] - us[k - 1]) / dz
            vs_z = (vs[k] - vs[k - 1]) / dz
            us_face = 0.5 * (us[k] + us[k - 1])
            vs_face = 0.5 * (vs[k] + vs[k - 1])
        for j in range(nky):
            for i in range(nkx):
                drift = ikx[i] * us[k] + iky[j] * vs[k] + sponge[k]
                if i == 0 and j == 0:
                    drift = 0.0j
                du[k, j, i] = (
                    -ikx[i] * xx[k, j, i] - iky[j] * xy[k, j, i] - (xz[k + 1, j, i] - xz[k, j, i]) / dz
                    + coriolis * v[k, j, i] - drift * u[k, j, i]
                )
                dv[k, j, i] = (
                    -ikx[i] * xy[k, j, i] - iky[j] * yy[k, j, i] - (yz[k + 1, j, i] - yz[k, j, i]) / dz
                    - coriolis * u[k, j, i] - drift * v[k, j, i]
                )
                if k > 0:
                    u_face = 0.5 * (u[k, j, i] + u[k - 1, j, i])
                    v_face = 0.5 * (v[k, j, i] + v[k - 1, j, i])
                    theta_face = 0.5 * (theta[k, j, i] + theta[k - 1, j, i])
                    dw[k, j, i] = (
                        -ikx[i] * xz[k, j, i] - iky[j] * yz[k, j, i] - (zz[k, j, i] - zz[k - 1, j, i]) / dz
                        + buoyancy * theta_face - us_z * u_face - vs_z * v_face
                        - (ikx[i] * us_face + iky[j] * vs_face + sponge_face[k]) * w[k, j, i]
                    )
        if k > 0:
            dw[k, 0, 0] = 0.0
        du[k, 0, 0] += coriolis * vs[k]
        dv[k, 0, 0] -= coriolis * us[k]


@numba.njit(cache=True, parallel=True)
def _scalar_tendency(
    scalar: np.ndarray, flux_x: np.ndarray, flux_y: np.ndarray, flux_z: np.ndarray,
    ikx: np.ndarray, iky: np.ndarray, us: np.ndarray, vs: np.ndarray, sponge: np.ndarray, dz: float,
    tendency: np.ndarray,
) -> None:
    nz, nky, nkx = scalar.shape
    for k in numba.prange(nz):
        for j in range(nky):
            for i in range(nkx):
                drift = ikx[i] * us[k] + iky[j] * vs[k] + sponge[k]
                if i == 0 and j == 0:
                    drift = 0.0j
                tendency[k, j, i] = (
                    -ikx[i] * flux_x[k, j, i] - iky[j] * flux_y[k, j, i]
                    - (flux_z[k + 1, j, i] - flux_z[k, j, i]) / dz - drift * scalar[k, j, i]
                )


class Equations:
    """The equations on one grid, with the arrays they work in. Not safe to use from two threads at once."""

    def __init__(
        self, grid: Grid, forcing: Forcing, subgrid: Subgrid, transforms: HorizontalTransforms,
        sponge_depth: float = 0.0, sponge_rate: float = 0.0, with_tracer: bool = False,
    ) -> None:
        """sponge_depth [m] above the floor, in which departures from the horizontal mean decay at up to sponge_rate [s-1]."""
        self.grid, self.forcing, self.subgrid, self.transforms = grid, forcing, subgrid, transforms
        self.ikx = 1j * grid.kx[0]
        self.iky = 1j * grid.ky[:, 0]
        self.length_squared = subgrid.mixing_length_squared(grid)
        self.sponge = _sponge(grid.z, grid.depth, sponge_depth, sponge_rate)
        self.sponge_face = _sponge(grid.z_face, grid.depth, sponge_depth, sponge_rate)
        scalars = ["theta", "tracer"] if with_tracer else ["theta"]
        self.scalars = scalars
        centres = ["u", "v", "u_x", "u_y", "v_x", "v_y", "xx", "xy", "yy", "zz", "nu"]
        faces = ["w", "w_x", "w_y", "xz", "yz"]
        for name in scalars:
            centres += [name, f"{name}_x", f"{name}_y", f"{name}_flux_x", f"{name}_flux_y"]
            faces += [f"{name}_flux_z"]
        self.physical = {name: transforms.empty_physical(grid.nz) for name in centres}
        self.physical |= {name: transforms.empty_physical(grid.nz + 1) for name in faces}
        products = ["xx", "xy", "yy", "zz"] + [f"{s}_flux_{axis}" for s in scalars for axis in "xy"]
        self.modes = {name: transforms.empty_modes(grid.nz) for name in products}
        self.modes |= {name: transforms.empty_modes(grid.nz + 1) for name in ["xz", "yz"] + [f"{s}_flux_z" for s in scalars]}
        self._level_advective = np.zeros(grid.nz)
        self._level_viscosity = np.zeros(grid.nz)

    def evaluate(self, state: State, time: float, tendency: State) -> None:
        """Fills `tendency` with d(state)/dt at `time`, pressure left out."""
        grid, physical, modes, forcing = self.grid, self.physical, self.modes, self.forcing
        self._to_physical(state)
        p = physical
        eddy_viscosity(
            p["u"], p["v"], p["w"], p["theta"], p["u_x"], p["u_y"], p["v_x"], p["v_y"], p["w_x"], p["w_y"],
            self.length_squared, self.subgrid.background_viscosity, self.subgrid.prandtl_number,
            forcing.buoyancy_coefficient(), grid.dz, p["nu"],
        )
        stress_u, stress_v = forcing.stress(time)
        momentum_fluxes(
            p["u"], p["v"], p["w"], p["u_x"], p["u_y"], p["v_x"], p["v_y"], p["w_x"], p["w_y"], p["nu"],
            stress_u, stress_v, grid.dz, p["xx"], p["xy"], p["yy"], p["zz"], p["xz"], p["yz"],
        )
        surface = {"theta": forcing.temperature_flux(time), "tracer": forcing.tracer_flux}
        for name in self.scalars:
            scalar_fluxes(
                p["u"], p["v"], p["w"], p[name], p[f"{name}_x"], p[f"{name}_y"], p["nu"],
                self.subgrid.prandtl_number, surface[name], grid.dz,
                p[f"{name}_flux_x"], p[f"{name}_flux_y"], p[f"{name}_flux_z"],
            )
        self.transforms.all_to_modes([(p[name], modes[name]) for name in modes])
        us, vs = forcing.stokes(time, grid)
        _momentum_tendency(
            state.u, state.v, state.w, state.theta,
            modes["xx"], modes["xy"], modes["yy"], modes["zz"], modes["xz"], modes["yz"],
            self.ikx, self.iky, us, vs, forcing.coriolis_parameter, forcing.buoyancy_coefficient(),
            self.sponge, self.sponge_face, grid.dz, tendency.u, tendency.v, tendency.w,
        )
        for name in self.scalars:
            _scalar_tendency(
                state.scalar(name), modes[f"{name}_flux_x"], modes[f"{name}_flux_y"], modes[f"{name}_flux_z"],
                self.ikx, self.iky, us, vs, self.sponge, grid.dz, tendency.scalar(name),
            )

    def rates(self, time: float) -> Rates:
        """What limits the time step, from the fields of the last `evaluate`; NaN where a field is not finite."""
        p = self.physical
        us, vs = self.forcing.stokes(time, self.grid)
        rates(
            p["u"], p["v"], p["w"], p["nu"], us, vs, self.grid.dx, self.grid.dy, self.grid.dz,
            self._level_advective, self._level_viscosity,
        )
        return Rates(float(np.max(self._level_advective)), float(np.max(self._level_viscosity)))

    def _to_physical(self, state: State) -> None:
        p, ikx, iky = self.physical, self.ikx, self.iky[:, None]
        pairs = [(state.u, p["u"]), (state.v, p["v"]), (state.w, p["w"])]
        velocities = {"u": state.u, "v": state.v, "w": state.w}
        for name, values in velocities.items():
            pairs += [(ikx * values, p[f"{name}_x"]), (iky * values, p[f"{name}_y"])]
        for name in self.scalars:
            values = state.scalar(name)
            pairs += [(values, p[name]), (ikx * values, p[f"{name}_x"]), (iky * values, p[f"{name}_y"])]
        self.transforms.all_to_physical(pairs)


def _sponge(z: np.ndarray, depth: float, sponge_depth: float, rate: float) -> np.ndarray:
    """Damping rate [s-1]: `rate` at the floor, falling as a squared ramp to 0 at sponge_depth above it."""
    if sponge_depth <= 0:
        return np.zeros_like(z)
    return rate * np.clip(1.0 - (z + depth) / sponge_depth, 0.0, None) ** 2
