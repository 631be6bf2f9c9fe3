"""Sampling of periodic levels at many points: two, four or six points in each horizontal direction, two levels in the vertical.

A point keeps its height and its place relative to a platform, so vertical weights and folded offsets are made once by the
caller; horizontal weights (Lagrange polynomials through equidistant points) are made on the fly. Results are float64.
"""

from __future__ import annotations

import numpy as np

from lespost.kernels.compiler import kernel

#: Points of a polynomial in each horizontal direction, by its name.
ORDERS = {"linear": 2, "cubic": 4, "quintic": 6}


@kernel
def lagrange_weights(t: float, order: int, out: np.ndarray) -> None:
    """out[0:order]: weights of the points 1 - order/2 .. order/2 at position t in [0, 1); order 2, 4 or 6.

    They sum to one and reproduce polynomials of degree order - 1.
    """
    if order == 2:
        out[0] = 1.0 - t
        out[1] = t
    elif order == 4:
        a, b, c, d = t + 1.0, t, t - 1.0, t - 2.0
        out[0] = -b * c * d / 6.0
        out[1] = a * c * d / 2.0
        out[2] = -a * b * d / 2.0
        out[3] = a * b * c / 6.0
    else:
        a, b, c, d, e, f = t + 2.0, t + 1.0, t, t - 1.0, t - 2.0, t - 3.0
        out[0] = -b * c * d * e * f / 120.0
        out[1] = a * c * d * e * f / 24.0
        out[2] = -a * b * d * e * f / 12.0
        out[3] = a * b * c * e * f / 12.0
        out[4] = -a * b * c * d * f / 24.0
        out[5] = a * b * c * d * e / 120.0


@kernel
def sample_levels(
    field: np.ndarray, x: np.ndarray, y: np.ndarray, platform_x: np.ndarray, platform_y: np.ndarray, levels: np.ndarray,
    level_weights: np.ndarray, weights: np.ndarray, owner: np.ndarray, order: int, out: np.ndarray
) -> None:
    """out[n, owner[m]] += Σ weights[m] · field at (platform_x[n] + x[m], platform_y[n] + y[m]) on the levels of point m.

    field: (nz, ny, nx), periodic in y and x. x, y: (points,) and platform_x, platform_y: (platforms,) in grid units, each folded
    into [0, nx) or [0, ny) by the caller. levels: (points, 2), level_weights: (points, 2). owner: (points,) column of `out`
    (platforms, columns). order: points used in each horizontal direction, 2, 4 or 6.
    """
    _, ny, nx = field.shape
    back = order // 2 - 1
    wx, wy = np.empty(6), np.empty(6)
    columns = np.empty(6, np.int64)
    for n in range(platform_x.size):
        for m in range(x.size):
            px, py = platform_x[n] + x[m], platform_y[n] + y[m]
            i0, j0 = int(np.floor(px)), int(np.floor(py))
            lagrange_weights(px - i0, order, wx)
            lagrange_weights(py - j0, order, wy)
            for a in range(order):
                columns[a] = (i0 + a - back) % nx
            low, high = levels[m, 0], levels[m, 1]
            share_low, share_high = level_weights[m, 0], level_weights[m, 1]
            value = 0.0
            for b in range(order):
                j = (j0 + b - back) % ny
                row = 0.0
                for a in range(order):
                    i = columns[a]
                    row += wx[a] * (share_low * field[low, j, i] + share_high * field[high, j, i])
                value += wy[b] * row
            out[n, owner[m]] += weights[m] * value
