"""How a run starts: a mixed layer over a linear stratification, at rest but for small random motions.

"lagrangian_rest" starts from u = -us(z), so that the waves alone excite no inertial oscillation; "eulerian_rest" from
u = 0. The random temperature and velocity live in the mixed layer; the first projection makes the velocity solenoidal.
The random motions are smooth on the scale of a third of the mixed layer: white noise would be gone within minutes, before
a shear instability, which grows over an hour, could take hold of it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from toy_fields.errors import ToyRequestError
from toy_fields.solver.forcing import Forcing
from toy_fields.solver.grid import Grid
from toy_fields.solver.state import State
from toy_fields.solver.transforms import HorizontalTransforms


@dataclass(frozen=True)
class Initial:
    """mixed_layer_depth [m], surface_temperature [degC], temperature_gradient below [K m-1, theta rises upward];
    velocity at rest in the Lagrangian or Eulerian mean; noise_velocity [m s-1], noise_temperature [K], seed;
    tracer_depth [m]: a passive tracer fills the water above it with 1 (None: no tracer)."""

    mixed_layer_depth: float
    surface_temperature: float = 16.0
    temperature_gradient: float = 0.01
    velocity: Literal["lagrangian_rest", "eulerian_rest"] = "lagrangian_rest"
    noise_velocity: float = 3.0e-3
    noise_temperature: float = 1.0e-3
    seed: int = 1
    tracer_depth: float | None = None

    def state(self, grid: Grid, forcing: Forcing, transforms: HorizontalTransforms) -> State:
        """The state at time 0; theta is a departure from surface_temperature."""
        if not 0 < self.mixed_layer_depth <= grid.depth:
            raise ToyRequestError(
                f"mixed_layer_depth = {self.mixed_layer_depth} m in a box {grid.depth} m deep: give a depth inside the box."
            )
        state = State.zeros(grid, self.tracer_depth is not None)
        state.theta[:, 0, 0] = -self.temperature_gradient * np.clip(-grid.z - self.mixed_layer_depth, 0.0, None)
        if self.velocity == "lagrangian_rest":
            us, vs = forcing.stokes(0.0, grid)
            state.u[:, 0, 0], state.v[:, 0, 0] = -us, -vs
        random = np.random.default_rng(self.seed)
        sizes = ((state.u, self.noise_velocity), (state.v, self.noise_velocity), (state.theta, self.noise_temperature))
        for values, size in sizes:
            values += size * self._smooth_noise(grid, transforms, random)
        if state.tracer is not None:
            state.tracer[:, 0, 0] = (-grid.z < self.tracer_depth).astype(float)
        return state

    def _smooth_noise(self, grid: Grid, transforms: HorizontalTransforms, random: np.random.Generator) -> np.ndarray:
        """Modes of a random field of zero horizontal mean and unit standard deviation in the mixed layer, 0 below."""
        scale = self.mixed_layer_depth / 6.0
        modes = transforms.to_modes(random.standard_normal((grid.nz, grid.ny, grid.nx)))
        modes *= np.exp(-0.5 * (grid.kx**2 + grid.ky**2) * scale**2)
        modes[:, 0, 0] = 0.0
        weights = np.exp(-0.5 * ((grid.z[:, None] - grid.z[None, :]) / scale) ** 2)
        inside = -grid.z < self.mixed_layer_depth
        modes = np.einsum("kl,lji->kji", weights * inside[:, None], modes)
        spread = float(np.std(transforms.to_physical(modes)[inside])) if inside.any() else 0.0
        return modes / spread if spread > 0 else modes
