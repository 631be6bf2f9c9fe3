"""Sampling of periodic levels at many points: four-point (cubic) or two-point (linear) in the horizontal, given weights in z.

A point belongs to a fixed height, so its vertical weights are made once; horizontal weights are made on the fly. Millions of
points a second on one core; results are float64.
"""

from __future__ import annotations

import numpy as np

from lespost.kernels.compiler import kernel


@kernel
def _basis(t: float, cubic: bool, out: np.ndarray) -> None:
    """Weights of points -1, 0, 1, 2 for a position t in [0, 1) between 0 and 1 (Lagrange)."""
    if cubic:
        out[0] = -t * (t - 1.0) * (t - 2.0) / 6.0
        out[1] = (t + 1.0) * (t - 1.0) * (t - 2.0) / 2.0
        out[2] = -(t + 1.0) * t * (t - 2.0) / 2.0
        out[3] = (t + 1.0) * t * (t - 1.0) / 6.0
    else:
        out[0] = 0.0
        out[1] = 1.0 - t
        out[2] = t
        out[3] = 0.0


@kernel
def sample_levels(
    field: np.ndarray, x0: np.ndarray, y0: np.ndarray, shift_x: np.ndarray, shift_y: np.ndarray, levels: np.ndarray,
    level_weights: np.ndarray, weights: np.ndarray, owner: np.ndarray, cubic: bool, out: np.ndarray
) -> None:
    """out[n, owner[m]] += Σ weights[m] · field at (x0[m] + shift_x[n, m], y0[m] + shift_y[n, m]) on the levels of point m.

    field: (nz, ny, nx), periodic in y and x. x0, y0: (points,) in grid units; shift_x, shift_y: (samples, points) in grid units.
    levels: (points, 2) level indices, level_weights: (points, 2). owner: (points,) column of `out` (samples, columns).
    """
    _, ny, nx = field.shape
    wx, wy = np.empty(4), np.empty(4)
    for n in range(shift_x.shape[0]):
        for m in range(x0.size):
            px = x0[m] + shift_x[n, m]
            py = y0[m] + shift_y[n, m]
            fx, fy = np.floor(px), np.floor(py)
            _basis(px - fx, cubic, wx)
            _basis(py - fy, cubic, wy)
            i0, j0 = int(fx), int(fy)
            value = 0.0
            for pair in range(2):
                share = level_weights[m, pair]
                if share == 0.0:
                    continue
                k = levels[m, pair]
                part = 0.0
                for b in range(4):
                    if wy[b] == 0.0:
                        continue
                    j = (j0 + b - 1) % ny
                    row = 0.0
                    for a in range(4):
                        row += wx[a] * np.float64(field[k, j, (i0 + a - 1) % nx])
                    part += wy[b] * row
                value += share * part
            out[n, owner[m]] += weights[m] * value
