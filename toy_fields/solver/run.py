"""A run from its start to its snapshots: `Case` says all there is to say, `run` yields fields in physical space."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field

import numba
import numpy as np

from toy_fields.errors import FieldsNotFinite, ToyRequestError
from toy_fields.solver.forcing import Forcing
from toy_fields.solver.grid import Grid
from toy_fields.solver.initial import Initial
from toy_fields.solver.stepper import Stepper
from toy_fields.solver.subgrid import Subgrid
from toy_fields.solver.tendency import Equations
from toy_fields.solver.transforms import HorizontalTransforms


@dataclass(frozen=True)
class Case:
    """All that shapes a run. output_times [s] must increase; time_step None means chosen as the run goes.

    sponge_depth [m] above the floor and sponge_rate [s-1] absorb internal waves.
    """

    name: str
    title: str
    grid: Grid
    forcing: Forcing
    initial: Initial
    output_times: tuple[float, ...]
    subgrid: Subgrid = field(default_factory=Subgrid)
    sponge_depth: float = 0.0
    sponge_rate: float = 2.0e-3
    time_step: float | None = None
    courant: float = 0.5

    def __post_init__(self) -> None:
        if not self.output_times or any(
            b <= a for a, b in zip((-1e-9, *self.output_times[:-1]), self.output_times, strict=True)
        ):
            raise ToyRequestError(f"output_times {self.output_times} must increase from 0 or later.")
        self.forcing.check_resolved(self.grid)


@dataclass(frozen=True)
class Snapshot:
    """Fields at one time: u, v, theta (degC), nu, tracer at centres (z, y, x), w at faces (z + 1, y, x); SI."""

    time: float
    u: np.ndarray
    v: np.ndarray
    w: np.ndarray
    theta: np.ndarray
    nu: np.ndarray
    tracer: np.ndarray | None


def start(case: Case, threads: int = 1) -> Stepper:
    """A stepper at time 0 of the case."""
    numba.set_num_threads(max(1, min(threads, int(vars(numba.config)["NUMBA_NUM_THREADS"]))))
    transforms = HorizontalTransforms(case.grid, threads)
    state = case.initial.state(case.grid, case.forcing, transforms)
    equations = Equations(
        case.grid, case.forcing, case.subgrid, transforms, case.sponge_depth, case.sponge_rate, state.tracer is not None
    )
    return Stepper(equations, state, courant=case.courant)


def run(case: Case, threads: int = 1, progress: Callable[[float, int], None] | None = None) -> Iterator[Snapshot]:
    """The snapshots of the case, one after the other. progress(time, steps) is called after every step.

    Raises FieldsNotFinite rather than yielding a field with NaN, UnstableTimeStep for a fixed step beyond the limit.
    """
    stepper = start(case, threads)
    for time in case.output_times:
        while stepper.time < time - 1e-9 * max(1.0, time):
            stepper.step(time - stepper.time, case.time_step)
            if progress is not None:
                progress(stepper.time, stepper.steps)
        stepper.time = time
        yield snapshot(stepper, case.initial.surface_temperature)


def snapshot(stepper: Stepper, reference_temperature: float) -> Snapshot:
    """The stepper's present fields in physical space; the viscosity is evaluated for them."""
    equations, state = stepper.equations, stepper.state
    equations.evaluate(state, stepper.time, stepper.scratch)
    p = equations.physical
    names = ["u", "v", "w", "nu", *equations.scalars]
    fields = {name: p[name].copy() for name in names}
    for name, values in fields.items():
        if not np.all(np.isfinite(values)):
            raise FieldsNotFinite(
                f"{name} holds values that are not finite at time {stepper.time:.0f} s: nothing is written; use a shorter "
                "time step or a finer grid."
            )
    theta = fields["theta"] + reference_temperature
    return Snapshot(
        stepper.time, fields["u"], fields["v"], fields["w"], theta, fields["nu"], fields.get("tracer")
    )
