"""Exact statistics of the closed-form flows against numpy on their own datasets, on every arrangement."""

from __future__ import annotations

import numpy as np
import pytest

from toy_fields.closed_form.cellular import Cellular
from toy_fields.closed_form.layout import ARRANGEMENTS, Arrangement, Flow, dataset, divergence
from toy_fields.closed_form.lines import ConvergenceLines
from toy_fields.closed_form.roll import Roll
from toy_fields.closed_form.simple import AbcFlow, LinearShear, PureStrain, SolidRotation
from toy_fields.errors import ToyRequestError
from toy_fields.solver.grid import Grid

GRID = Grid(nx=24, ny=32, nz=16, length_x=120.0, length_y=200.0, depth=50.0)
ROLL = Roll(depth=50.0, wavelength=100.0, shear=0.001)
CELLULAR = Cellular(k=2 * np.pi / 60.0, l=2 * np.pi / 100.0, m=np.pi / 50.0)
LINES = ConvergenceLines(2, -3, 120.0, 200.0, 50.0, harmonic=0.4, speed=0.1, jet=0.02)
SOLENOIDAL = (ROLL, CELLULAR, LINES)


def profile_variance(values: np.ndarray) -> np.ndarray:
    return values.var(axis=(2, 3))[0]


@pytest.mark.parametrize("arrangement", ARRANGEMENTS)
@pytest.mark.parametrize("flow", SOLENOIDAL, ids=lambda flow: type(flow).__name__)
def test_discretely_free_of_divergence(flow: Roll | Cellular | ConvergenceLines, arrangement: Arrangement) -> None:
    discrete = dataset(flow.on_grid(GRID, arrangement), GRID, arrangement)
    scale = np.abs(np.diff(discrete["w"].values, axis=1)).max() / GRID.dz
    if isinstance(flow, ConvergenceLines):
        # The jet runs along the lines of the continuum: leave it out where differences turn the wavevector.
        without = ConvergenceLines(2, -3, 120.0, 200.0, 50.0, harmonic=0.4)
        discrete = dataset(without.on_grid(GRID, arrangement), GRID, arrangement)
    assert np.abs(divergence(discrete)).max() < 1e-13 * scale
    continuum = dataset(flow, GRID, arrangement)
    assert np.abs(divergence(continuum)).max() > 1e-4 * scale


@pytest.mark.parametrize("arrangement", ARRANGEMENTS)
@pytest.mark.parametrize("flow", (ROLL, CELLULAR), ids=lambda flow: type(flow).__name__)
def test_variances(flow: Roll | Cellular, arrangement: Arrangement) -> None:
    discrete = flow.on_grid(GRID, arrangement)
    fields = dataset(discrete, GRID, arrangement)
    for name, exact in (("u", discrete.variance_u), ("v", discrete.variance_v), ("w", discrete.variance_w)):
        z = fields[fields[name].dims[1]].values
        assert profile_variance(fields[name].values) == pytest.approx(exact(z), rel=1e-12, abs=1e-18), name


def test_fluxes_of_the_roll() -> None:
    fields = dataset(ROLL, GRID, "collocated")
    u, w = fields["u"].values[0], fields["w"].values[0]
    z = fields["z"].values
    flux = ((u - u.mean(axis=(1, 2), keepdims=True)) * w).mean(axis=(1, 2))
    assert flux == pytest.approx(ROLL.flux_uw(z), rel=1e-12)
    assert np.all(ROLL.flux_uw(z) < 0), "jets in the downwelling carry momentum down"
    assert ROLL.shear_production(z) == pytest.approx(-flux * 0.001, rel=1e-12)
    y = fields["y"].values[None, :, None]
    buoyancy = 2e-4 * np.cos(ROLL.l * y) * np.exp(ROLL.jet_decay * z[:, None, None])
    assert (buoyancy * w).mean(axis=(1, 2)) == pytest.approx(ROLL.buoyancy_flux(z, 2e-4), rel=1e-12)


def test_vorticity_and_tilting_of_the_roll() -> None:
    # second-order differences of the flow itself on a fine grid, away from the edges
    y = np.linspace(0, 100, 801)[None, :]
    z = np.linspace(-50, 0, 401)[:, None]
    zero = np.zeros_like(y)
    u, v, w = ROLL.u(zero, y, z), ROLL.v(zero, y, z), ROLL.w(zero, y, z)

    def d(values: np.ndarray, axis: int) -> np.ndarray:
        return np.gradient(values, (z[:, 0], y[0])[axis], axis=axis, edge_order=2)

    omega = (d(w, 1) - d(v, 0), d(u, 0), -d(u, 1))
    exact = ROLL.vorticity(y, z)
    for found, expected in zip(omega, exact, strict=True):
        assert np.max(np.abs(found - expected)) < 1e-4 * np.max(np.abs(expected))
    tilting = [exact[1] * d(c, 1) + exact[2] * d(c, 0) for c in (u, v, w)]
    expected = ROLL.stretching_and_tilting(y, z)
    for n in (1, 2):
        assert np.max(np.abs(tilting[n] - expected[n])) < 2e-4 * np.max(np.abs(expected[n]))
    # streamwise enstrophy production by the Stokes drift: mean over y of omega_x times the tilting
    product = (exact[0] * ROLL.stokes_tilting(y, z, 0.068, 0.1))[:, :-1].mean(axis=1)
    expected_production = ROLL.stokes_enstrophy_production(z[:, 0], 0.068, 0.1)
    assert product == pytest.approx(expected_production, rel=1e-10, abs=1e-22)
    assert np.all(expected_production[1:-1] > 0)


