"""The projection that makes a velocity free of divergence: spectral in x and y, tridiagonal in z.

The Poisson operator is the product of the solver's own divergence and gradient, so what remains is round-off.
"""

from __future__ import annotations

import numba
import numpy as np

from toy_fields.solver.grid import Grid


@numba.njit(cache=True, parallel=True)
def _project(
    u: np.ndarray, v: np.ndarray, w: np.ndarray, potential: np.ndarray,
    ikx: np.ndarray, iky: np.ndarray, inverse_pivot: np.ndarray, upper: np.ndarray, dz: float,
) -> None:
    """One Thomas sweep per row of modes; the loops over kx run innermost, where memory is contiguous."""
    nz, nky, nkx = u.shape
    off = 1.0 / (dz * dz)
    for j in numba.prange(nky):
        for k in range(nz):
            for i in range(nkx):
                divergence = ikx[i] * u[k, j, i] + iky[j] * v[k, j, i] + (w[k + 1, j, i] - w[k, j, i]) / dz
                below = potential[k - 1, j, i] if k > 0 else 0.0j
                potential[k, j, i] = (divergence - off * below) * inverse_pivot[k, j, i]
        for k in range(nz - 2, -1, -1):
            for i in range(nkx):
                potential[k, j, i] -= upper[k, j, i] * potential[k + 1, j, i]
        for k in range(nz):
            for i in range(nkx):
                u[k, j, i] -= ikx[i] * potential[k, j, i]
                v[k, j, i] -= iky[j] * potential[k, j, i]
        for k in range(1, nz):
            for i in range(nkx):
                w[k, j, i] -= (potential[k, j, i] - potential[k - 1, j, i]) / dz


class PressureSolver:
    """Removes the divergence of (u, v, w) modes in place; `potential` then holds the pressure times the time step."""

    def __init__(self, grid: Grid) -> None:
        self.grid = grid
        self.potential = np.zeros((grid.nz, *grid.modes_shape), dtype=np.complex128)
        self._ikx = 1j * grid.kx[0]
        self._iky = 1j * grid.ky[:, 0]
        squared = grid.kx**2 + grid.ky**2
        off = 1.0 / grid.dz**2
        pivot_inverse = np.empty((grid.nz, *grid.modes_shape))
        upper = np.zeros_like(pivot_inverse)
        for k in range(grid.nz):
            diagonal = -squared - off * ((k > 0) + (k < grid.nz - 1))
            pivot = diagonal - (off * upper[k - 1] if k > 0 else 0.0)
            # The horizontal mean has no pressure to solve for: its vertical velocity is zero by continuity.
            pivot[0, 0] = 1.0
            pivot_inverse[k] = 1.0 / pivot
            pivot_inverse[k, 0, 0] = 0.0
            upper[k] = off * pivot_inverse[k]
        self._pivot_inverse = pivot_inverse
        self._upper = upper

    def project(self, u: np.ndarray, v: np.ndarray, w: np.ndarray) -> None:
        """In place: u, v (nz, ky, kx) and w (nz + 1, ky, kx) lose their divergence; w at both lids and its mean are 0."""
        w[0] = 0.0
        w[-1] = 0.0
        w[:, 0, 0] = 0.0
        _project(u, v, w, self.potential, self._ikx, self._iky, self._pivot_inverse, self._upper, self.grid.dz)

    def divergence(self, u: np.ndarray, v: np.ndarray, w: np.ndarray) -> np.ndarray:
        """Modes of the divergence [s-1], (nz, ky, kx)."""
        return self._ikx * u + self._iky[:, None] * v + (w[1:] - w[:-1]) / self.grid.dz
