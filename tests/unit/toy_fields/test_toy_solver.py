"""The solver against what must hold of its equations: conservation laws and closed-form solutions."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.special import erfc

from toy_fields.solver.forcing import Forcing, Ramp
from toy_fields.solver.grid import Grid
from toy_fields.solver.initial import Initial
from toy_fields.solver.run import Case, start
from toy_fields.solver.stepper import Stepper, divergence_ratio
from toy_fields.solver.subgrid import Subgrid
from toy_fields.solver.transforms import HorizontalTransforms

GRID = Grid(nx=16, ny=12, nz=12, length_x=60.0, length_y=50.0, depth=30.0)
NO_SUBGRID = Subgrid(smagorinsky_constant=0.0, background_viscosity=0.0)
STILL = Initial(mixed_layer_depth=30.0, noise_velocity=0.0, noise_temperature=0.0, temperature_gradient=0.0)
UNFORCED = Forcing()
DRIVEN = Forcing(
    friction_velocity=Ramp.constant(0.01), stress_direction=Ramp.constant(20.0), surface_stokes_drift=Ramp.constant(0.08),
    stokes_direction=Ramp.constant(50.0), stokes_wavenumber=0.1, surface_heat_flux=Ramp.constant(-100.0),
    coriolis_parameter=1.0e-4, tracer_flux=1.0e-3,
)


def make(forcing: Forcing = UNFORCED, initial: Initial = STILL, subgrid: Subgrid = NO_SUBGRID, grid: Grid = GRID,
         **more: float) -> Stepper:
    return start(Case("test", "test", grid, forcing, initial, (1.0,), subgrid, **more))


def turbulent(**changes: object) -> Stepper:
    """A driven run in which everything moves: strong random motions, waves across the wind, cooling, a tracer."""
    initial = replace(STILL, mixed_layer_depth=20.0, noise_velocity=0.03, noise_temperature=0.05,
                      temperature_gradient=0.02, tracer_depth=10.0)
    return make(replace(DRIVEN, **changes), initial, Subgrid())


def test_transforms_return_the_kept_modes() -> None:
    transforms = HorizontalTransforms(GRID)
    random = np.random.default_rng(0)
    modes = transforms.to_modes(random.standard_normal((GRID.nz, GRID.ny, GRID.nx)))
    again = transforms.to_modes(transforms.to_physical(modes))
    assert np.max(np.abs(again - modes)) < 1e-14
    assert 0 < GRID.kept_x - 1 < GRID.nx / 3 and 0 < GRID.kept_y - 1 < GRID.ny / 3


def test_product_of_kept_modes_is_free_of_aliasing() -> None:
    # cos(a x)² = 1/2 + cos(2 a x)/2: with a the largest kept wavenumber, 2 a aliases onto modes beyond the kept ones.
    transforms = HorizontalTransforms(GRID)
    wave = np.cos((GRID.kept_x - 1) * 2 * np.pi / GRID.length_x * (GRID.x - GRID.x[0]))
    field = np.broadcast_to(wave**2, (GRID.nz, GRID.ny, GRID.nx)).copy()
    modes = transforms.to_modes(field)
    assert modes[0, 0, 0].real == pytest.approx(0.5, abs=1e-14)
    modes[:, 0, 0] = 0.0
    assert np.max(np.abs(modes)) < 1e-14


def test_divergence_at_round_off() -> None:
    stepper = turbulent()
    for _ in range(20):
        stepper.step(60.0)
    assert divergence_ratio(GRID, stepper.pressure, stepper.state) < 1e-13
    assert np.all(stepper.state.w[0] == 0) and np.all(stepper.state.w[-1] == 0)


def test_inviscid_unforced_energy_is_kept() -> None:
    stepper = make(initial=replace(STILL, noise_velocity=0.05))
    before = stepper.state.kinetic_energy(GRID)
    start_u = stepper.state.u.copy()
    stepper.advance_to(1500.0)
    # The flow has changed altogether, its energy has not.
    change = np.sqrt(np.sum(np.abs(stepper.state.u - start_u) ** 2) / np.sum(np.abs(start_u) ** 2))
    assert change > 0.5
    assert stepper.state.kinetic_energy(GRID) == pytest.approx(before, rel=1e-3)


def test_inviscid_energy_and_buoyancy_exchange() -> None:
    # Linear stratification over the whole column: kinetic energy + b'² / (2 N²) is kept by small motions.
    initial = replace(STILL, mixed_layer_depth=1e-6, temperature_gradient=0.05)
    stepper = make(initial=initial)
    stratification = stepper.equations.forcing.buoyancy_coefficient() * 0.05
    k, m = 2 * np.pi / GRID.length_x, np.pi / GRID.depth
    stepper.state.theta[:, 0, 1] = 0.5e-3 * np.sin(m * GRID.z)
    frequency = np.sqrt(stratification) * k / np.hypot(k, m)
    stepper.courant = 0.1
    stepper.advance_to(np.pi / frequency, fixed=20.0)
    # Internal gravity wave (dispersion relation, derived in closed form): after half a period theta has changed sign.
    assert stepper.state.theta[:, 0, 1].real == pytest.approx(-0.5e-3 * np.sin(m * GRID.z), abs=0.02 * 0.5e-3)


def test_momentum_and_heat_budgets_without_rotation() -> None:
    stepper = turbulent(coriolis_parameter=0.0)
    state = stepper.state
    before = {name: state.__dict__[name][:, 0, 0].real.sum() * GRID.dz for name in ("u", "v", "theta", "tracer")}
    stepper.advance_to(900.0)
    after = {name: state.__dict__[name][:, 0, 0].real.sum() * GRID.dz for name in ("u", "v", "theta", "tracer")}
    angle = np.deg2rad(20.0)
    # Kinematic surface fluxes times time: the definition of the forcing.
    expected = {
        "u": 1e-4 * np.cos(angle) * 900, "v": 1e-4 * np.sin(angle) * 900,
        "theta": -100.0 / (1025.0 * 3990.0) * 900, "tracer": -1e-3 * 900,
    }
    for name, change in expected.items():
        assert after[name] - before[name] == pytest.approx(change, rel=1e-5), name


def test_total_momentum_with_rotation_and_waves() -> None:
    stepper = turbulent()
    stepper.advance_to(3000.0)
    us, vs = DRIVEN.stokes(0.0, GRID)
    total = np.sum(stepper.state.u[:, 0, 0].real + us + 1j * (stepper.state.v[:, 0, 0].real + vs)) * GRID.dz
    # dM/dt = -i f M + u*² exp(i direction) from M = 0: a Lagrangian start at rest, derived in closed form.
    f = 1e-4
    stress = 1e-4 * np.exp(1j * np.deg2rad(20.0))
    expected = stress / (1j * f) * (1 - np.exp(-1j * f * 3000.0))
    assert abs(total - expected) < 1e-5 * abs(expected)


def test_steady_anti_stokes_flow() -> None:
    # u = -us is a steady state of the wave-averaged equations without stress (Stokes-Coriolis balance).
    forcing = replace(DRIVEN, friction_velocity=Ramp.constant(0.0), surface_heat_flux=Ramp.constant(0.0), tracer_flux=0.0)
    stepper = make(forcing)
    stepper.advance_to(20000.0, fixed=200.0)
    us, vs = forcing.stokes(0.0, GRID)
    assert stepper.state.u[:, 0, 0].real == pytest.approx(-us, abs=1e-12)
    assert stepper.state.v[:, 0, 0].real == pytest.approx(-vs, abs=1e-12)


def test_diffusive_profile() -> None:
    # Constant stress on a half space with constant viscosity, derived in closed form (heat conduction with constant flux):
    # U = u*² [2 sqrt(t / (pi nu)) exp(-z²/(4 nu t)) - |z| / nu erfc(|z| / (2 sqrt(nu t)))].
    viscosity, time = 0.01, 1500.0
    grid = Grid(8, 8, 60, 40.0, 40.0, 30.0)
    stepper = make(Forcing(friction_velocity=Ramp.constant(0.01)), subgrid=Subgrid(0.0, background_viscosity=viscosity),
                   grid=grid)
    stepper.advance_to(time)
    depth = -grid.z
    exact = 1e-4 * (
        2 * np.sqrt(time / (np.pi * viscosity)) * np.exp(-(depth**2) / (4 * viscosity * time))
        - depth / viscosity * erfc(depth / (2 * np.sqrt(viscosity * time)))
    )
    assert stepper.state.u[:, 0, 0].real == pytest.approx(exact, abs=2e-3 * exact.max())


def test_ekman_spiral_is_steady() -> None:
    # Ekman 1905: U + i V = u*² / sqrt(i f nu) exp(z sqrt(i f / nu)), 45 degrees to the right of the stress at the surface.
    viscosity, f = 0.01, 4e-4
    grid = Grid(8, 8, 60, 40.0, 40.0, 60.0)
    forcing = Forcing(friction_velocity=Ramp.constant(0.01), coriolis_parameter=f)
    stepper = make(forcing, subgrid=Subgrid(0.0, background_viscosity=viscosity), grid=grid)
    spiral = 1e-4 / np.sqrt(1j * f * viscosity) * np.exp(grid.z * np.sqrt(1j * f / viscosity))
    stepper.state.u[:, 0, 0], stepper.state.v[:, 0, 0] = spiral.real, spiral.imag
    stepper.advance_to(2 * np.pi / f, fixed=20.0)
    found = stepper.state.u[:, 0, 0].real + 1j * stepper.state.v[:, 0, 0].real
    assert np.max(np.abs(found - spiral)) < 0.01 * np.max(np.abs(spiral))
    assert np.rad2deg(np.angle(spiral[-1])) == pytest.approx(-45.0, abs=6.0)


@pytest.mark.parametrize(("mode_y", "stokes"), [(1, 0.06), (2, 0.06), (2, 0.12)])
def test_roll_instability_growth(mode_y: int, stokes: float) -> None:
    # Inviscid rolls in uniform shear S and uniform Stokes shear: growth sqrt(S us_z) l / sqrt(l² + m²)
    # (Craik & Leibovich 1976, second mechanism; derived in closed form for rigid lids, m = pi / depth).
    grid = Grid(6, 16, 32, 40.0, 60.0, 30.0)
    forcing = Forcing(surface_stokes_drift=Ramp.constant(stokes), stokes_shape="linear")
    stepper = make(forcing, replace(STILL, velocity="eulerian_rest"), grid=grid)
    shear = 0.002
    across, m = mode_y * 2 * np.pi / grid.length_y, np.pi / grid.depth
    growth = np.sqrt(shear * stokes / grid.depth) * across / np.hypot(across, m)
    size = 1e-6
    state = stepper.state
    state.u[:, 0, 0] = shear * grid.z
    for sign in (mode_y, -mode_y):
        state.w[:, sign, 0] = 0.5 * size * np.sin(m * grid.z_face)
        state.u[:, sign, 0] = -0.5 * size * shear / growth * np.sin(m * grid.z)
        # v from continuity: i ky v = -dw/dz.
        state.v[:, sign, 0] = 1j / grid.ky[sign, 0] * 0.5 * size * m * np.cos(m * grid.z)
    stepper.pressure.project(state.u, state.v, state.w)
    amplitude = abs(state.w[16, mode_y, 0])
    time = 2.0 / growth
    stepper.advance_to(time, fixed=time / 200)
    assert np.log(abs(state.w[16, mode_y, 0]) / amplitude) / time == pytest.approx(growth, rel=0.05)


def test_opposed_waves_do_not_grow() -> None:
    # With the Stokes shear against the mean shear the same rolls oscillate: S us_z < 0.
    grid = Grid(6, 16, 32, 40.0, 60.0, 30.0)
    forcing = Forcing(surface_stokes_drift=Ramp.constant(0.06), stokes_direction=Ramp.constant(180.0), stokes_shape="linear")
    stepper = make(forcing, replace(STILL, velocity="eulerian_rest"), grid=grid)
    state = stepper.state
    state.u[:, 0, 0] = 0.002 * grid.z
    for sign in (1, -1):
        state.w[:, sign, 0] = 0.5e-6 * np.sin(np.pi / grid.depth * grid.z_face)
    stepper.pressure.project(state.u, state.v, state.w)
    first = abs(state.w[16, 1, 0])
    for _ in range(50):
        stepper.step(100.0, fixed=60.0)
        assert abs(state.w[16, 1, 0]) < 1.01 * first


def test_galilean_drift_of_the_stokes_advection() -> None:
    # A uniform Stokes drift carries a tracer spot as a current does: compare with the exact phase of one mode.
    grid = Grid(12, 6, 4, 60.0, 60.0, 10.0)
    forcing = Forcing(surface_stokes_drift=Ramp.constant(0.1), stokes_wavenumber=0.05)
    stepper = make(forcing, replace(STILL, mixed_layer_depth=10.0, velocity="eulerian_rest", tracer_depth=5.0), grid=grid)
    stepper.state.tracer[:, 0, 1] = 0.5
    stepper.advance_to(100.0, fixed=5.0)
    us, _ = forcing.stokes(0.0, grid)
    expected = 0.5 * np.exp(-1j * grid.kx[0, 1] * us * 100.0)
    assert stepper.state.tracer[:, 0, 1] == pytest.approx(expected, abs=1e-5)


def test_subgrid_viscosity_of_uniform_shear_and_stratification() -> None:
    # |S| = S for a uniform shear; nu = l² S sqrt(1 - Ri / Pr), 0 where Ri > Pr (Lilly 1962).
    grid = Grid(6, 6, 10, 30.0, 30.0, 20.0)
    subgrid = Subgrid(background_viscosity=0.0)
    for richardson, expected in ((0.0, 1.0), (0.25, np.sqrt(0.5)), (0.6, 0.0)):
        stepper = make(initial=replace(STILL, mixed_layer_depth=20.0), subgrid=subgrid, grid=grid)
        shear = 0.01
        stepper.state.u[:, 0, 0] = shear * grid.z
        stepper.state.theta[:, 0, 0] = richardson * shear**2 / stepper.equations.forcing.buoyancy_coefficient() * grid.z
        stepper.equations.evaluate(stepper.state, 0.0, stepper.scratch)
        profile = stepper.equations.physical["nu"][:, 0, 0]
        assert profile == pytest.approx(subgrid.mixing_length_squared(grid) * shear * expected, rel=1e-12, abs=1e-15)


def test_ramps_drive_the_momentum() -> None:
    forcing = Forcing(friction_velocity=Ramp((0.0, 1000.0), (0.0, 0.02)))
    stepper = make(forcing, subgrid=Subgrid())
    stepper.advance_to(1000.0, fixed=50.0)
    total = stepper.state.u[:, 0, 0].real.sum() * GRID.dz
    # integral of (0.02 t / 1000)² from 0 to 1000 s; third-order steps integrate a parabola exactly
    assert total == pytest.approx(0.02**2 * 1000.0 / 3.0, rel=1e-9)
