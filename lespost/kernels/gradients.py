"""Sums over one level that need horizontal neighbours: structure tensor of w, energy at the grid scale, divergence.

Differences across a periodic level of spacing dx, dy. A component on its own low-side faces is differenced over one cell,
which is the discrete divergence of the staggered grid itself; a component at cell centres by central differences over two.
"""

from __future__ import annotations

import numpy as np

from lespost.kernels.compiler import kernel, reordering_kernel
from lespost.kernels.rows import ALONG_X, ALONG_Y, Float64, Stored, wrapped, wrapped_between

#: Columns of `structure_sums`.
STRUCTURE = ("dwdx_dwdx", "dwdx_dwdy", "dwdy_dwdy", "w_step_x", "w_step_y")
#: Columns of `divergence_sums`: the divergence squared, and the sum of its three terms squared.
DIVERGENCE = ("divergence", "terms")


@reordering_kernel
def _add_structure(south: Float64, row: Float64, north: Float64, nx: int, per_x: float, per_y: float, out: Float64) -> None:
    xx = xy = yy = step_x = step_y = 0.0
    for i in range(1, nx + 1):
        dx = (row[i + 1] - row[i - 1]) * per_x
        dy = (north[i] - south[i]) * per_y
        xx += dx * dx
        xy += dx * dy
        yy += dy * dy
        a = row[i + 1] - row[i]
        b = north[i] - row[i]
        step_x += a * a
        step_y += b * b
    out[0] += xx
    out[1] += xy
    out[2] += yy
    out[3] += step_x
    out[4] += step_y


@kernel
def structure_sums(w_lower: Stored, w_upper: Stored, dx: float, dy: float, rows: Float64, out: Float64) -> None:
    """Sums of `STRUCTURE` of w at cell centres: products of central differences, squared steps between neighbours.

    rows: (3 or more, nx + 2) work space. w_lower, w_upper: face levels, or twice the same centred level.
    """
    ny, nx = w_lower.shape
    out[:] = 0.0
    wrapped_between(w_lower, w_upper, ny - 1, rows[0])
    wrapped_between(w_lower, w_upper, 0, rows[1])
    for j in range(ny):
        wrapped_between(w_lower, w_upper, j + 1 if j + 1 < ny else 0, rows[(j + 2) % 3])
        _add_structure(rows[j % 3], rows[(j + 1) % 3], rows[(j + 2) % 3], nx, 0.5 / dx, 0.5 / dy, out)


@reordering_kernel
def _divergence_of_row(
    u: Float64, v_low: Stored, v_high: Stored, w_low: Stored, w_high: Stored, back: int,
    per_x: float, per_y: float, per_z: float,
) -> tuple[float, float]:
    total = terms = 0.0
    for i in range(len(v_low)):
        a = (u[i + 2] - u[i + 1 - back]) * per_x
        b = (np.float64(v_high[i]) - np.float64(v_low[i])) * per_y
        c = (np.float64(w_high[i]) - np.float64(w_low[i])) * per_z
        d = a + b + c
        total += d * d
        terms += a * a + b * b + c * c
    return total, terms


@kernel
def divergence_sums(
    u: Stored, v: Stored, w_low: Stored, w_high: Stored, u_arrangement: int, v_arrangement: int,
    dx: float, dy: float, height: float, row: Float64, out: Float64,
) -> None:
    """Sums of `DIVERGENCE` at cell centres. w_low, w_high: the levels of w `height` apart across the centre.

    row: (nx + 2) work space.
    """
    ny = u.shape[0]
    out[:] = 0.0
    x_one = u_arrangement == ALONG_X
    y_one = v_arrangement == ALONG_Y
    for j in range(ny):
        wrapped(u, j, row)
        total, terms = _divergence_of_row(
            row, v[j if y_one else (j - 1) % ny], v[(j + 1) % ny], w_low[j], w_high[j], 0 if x_one else 1,
            1.0 / dx if x_one else 0.5 / dx, 1.0 / dy if y_one else 0.5 / dy, 1.0 / height,
        )
        out[0] += total
        out[1] += terms
