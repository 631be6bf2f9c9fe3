"""The profiler of the invented record against flows whose beams are known in closed form."""

from __future__ import annotations

import numpy as np
import pytest

from toy_fields.profiler import BeamSampler, Profiler
from toy_fields.record import Recorded, RecordPlan, blemish
from toy_fields.solver.grid import Grid
from toy_fields.solver.state import State

GRID = Grid(48, 48, 80, 120.0, 120.0, 40.0)


def test_uniform_flow_is_recovered() -> None:
    state = State.zeros(GRID)
    state.u[:, 0, 0], state.v[:, 0, 0], state.w[:, 0, 0] = 0.2, -0.1, 0.03
    profiler = Profiler()
    u, v, w, error = profiler.velocities(BeamSampler(GRID, profiler).beams(state))
    for found, expected in ((u, 0.2), (v, -0.1), (w, 0.03), (error, 0.0)):
        assert found == pytest.approx(np.full(found.shape, expected), abs=1e-14)


def test_linear_shear_is_unbiased() -> None:
    state = State.zeros(GRID)
    state.u[:, 0, 0] = 0.01 * GRID.z
    profiler = Profiler()
    u, *_ = profiler.velocities(BeamSampler(GRID, profiler).beams(state))
    inside = profiler.depths > 2.0
    assert u[inside] == pytest.approx(-0.01 * profiler.depths[inside], abs=1e-14)


def test_pair_reads_a_wave_of_u_by_the_cosine_of_half_the_separation() -> None:
    # u = U cos(kx), w = 0, centred on a crest: U cos(k r tan(angle)) at height r; wavelength 40 m, r = 15 m, 20 degrees:
    # 0.654266 (derived in closed form).
    state = State.zeros(GRID)
    k = 3
    state.u[:, 0, k] = 0.5 * 0.1 * np.exp(-1j * GRID.kx[0, k] * (60.0 - GRID.x[0]))
    profiler = Profiler(head_depth=25.0, beam_angle=20.0, x=60.0, y=60.0)
    u, v, *_ = profiler.velocities(BeamSampler(GRID, profiler).beams(state))
    at_15 = int(np.argmin(np.abs(25.0 - profiler.depths - 15.0)))
    assert 25.0 - profiler.depths[at_15] == 15.0
    # The triangle of cell length 1 m averages a gently curved function: 3e-4.
    assert u[at_15] / 0.1 == pytest.approx(0.654266, abs=5e-4)
    assert v == pytest.approx(np.zeros_like(v), abs=1e-14)


def test_triangle_attenuates_short_vertical_waves() -> None:
    # A triangle of base 2 L: [sin(kL/2) / (kL/2)]²; L = 2 m, wavelength 8 m: 0.810569 (derived in closed form).
    state = State.zeros(GRID)
    state.u[:, 0, 0] = 0.1 * np.cos(2 * np.pi / 8.0 * (GRID.z + 13.0))
    profiler = Profiler(head_depth=25.0, cell_length=2.0, blanking=2.0)
    u, *_ = profiler.velocities(BeamSampler(GRID, profiler).beams(state))
    centre = int(np.flatnonzero(profiler.depths == 13.0)[0])
    # Linear interpolation between levels 0.5 m apart costs up to 1 - (2 + cos(k dz)) / 3 = 2.5 % more.
    assert u[centre] / 0.1 == pytest.approx(0.810569, rel=0.03)


def test_blemishes_are_flagged() -> None:
    profiler, plan = Profiler(), RecordPlan()
    times = plan.begin + 60.0 * np.arange(240)
    clean = Recorded(times, np.zeros((4, 240, len(profiler.depths))), np.ones((240, len(profiler.depths)), dtype=np.int8))
    spoiled = blemish(clean, profiler, plan)
    good = spoiled.flags == 1
    # noise of the good samples is what the plan says, 3 standard errors
    assert spoiled.beams[:, good].std() == pytest.approx(plan.beam_noise, rel=3 / np.sqrt(2 * 4 * good.sum()))
    assert np.all(spoiled.flags[:, profiler.depths < profiler.contaminated_depth] != 1)
    assert np.all(np.abs(spoiled.beams[0][spoiled.flags == 3]) > 0.2)
