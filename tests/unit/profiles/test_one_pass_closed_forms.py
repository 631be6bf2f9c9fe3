"""The one pass on flows whose statistics are known in closed form (derived here; sums of sines over a period are exact).

Roll flow with a jet: u = J cos(l y) exp(g z) + S z, v = -(W m / l) sin(l y) cos(m z), w = W cos(l y) sin(m z).
Three-dimensional flow: u = A sin(k x) cos(l y) cos(m z), v = B cos(k x) sin(l y) cos(m z), w = C cos(k x) cos(l y) sin(m z)
with A k + B l + C m = 0. On a staggered grid a two-point average over spacing d multiplies a wave k by cos(k d / 2) and a
one-cell difference by 2 sin(k d / 2) / d; with these the expected values hold to rounding.
"""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from lespost.profiles.one_pass import profile_statistics
from lespost.profiles.settings import ProfilesSettings
from tests.unit.profiles.synthetic import from_functions

J, S, W, DECAY, B_T = 0.03, 1e-3, 0.05, 0.1, 0.2
LX, LY, H = 100.0, 80.0, 50.0
L, M = 2 * np.pi / LY, np.pi / H
NZ, NY, NX = 20, 24, 16
DY, DZ = LY / NY, H / NZ


def roll(staggered: bool, vertical: bool, solenoidal: bool = False) -> tuple[xr.Dataset, float]:
    """The roll flow and the amplitude of v; solenoidal: the amplitude that makes the discrete divergence vanish."""
    amplitude = W * M / L
    if solenoidal:
        amplitude = W * (2 * np.sin(M * DZ / 2) / DZ) / (2 * np.sin(L * DY / 2) / DY)
    functions = {
        "u": lambda x, y, z: J * np.cos(L * y) * np.exp(DECAY * z) + S * z,
        "v": lambda x, y, z: -amplitude * np.sin(L * y) * np.cos(M * z),
        "w": lambda x, y, z: W * np.cos(L * y) * np.sin(M * z),
        "theta": lambda x, y, z: 15.0 + 0.01 * z + B_T * np.cos(L * y) * np.exp(DECAY * z),
    }
    return from_functions(functions, (NZ, NY, NX), staggered=staggered, vertical=vertical), amplitude


def close(actual: xr.DataArray, expected: np.ndarray) -> None:
    np.testing.assert_allclose(actual.values[0], expected, rtol=0, atol=1e-13 * np.abs(expected).max())


@pytest.mark.parametrize(("staggered", "vertical"), [(False, False), (False, True), (True, True)])
def test_roll_flow_with_jet(staggered: bool, vertical: bool) -> None:
    fields, amplitude = roll(staggered, vertical)
    profiles = profile_statistics(fields, ProfilesSettings())
    z = profiles["z"].values
    keep_y = np.cos(L * DY / 2) if staggered else 1.0  # v from y faces to centres
    keep_z = np.cos(M * DZ / 2) if vertical else 1.0  # w from z faces to centres
    jet = np.exp(DECAY * z)
    w = W * np.sin(M * z) * keep_z
    close(profiles["u"], S * z)
    close(profiles["theta"], 15.0 + 0.01 * z)
    close(profiles["uu"], 0.5 * J**2 * jet**2)
    close(profiles["vv"], 0.5 * (amplitude * keep_y * np.cos(M * z)) ** 2)
    close(profiles["ww"], 0.5 * w**2)
    close(profiles["uw"], 0.5 * J * jet * w)
    close(profiles["wtheta"], 0.5 * B_T * jet * w)
    close(profiles["utheta"], 0.5 * J * B_T * jet**2)
    close(profiles["uuuu"], 3.0 / 8.0 * (J * jet) ** 4)  # mean of cos^4 is 3/8
    close(profiles["wwww"], 3.0 / 8.0 * w**4)
    close(profiles["dwdy_dwdy"], 0.5 * w**2 * (np.sin(L * DY) / DY) ** 2)
    for name, scale in (("v", W), ("w", W), ("uv", J * W), ("vw", W**2), ("uuw", J**2 * W), ("www", W**3), ("dwdx_dwdx", W**2)):
        assert np.abs(profiles[name].values).max() < 1e-14 * scale, name


def test_fluxes_of_the_roll_flow_on_faces() -> None:
    fields, _ = roll(True, True)
    profiles = profile_statistics(fields, ProfilesSettings())
    faces = profiles["z_face"].values[1:-1]
    w = W * np.sin(M * faces)
    mean_of_cells = np.exp(DECAY * faces) * np.cosh(DECAY * DZ / 2)
    np.testing.assert_allclose(profiles["ww_face"].values[0, 1:-1], 0.5 * w**2, rtol=1e-12)
    np.testing.assert_allclose(profiles["uw_face"].values[0, 1:-1], 0.5 * J * w * mean_of_cells, rtol=1e-12)
    np.testing.assert_allclose(profiles["wtheta_face"].values[0, 1:-1], 0.5 * B_T * w * mean_of_cells, rtol=1e-11)
    # half of the sum of w^2 sits at centres, cos^2(m dz / 2) of what it is on faces
    kept = profiles["ww"].values.sum() / profiles["ww_face"].values.sum()
    assert kept == pytest.approx(np.cos(M * DZ / 2) ** 2, rel=1e-12)


