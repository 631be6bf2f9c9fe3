"""Advective plus subgrid fluxes in physical space, on the staggered levels where their divergence needs them.

All fluxes are kinematic and positive along their axis (upward for z). The advection by the Stokes drift is linear and is
added in mode space by `tendency`.
"""

from __future__ import annotations

import numba
import numpy as np


@numba.njit(cache=True, parallel=True)
def momentum_fluxes(
    u: np.ndarray, v: np.ndarray, w: np.ndarray,
    u_x: np.ndarray, u_y: np.ndarray, v_x: np.ndarray, v_y: np.ndarray, w_x: np.ndarray, w_y: np.ndarray,
    nu: np.ndarray, surface_flux_u: float, surface_flux_v: float, dz: float,
    xx: np.ndarray, xy: np.ndarray, yy: np.ndarray, zz: np.ndarray, xz: np.ndarray, yz: np.ndarray,
) -> None:
    """Fills the six components: xx, xy, yy, zz at centres (nz, y, x); xz, yz at faces (nz + 1, y, x).

    xz at the surface is the wind's momentum flux, at the bottom 0 (a slippery floor).
    """
    nz, ny, nx = u.shape
    for k in numba.prange(nz):
        for j in range(ny):
            for i in range(nx):
                nu_here = nu[k, j, i]
                w_centre = 0.5 * (w[k, j, i] + w[k + 1, j, i])
                w_z = (w[k + 1, j, i] - w[k, j, i]) / dz
                xx[k, j, i] = u[k, j, i] ** 2 - 2.0 * nu_here * u_x[k, j, i]
                yy[k, j, i] = v[k, j, i] ** 2 - 2.0 * nu_here * v_y[k, j, i]
                xy[k, j, i] = u[k, j, i] * v[k, j, i] - nu_here * (u_y[k, j, i] + v_x[k, j, i])
                zz[k, j, i] = w_centre * w_centre - 2.0 * nu_here * w_z
                if k == 0:
                    xz[0, j, i] = 0.0
                    yz[0, j, i] = 0.0
                    xz[nz, j, i] = surface_flux_u
                    yz[nz, j, i] = surface_flux_v
                else:
                    nu_face = 0.5 * (nu_here + nu[k - 1, j, i])
                    u_z = (u[k, j, i] - u[k - 1, j, i]) / dz
                    v_z = (v[k, j, i] - v[k - 1, j, i]) / dz
                    xz[k, j, i] = 0.5 * (u[k, j, i] + u[k - 1, j, i]) * w[k, j, i] - nu_face * (u_z + w_x[k, j, i])
                    yz[k, j, i] = 0.5 * (v[k, j, i] + v[k - 1, j, i]) * w[k, j, i] - nu_face * (v_z + w_y[k, j, i])


@numba.njit(cache=True, parallel=True)
def scalar_fluxes(
    u: np.ndarray, v: np.ndarray, w: np.ndarray, scalar: np.ndarray, scalar_x: np.ndarray, scalar_y: np.ndarray,
    nu: np.ndarray, prandtl: float, surface_flux: float, dz: float,
    flux_x: np.ndarray, flux_y: np.ndarray, flux_z: np.ndarray,
) -> None:
    """Fills flux_x, flux_y (nz, y, x) and flux_z (nz + 1, y, x) of a scalar; no flux through the floor."""
    nz, ny, nx = u.shape
    for k in numba.prange(nz):
        for j in range(ny):
            for i in range(nx):
                diffusivity = nu[k, j, i] / prandtl
                flux_x[k, j, i] = u[k, j, i] * scalar[k, j, i] - diffusivity * scalar_x[k, j, i]
                flux_y[k, j, i] = v[k, j, i] * scalar[k, j, i] - diffusivity * scalar_y[k, j, i]
                if k == 0:
                    flux_z[0, j, i] = 0.0
                    flux_z[nz, j, i] = surface_flux
                else:
                    face = 0.5 * (diffusivity + nu[k - 1, j, i] / prandtl)
                    mean = 0.5 * (scalar[k, j, i] + scalar[k - 1, j, i])
                    gradient = (scalar[k, j, i] - scalar[k - 1, j, i]) / dz
                    flux_z[k, j, i] = mean * w[k, j, i] - face * gradient


@numba.njit(cache=True, parallel=True)
def rates(
    u: np.ndarray, v: np.ndarray, w: np.ndarray, nu: np.ndarray, us: np.ndarray, vs: np.ndarray,
    dx: float, dy: float, dz: float, advective: np.ndarray, viscosity: np.ndarray,
) -> None:
    """Per level: the largest |u+us|/dx + |v+vs|/dy + |w|/dz [s-1] and the largest nu [m2 s-1]; NaN if any value is."""
    nz, ny, nx = u.shape
    for k in numba.prange(nz):
        fastest = 0.0
        largest = 0.0
        total = 0.0
        for j in range(ny):
            for i in range(nx):
                w_largest = max(abs(w[k, j, i]), abs(w[k + 1, j, i]))
                rate = abs(u[k, j, i] + us[k]) / dx + abs(v[k, j, i] + vs[k]) / dy + w_largest / dz
                fastest = max(fastest, rate)
                largest = max(largest, nu[k, j, i])
                total += rate + nu[k, j, i]
        # Comparisons lose NaN, sums keep it.
        advective[k] = fastest if np.isfinite(total) else np.nan
        viscosity[k] = largest if np.isfinite(total) else np.nan
