"""The prognostic variables as Fourier modes: u, v, scalars at centres (nz, ky, kx), w at faces (nz + 1, ky, kx)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from toy_fields.solver.grid import Grid


@dataclass
class State:
    """Mutable on purpose: the stepper updates it in place. theta is a departure from the run's reference temperature."""

    u: np.ndarray
    v: np.ndarray
    w: np.ndarray
    theta: np.ndarray
    tracer: np.ndarray | None = None

    @classmethod
    def zeros(cls, grid: Grid, with_tracer: bool = False) -> State:
        """A state at rest."""
        centre = (grid.nz, *grid.modes_shape)
        face = (grid.nz + 1, *grid.modes_shape)
        u, v, w, theta = (np.zeros(shape, dtype=np.complex128) for shape in (centre, centre, face, centre))
        return cls(u, v, w, theta, np.zeros(centre, dtype=np.complex128) if with_tracer else None)

    def scalar(self, name: str) -> np.ndarray:
        """The scalar of this name."""
        values: np.ndarray | None = getattr(self, name)
        if values is None:
            raise KeyError(name)
        return values

    def variables(self) -> list[np.ndarray]:
        """All arrays, always in the same order."""
        arrays = [self.u, self.v, self.w, self.theta]
        return arrays if self.tracer is None else [*arrays, self.tracer]

    def kinetic_energy(self, grid: Grid) -> float:
        """Volume mean of (u² + v² + w²) / 2 [m2 s-2]; half of w² of each face belongs to either cell."""
        weight = np.full(grid.kept_x, 2.0)
        weight[0] = 1.0
        total = sum(float(np.sum(weight * np.abs(values) ** 2)) for values in (self.u, self.v, self.w))
        return 0.5 * total / grid.nz
