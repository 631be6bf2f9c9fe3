"""Between Fourier modes and physical space, level by level, with the 2/3 rule built in.

Only the kept modes are transformed: along y for the kept kx alone, then along x; the padding stays zero. A mode is a
Fourier coefficient (the (0, 0) mode is the horizontal mean). Plans are FFTW "estimate" plans of one thread each; more
threads work on different fields at the same time, so results do not depend on their number.
"""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from queue import LifoQueue

import numpy as np
import pyfftw

from toy_fields.solver.grid import Grid

_FLAGS = ("FFTW_ESTIMATE",)


class _Workspace:
    """Buffers and plans for one field of `levels` levels."""

    def __init__(self, grid: Grid, levels: int) -> None:
        nx, ny, half = grid.nx, grid.ny, grid.nx // 2 + 1
        self.kept_y = grid.kept_y
        kept_x = grid.kept_x
        self.narrow = pyfftw.zeros_aligned((levels, ny, kept_x), dtype="complex128")
        self.narrow_result = pyfftw.zeros_aligned((levels, ny, kept_x), dtype="complex128")
        self.wide = pyfftw.zeros_aligned((levels, ny, half), dtype="complex128")
        self.physical = pyfftw.zeros_aligned((levels, ny, nx), dtype="float64")
        columns = self.wide[:, :, :kept_x]
        self.inverse_y = pyfftw.FFTW(self.narrow, columns, axes=(1,), direction="FFTW_BACKWARD", flags=_FLAGS)
        self.inverse_x = pyfftw.FFTW(self.wide, self.physical, axes=(2,), direction="FFTW_BACKWARD", flags=_FLAGS)
        self.forward_x = pyfftw.FFTW(self.physical, self.wide, axes=(2,), direction="FFTW_FORWARD", flags=_FLAGS)
        self.forward_y = pyfftw.FFTW(columns, self.narrow_result, axes=(1,), direction="FFTW_FORWARD", flags=_FLAGS)
        self.narrow[:] = 0.0
        self.wide[:] = 0.0
        self.scale = 1.0 / (nx * ny)

    def to_physical(self, modes: np.ndarray, out: np.ndarray) -> None:
        self.narrow[:, : self.kept_y] = modes[:, : self.kept_y]
        self.narrow[:, -(self.kept_y - 1) :] = modes[:, self.kept_y :]
        self.inverse_y.execute()
        # A forward transform on this workspace filled the columns beyond the kept ones: clear them.
        self.wide[:, :, modes.shape[2] :] = 0.0
        self.inverse_x.execute()
        out[:] = self.physical

    def to_modes(self, field: np.ndarray, out: np.ndarray) -> None:
        self.physical[:] = field
        self.forward_x.execute()
        self.forward_y.execute()
        np.multiply(self.narrow_result[:, : self.kept_y], self.scale, out=out[:, : self.kept_y])
        np.multiply(self.narrow_result[:, -(self.kept_y - 1) :], self.scale, out=out[:, self.kept_y :])


class HorizontalTransforms:
    """Transforms of fields on `grid`; `threads` fields at a time."""

    def __init__(self, grid: Grid, threads: int = 1) -> None:
        self.grid = grid
        self._pools: dict[int, LifoQueue[_Workspace]] = {}
        for levels in (grid.nz, grid.nz + 1):
            pool: LifoQueue[_Workspace] = LifoQueue()
            for _ in range(threads):
                pool.put(_Workspace(grid, levels))
            self._pools[levels] = pool
        self._executor = ThreadPoolExecutor(threads) if threads > 1 else None

    def empty_modes(self, levels: int) -> np.ndarray:
        """A zero array of modes, (levels, ky, kx), complex128."""
        return np.zeros((levels, *self.grid.modes_shape), dtype=np.complex128)

    def empty_physical(self, levels: int) -> np.ndarray:
        """A zero array in physical space, (levels, y, x), float64."""
        return np.zeros((levels, self.grid.ny, self.grid.nx))

    def to_physical(self, modes: np.ndarray, out: np.ndarray | None = None) -> np.ndarray:
        """The field (levels, y, x) of these modes."""
        result = self.empty_physical(len(modes)) if out is None else out
        pool = self._pools[len(modes)]
        workspace = pool.get()
        workspace.to_physical(modes, result)
        pool.put(workspace)
        return result

    def to_modes(self, field: np.ndarray, out: np.ndarray | None = None) -> np.ndarray:
        """The kept modes (levels, ky, kx) of this field; anything beyond two thirds of the grid's limit is dropped."""
        result = self.empty_modes(len(field)) if out is None else out
        pool = self._pools[len(field)]
        workspace = pool.get()
        workspace.to_modes(field, result)
        pool.put(workspace)
        return result

    def all_to_physical(self, pairs: Sequence[tuple[np.ndarray, np.ndarray]]) -> None:
        """Every (modes, physical) pair, filling the second of each."""
        self._each(self.to_physical, pairs)

    def all_to_modes(self, pairs: Sequence[tuple[np.ndarray, np.ndarray]]) -> None:
        """Every (physical, modes) pair, filling the second of each."""
        self._each(self.to_modes, pairs)

    def _each(self, transform, pairs: Sequence[tuple[np.ndarray, np.ndarray]]) -> None:  # type: ignore[no-untyped-def]
        if self._executor is None:
            for source, target in pairs:
                transform(source, target)
        else:
            list(self._executor.map(lambda pair: transform(*pair), pairs))
