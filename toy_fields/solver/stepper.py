"""Third-order Runge-Kutta steps with a projection at each stage, and the limits of their stability.

Low-storage coefficients of Spalart, Moser & Rogers (1991) (after Wray), all terms explicit. On the imaginary axis the
scheme is stable to sqrt(3); the 2/3 rule leaves wavenumbers up to 2 pi / 3 per spacing, so the advective number
dt (|u|/dx + |v|/dy + |w|/dz) must stay below sqrt(3) / (2 pi / 3) = 0.83.
"""

from __future__ import annotations

import numba
import numpy as np

from toy_fields.errors import FieldsNotFinite, UnstableTimeStep
from toy_fields.solver.grid import Grid
from toy_fields.solver.pressure import PressureSolver
from toy_fields.solver.state import State
from toy_fields.solver.tendency import Equations, Rates

#: Weights of this stage's tendency and of the last stage's.
STAGES: tuple[tuple[float, float], ...] = ((8 / 15, 0.0), (5 / 12, -17 / 60), (3 / 4, -5 / 12))

#: Limit of dt (|u|/dx + |v|/dy + |w|/dz); derived above.
ADVECTIVE_LIMIT = float(np.sqrt(3.0) / (2.0 * np.pi / 3.0))

#: Limit of dt nu (kx² + ky² + 4/dz²) on the negative real axis of a third-order Runge-Kutta scheme.
DIFFUSIVE_LIMIT = 2.5


@numba.njit(cache=True, parallel=True)
def _advance(values: np.ndarray, new: np.ndarray, old: np.ndarray, weight_new: float, weight_old: float) -> None:
    for k in numba.prange(values.shape[0]):
        for j in range(values.shape[1]):
            for i in range(values.shape[2]):
                values[k, j, i] += weight_new * new[k, j, i] + weight_old * old[k, j, i]


class Stepper:
    """Advances `state` in time. `courant` is the advective number aimed at when the step is chosen by the stepper."""

    def __init__(self, equations: Equations, state: State, time: float = 0.0, courant: float = 0.5) -> None:
        if not 0 < courant < ADVECTIVE_LIMIT:
            raise UnstableTimeStep(
                f"courant = {courant:g}: the scheme is stable below {ADVECTIVE_LIMIT:.2f}; use 0.5 (or 0.7 in a hurry)."
            )
        self.equations, self.state, self.time, self.courant = equations, state, time, courant
        self.pressure = PressureSolver(equations.grid)
        self.steps = 0
        with_tracer = state.tracer is not None
        self._new = State.zeros(equations.grid, with_tracer)
        self._old = State.zeros(equations.grid, with_tracer)
        self.pressure.project(state.u, state.v, state.w)

    @property
    def scratch(self) -> State:
        """A state whose content does not matter between steps."""
        return self._new

    def step(self, longest: float, fixed: float | None = None) -> float:
        """One step of at most `longest` seconds; `fixed` asks for that step instead of the automatic one.

        Returns the step taken [s]. Raises UnstableTimeStep where `fixed` is beyond the limit, FieldsNotFinite where a
        field is no longer finite.
        """
        self.equations.evaluate(self.state, self.time, self._new)
        rates = self.equations.rates(self.time)
        self._check_finite(rates)
        limit = self._stable_step(rates)
        if fixed is None:
            dt = min(longest, limit * self.courant / ADVECTIVE_LIMIT)
        else:
            if fixed > limit:
                raise UnstableTimeStep(
                    f"time step {fixed:g} s at time {self.time:.0f} s: the limit is {limit:.3g} s here (speeds of "
                    f"{rates.advective:.3g} spacings per second, eddy viscosity {rates.viscosity:.3g} m2 s-1); use "
                    f"{0.6 * limit:.2g} s, or leave the time step out and it is chosen as the run goes."
                )
            dt = min(fixed, longest)
        elapsed = 0.0
        for stage, (weight, weight_old) in enumerate(STAGES):
            if stage > 0:
                self.equations.evaluate(self.state, self.time + elapsed, self._new)
            for values, new, old in zip(
                self.state.variables(), self._new.variables(), self._old.variables(), strict=True
            ):
                _advance(values, new, old, dt * weight, dt * weight_old)
            self.pressure.project(self.state.u, self.state.v, self.state.w)
            self._new, self._old = self._old, self._new
            elapsed += dt * (weight + weight_old)
        self.time += dt
        self.steps += 1
        return dt

    def advance_to(self, time: float, fixed: float | None = None) -> None:
        """Steps until `time` [s] is reached exactly."""
        while self.time < time - 1e-9 * max(1.0, abs(time)):
            self.step(time - self.time, fixed)
        self.time = time

    def _stable_step(self, rates: Rates) -> float:
        grid = self.equations.grid
        largest = float(np.max(grid.kx) ** 2 + np.max(grid.ky) ** 2 + 4.0 / grid.dz**2)
        diffusivity = rates.viscosity * max(1.0, 1.0 / self.equations.subgrid.prandtl_number)
        # The other oscillations: rotation, and internal waves of the strongest mean stratification.
        theta = self.state.theta[:, 0, 0].real
        gradient = float(np.max(np.diff(theta))) / grid.dz
        buoyancy_frequency = np.sqrt(max(self.equations.forcing.buoyancy_coefficient() * gradient, 0.0))
        oscillation = max(buoyancy_frequency, abs(self.equations.forcing.coriolis_parameter), 1e-12)
        return min(
            ADVECTIVE_LIMIT / max(rates.advective, 1e-12),
            DIFFUSIVE_LIMIT / max(diffusivity * largest, 1e-12),
            1.7 / oscillation,
        )

    def _check_finite(self, rates: Rates) -> None:
        if not (np.isfinite(rates.advective) and np.isfinite(rates.viscosity)):
            raise FieldsNotFinite(
                f"a velocity stopped being a finite number by time {self.time:.0f} s (step {self.steps}): nothing is "
                "written; use a shorter time step, a finer grid or weaker forcing."
            )


def divergence_ratio(grid: Grid, pressure: PressureSolver, state: State) -> float:
    """rms of the divergence over rms of the largest velocity gradient it is made of [1]."""
    divergence = pressure.divergence(state.u, state.v, state.w)
    stretching = (state.w[1:] - state.w[:-1]) / grid.dz
    scale = np.sqrt(np.sum(np.abs(stretching) ** 2) + np.sum(np.abs(grid.kx * state.u) ** 2))
    return float(np.sqrt(np.sum(np.abs(divergence) ** 2)) / scale) if scale > 0 else 0.0
