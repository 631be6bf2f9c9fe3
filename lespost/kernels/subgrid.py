"""Mean subgrid fluxes through one level from an eddy viscosity: stress and scalar flux of a down-gradient closure.

tau_13 = -nu (du/dz + dw/dx), tau_23 = -nu (dv/dz + dw/dy), flux of c = -nu dc/dz (the caller divides by the Prandtl number).
Kinematic, positive upward. Where u or v is staggered, its stress is formed at its own points, with nu averaged to them.
"""

from __future__ import annotations

import numpy as np

from lespost.kernels.compiler import kernel, reordering_kernel
from lespost.kernels.rows import ALONG_X, ALONG_Y, Float64, Pieces, Stored, level, wrapped

#: Columns of `subgrid_sums`.
SUBGRID = ("uw_sgs", "vw_sgs", "wc_sgs")


@reordering_kernel
def _stress_along_x(nu: Float64, w: Float64, low: Stored, high: Stored, staggered: bool, per_x: float, per_z: float) -> float:
    total = 0.0
    if staggered:
        for i in range(len(low)):
            slope = (np.float64(high[i]) - np.float64(low[i])) * per_z + (w[i + 1] - w[i]) * per_x
            total += 0.5 * (nu[i] + nu[i + 1]) * slope
    else:
        for i in range(len(low)):
            slope = (np.float64(high[i]) - np.float64(low[i])) * per_z + (w[i + 2] - w[i]) * (0.5 * per_x)
            total += nu[i + 1] * slope
    return -total


@reordering_kernel
def _stress_along_y(
    nu: Stored, nu_south: Stored, w_south: Stored, w_north: Stored, low: Stored, high: Stored, per_y: float, per_z: float
) -> float:
    total = 0.0
    for i in range(len(low)):
        slope = (np.float64(high[i]) - np.float64(low[i])) * per_z + (np.float64(w_north[i]) - np.float64(w_south[i])) * per_y
        total += 0.5 * (np.float64(nu[i]) + np.float64(nu_south[i])) * slope
    return -total


@reordering_kernel
def _scalar_flux(nu: Stored, low: Stored, high: Stored, per_z: float) -> float:
    total = 0.0
    for i in range(len(low)):
        total += nu[i] * (np.float64(high[i]) - np.float64(low[i]))
    return -total * per_z


@kernel
def _mean_of_levels(a: Stored, b: Stored, out: Stored) -> None:
    for j in range(a.shape[0]):
        for i in range(a.shape[1]):
            out[j, i] = 0.5 * (np.float64(a[j, i]) + np.float64(b[j, i]))


@kernel
def subgrid_pass(
    nu: Pieces, u: Pieces, v: Pieces, w: Pieces, c: Pieces, has_scalar: bool, u_arrangement: int, v_arrangement: int,
    nu_of: np.ndarray, w_of: np.ndarray, low: np.ndarray, high: np.ndarray, height: Float64, dx: float, dy: float,
    out: Float64,
) -> None:
    """Sums of `SUBGRID` at each of m levels into out[m, 3].

    nu_of, w_of: (m, 2) positions of the two levels whose mean is nu, and w, at the level (twice the same where they are
    there already); low, high, height: the levels of u, v, c whose difference over `height` is the vertical gradient.
    """
    ny, nx = u[1].shape[1], u[1].shape[2]
    wide = np.empty((2, nx + 2))
    nu_level = np.empty((ny, nx))
    w_level = np.empty((ny, nx))
    for m in range(len(low)):
        _mean_of_levels(level(nu, nu_of[m, 0]), level(nu, nu_of[m, 1]), nu_level)
        _mean_of_levels(level(w, w_of[m, 0]), level(w, w_of[m, 1]), w_level)
        lo, hi, per_z = low[m], high[m], 1.0 / height[m]
        out[m, :] = 0.0
        u_low, u_high, v_low, v_high = level(u, lo), level(u, hi), level(v, lo), level(v, hi)
        c_low, c_high = level(c, lo), level(c, hi)
        for j in range(ny):
            south = (j - 1) % ny
            north = (j + 1) % ny
            wrapped(nu_level, j, wide[0])
            wrapped(w_level, j, wide[1])
            out[m, 0] += _stress_along_x(wide[0], wide[1], u_low[j], u_high[j], u_arrangement == ALONG_X, 1.0 / dx, per_z)
            if v_arrangement == ALONG_Y:
                out[m, 1] += _stress_along_y(
                    nu_level[j], nu_level[south], w_level[south], w_level[j], v_low[j], v_high[j], 1.0 / dy, per_z
                )
            else:
                out[m, 1] += _stress_along_y(
                    nu_level[j], nu_level[j], w_level[south], w_level[north], v_low[j], v_high[j], 0.5 / dy, per_z
                )
            if has_scalar:
                out[m, 2] += _scalar_flux(nu_level[j], c_low[j], c_high[j], per_z)