def test_discrete_vorticity_of_the_roll() -> None:
    # Differences on the C-grid equal the analytic form with effective wavenumbers: omega_x = -W (l~ + m m~ / l) at yz-edges
    # for the continuum amplitude of v (derived in closed form, to round-off).
    fields = dataset(ROLL, GRID, "staggered")
    v, w = fields["v"].values[0], fields["w"].values[0]
    w_y = (w - np.roll(w, 1, axis=1)) / GRID.dy
    v_z = np.diff(v, axis=0) / GRID.dz
    omega = w_y[1:-1] - v_z
    l2 = 2 * np.sin(ROLL.l * GRID.dy / 2) / GRID.dy
    m2 = 2 * np.sin(ROLL.m * GRID.dz / 2) / GRID.dz
    y, z = fields["y_face"].values[None, :, None], fields["z_face"].values[1:-1, None, None]
    exact = -ROLL.vertical_amplitude * (l2 + ROLL.m * m2 / ROLL.l) * np.sin(ROLL.l * y) * np.sin(ROLL.m * z)
    assert omega == pytest.approx(np.broadcast_to(exact, omega.shape), abs=1e-14)


def test_cellular_volume_means() -> None:
    grid = Grid(32, 32, 32, 120.0, 200.0, 100.0)
    x, y, z = grid.x[None, None, :], grid.y[None, :, None], grid.z[:, None, None]
    flow = Cellular(k=2 * np.pi / 60.0, l=2 * np.pi / 100.0, m=2 * np.pi / 50.0)
    omega = flow.vorticity(x, y, z)
    assert [np.mean(o**2) for o in omega] == pytest.approx(flow.enstrophy_components(), rel=1e-12)
    energy = 0.5 * sum(np.mean(c(x, y, z) ** 2) for c in (flow.u, flow.v, flow.w))
    assert energy == pytest.approx(flow.kinetic_energy(), rel=1e-12)
    assert flow.dissipation_over_viscosity() == pytest.approx(sum(flow.enstrophy_components()), rel=1e-12)
    stretching = flow.stretching_and_tilting(x, y, z)
    production = sum(np.mean(o * s) for o, s in zip(omega, stretching, strict=True))
    assert abs(production) < 1e-12 * np.abs(stretching[2]).max()
    gradient = 0.01 * np.exp(0.2 * z)
    assert flow.stokes_tilting(x, y, z, gradient) == pytest.approx(omega[2] * gradient, rel=1e-14)


def test_lines() -> None:
    fields = dataset(LINES, GRID, "collocated", times=(0.0, 40.0))
    z = fields["z"].values
    u, v, w = (fields[name].values for name in "uvw")
    assert profile_variance(w) == pytest.approx(LINES.variance_w(z), rel=1e-12)
    axis = np.deg2rad(LINES.axis)
    along, across = u * np.cos(axis) + v * np.sin(axis), -u * np.sin(axis) + v * np.cos(axis)
    assert profile_variance(across) == pytest.approx(LINES.variance_across(z), rel=1e-12)
    assert profile_variance(along) == pytest.approx(LINES.variance_along(z), rel=1e-12)
    # The wavevector (2, -3) in a box 120 m by 200 m: k = 2/120, l = -3/200 cycles per metre.
    assert LINES.spacing == pytest.approx(1 / np.hypot(2 / 120, 3 / 200))
    assert np.cos(np.deg2rad(LINES.axis)) * 2 / 120 - np.sin(np.deg2rad(LINES.axis)) * 3 / 200 == pytest.approx(0, abs=1e-15)
    assert -90 < LINES.axis <= 90
    # Downwelling on the lines, surface convergence there, and the pattern moves at its speed.
    top = w[0, -1]
    assert top.flat[np.argmin(np.abs(np.angle(np.exp(1j * LINES.phase(GRID.x[None], GRID.y[:, None], 0.0)))))] < 0
    shift = LINES.speed * 40.0
    unit = np.array([LINES.k, LINES.l]) / LINES.wavenumber
    x, y = GRID.x[None, None] - shift * unit[0], GRID.y[None, :, None] - shift * unit[1]
    moved = LINES.w(x, y, z[:, None, None], 0.0)
    assert w[1] == pytest.approx(moved, abs=1e-15)