def test_discrete_divergence_vanishes_with_the_discrete_amplitude() -> None:
    fields, _ = roll(True, True, solenoidal=True)
    profiles = profile_statistics(fields, ProfilesSettings())
    assert (profiles["divergence_rms"].values < 1e-13 * profiles["divergence_scale"].values).all()
    assert profiles.attrs["divergence_is_exact"] == 1
    continuum, _ = roll(True, True)
    off = profile_statistics(continuum, ProfilesSettings())
    assert (off["divergence_rms"].values > 1e-4 * off["divergence_scale"].values).all()


def test_three_dimensional_flow() -> None:
    a, b = 0.02, 0.03
    k = 2 * np.pi / LX
    c = -(a * k + b * L) / M
    functions = {
        "u": lambda x, y, z: a * np.sin(k * x) * np.cos(L * y) * np.cos(M * z),
        "v": lambda x, y, z: b * np.cos(k * x) * np.sin(L * y) * np.cos(M * z),
        "w": lambda x, y, z: c * np.cos(k * x) * np.cos(L * y) * np.sin(M * z),
    }
    profiles = profile_statistics(from_functions(functions, (NZ, NY, NX), staggered=False, vertical=False), ProfilesSettings())
    z = profiles["z"].values
    close(profiles["uu"], 0.25 * a**2 * np.cos(M * z) ** 2)
    close(profiles["ww"], 0.25 * c**2 * np.sin(M * z) ** 2)
    for name in ("uv", "uw", "vw", "uuw"):
        assert np.abs(profiles[name].values).max() < 1e-17, name
    energy = 0.5 * (profiles["uu"] + profiles["vv"] + profiles["ww"]).values.mean()
    assert c == pytest.approx(-0.0575, rel=1e-12)
    assert energy == pytest.approx(2.8789063e-4, rel=1e-6)  # (A^2 + B^2 + C^2) / 16, derived in closed form


def test_skewness_of_downwelling_jets() -> None:
    """w = -(cos ly + r cos 2ly), r = 1/2: skewness -(3 r / 4) / ((1 + r^2) / 2)^(3/2) = -0.7589466 (derived in closed form)."""
    zero = lambda x, y, z: 0.0 * (x + y + z)  # noqa: E731
    functions = {"u": zero, "v": zero, "w": lambda x, y, z: -(np.cos(L * y) + 0.5 * np.cos(2 * L * y)) + 0 * z}
    profiles = profile_statistics(from_functions(functions, (4, NY, NX), staggered=False, vertical=False), ProfilesSettings())
    skewness = profiles["www"].values / profiles["ww"].values ** 1.5
    np.testing.assert_allclose(skewness, -0.7589466, rtol=1e-7)


@pytest.mark.parametrize(("points", "share"), [(2, 1.0), (4, 0.5), (8, 0.5 * (1 - np.sqrt(0.5)))])
def test_grid_scale_share_of_a_wave(points: int, share: float) -> None:
    """A wave of n points along x and y has the share sin^2(pi / n) of its variance at the grid scale."""
    nx = ny = 16
    zero = lambda x, y, z: 0.0 * (x + y + z)  # noqa: E731
    wave = lambda x, y, z: np.cos(2 * np.pi * x / points) * np.cos(2 * np.pi * y / points) + 0 * z  # noqa: E731
    functions = {"u": zero, "v": zero, "w": wave}
    fields = from_functions(functions, (3, ny, nx), staggered=False, vertical=False, lengths=(nx, ny, 10.0))
    profiles = profile_statistics(fields, ProfilesSettings())
    np.testing.assert_allclose(profiles["w_grid_scale_share"], share, rtol=1e-12)


@pytest.mark.parametrize("case", ["langmuir", "shear"])
def test_real_turbulence_against_plain_numpy(shared: object, case: str) -> None:
    """Six snapshots of real turbulence; 1e-6 is what is promised, rounding is what is seen."""
    from pathlib import Path

    source = Path(str(shared)) / "fields" / f"{case}.nc"
    with xr.open_dataset(source, decode_times=False) as raw:
        fields = raw.rename(z_w="z_face").load()
    profiles = profile_statistics(fields, ProfilesSettings(prandtl_number=float(fields.attrs["pr"])))
    values = {name: fields[name].values.astype(np.float64) for name in ("u", "v", "w", "theta")}
    values["w"] = 0.5 * (values["w"][:, 1:] + values["w"][:, :-1])
    prime = {name: v - v.mean(axis=(2, 3), keepdims=True) for name, v in values.items()}
    for a, b in (("u", "u"), ("v", "v"), ("w", "w"), ("u", "w"), ("w", "theta"), ("theta", "theta")):
        expected = (prime[a] * prime[b]).mean(axis=(2, 3))
        scale = np.sqrt((prime[a] ** 2).mean(axis=(2, 3)) * (prime[b] ** 2).mean(axis=(2, 3)))
        assert (np.abs(profiles[a + b].values - expected) <= 1e-11 * scale).all(), a + b
    # the sum of resolved and subgrid stress, continued to the surface, is the stress that drove the run
    from lespost.profiles.closure import surface_flux

    flux, with_subgrid = surface_flux(profiles, "uw")
    assert with_subgrid
    assert flux == pytest.approx(-float(fields.attrs["ustar"]) ** 2, rel=0.05)