@pytest.mark.parametrize(
    ("waves", "axis"),
    [((0, 3), 0.0), ((3, 0), 90.0), ((1, -1), 45.0), ((1, 1), -45.0), ((1, 5), -11.309932), ((-1, 5), 11.309932)],
)
def test_axis_of_lines(waves: tuple[int, int], axis: float) -> None:
    # wavevector (1, 5) in a square box: 78.690068 degrees, axis -11.309932 (derived in closed form)
    assert ConvergenceLines(*waves, 300.0, 300.0, 50.0).axis == pytest.approx(axis, abs=1e-6)


def test_abc_flow_is_its_own_vorticity() -> None:
    flow = AbcFlow(wavenumber=0.1)
    n, length = 32, 2 * np.pi / 0.1
    p = np.arange(n) * length / n
    x, y, z = p[None, None, :], p[None, :, None], p[:, None, None]
    shape = (n, n, n)
    u, v, w = (np.broadcast_to(c(x, y, z), shape) for c in (flow.u, flow.v, flow.w))
    k = 2 * np.pi * np.fft.fftfreq(n, length / n)

    def d(values: np.ndarray, axis: int) -> np.ndarray:
        shaped = k.reshape([-1 if a == axis else 1 for a in range(3)])
        return np.fft.ifft(1j * shaped * np.fft.fft(values, axis=axis), axis=axis).real

    omega = (d(w, 1) - d(v, 0), d(u, 0) - d(w, 2), d(v, 2) - d(u, 1))
    for found, expected in zip(omega, flow.vorticity(x, y, z), strict=True):
        assert found == pytest.approx(np.broadcast_to(expected, shape), abs=1e-13)
    assert 0.5 * np.mean(u**2 + v**2 + w**2) == pytest.approx(flow.kinetic_energy(), rel=1e-12)


def test_rotation_strain_and_shear() -> None:
    grid = Grid(8, 8, 4, 8.0, 8.0, 4.0)
    for flow, vorticity, q in ((SolidRotation(0.3), 0.6, 0.09), (PureStrain(0.2), 0.0, -0.04)):
        fields = dataset(flow, grid, "collocated")
        u, v = fields["u"].values[0], fields["v"].values[0]
        u_x, u_y = np.gradient(u, grid.dx, axis=2), np.gradient(u, grid.dy, axis=1)
        v_x, v_y = np.gradient(v, grid.dx, axis=2), np.gradient(v, grid.dy, axis=1)
        assert v_x - u_y == pytest.approx(np.full(u.shape, vorticity), abs=1e-13)
        assert -0.5 * (u_x**2 + v_y**2 + 2 * u_y * v_x) == pytest.approx(np.full(u.shape, q), abs=1e-13)
        assert flow.q() == pytest.approx(q)
    shear = dataset(LinearShear(0.01, -0.02, 0.1), grid, "staggered")
    assert shear["u"].values[0, :, 0, 0] == pytest.approx(0.01 * grid.z + 0.1)
    assert shear["v"].values.std(axis=(2, 3)) == pytest.approx(np.zeros((1, 4)))
    assert np.all(shear["w"].values == 0)


@pytest.mark.parametrize("flow", (*SOLENOIDAL, LinearShear(0.01)), ids=lambda flow: type(flow).__name__)
@pytest.mark.parametrize("arrangement", ARRANGEMENTS)
def test_datasets_are_canonical(flow: Flow, arrangement: Arrangement) -> None:
    fields = dataset(flow, GRID, arrangement, times=(0.0, 60.0), dtype="float32", friction_velocity=0.006)
    staggered = arrangement == "staggered"
    assert fields["u"].dims == ("time", "z", "y", "x_face" if staggered else "x")
    assert fields["v"].dims == ("time", "z", "y_face" if staggered else "y", "x")
    assert fields["w"].dims == ("time", "z" if arrangement == "collocated" else "z_face", "y", "x")
    assert fields["u"].dtype == np.float32 and fields["w"].attrs["units"] == "m s-1"
    assert fields.attrs["friction_velocity"] == 0.006 and fields.attrs["velocity_kind"] == "eulerian"
    if staggered:
        assert fields["x_face"].values[0] == 0.0 and fields.sizes["x_face"] == GRID.nx
    if arrangement != "collocated":
        assert fields.sizes["z_face"] == GRID.nz + 1 and fields["z_face"].values[-1] == 0.0


def test_unknown_arrangement() -> None:
    with pytest.raises(ToyRequestError, match="staggered"):
        dataset(ROLL, GRID, "triangular")  # type: ignore[arg-type]
