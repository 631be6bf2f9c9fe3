"""Layer depths of profiles with known answers; production terms that give back exactly what the mean flow loses."""

from __future__ import annotations

import numpy as np
import pytest
import xarray as xr

from lespost.profiles import depths
from lespost.profiles.production import add_production, close_surface, layer_shares

FACES = np.linspace(-80.0, 0.0, 65)
Z = 0.5 * (FACES[1:] + FACES[:-1])


@pytest.mark.parametrize(("thickness", "bound"), [(1.0, 0.080), (1.5, 0.045), (2.0, 0.028), (3.0, 0.013)])
def test_depth_of_a_tanh_interface(thickness: float, bound: float) -> None:
    """b = Δ tanh((z + h)/Δ) at any sub-grid shift: errors measured for the physics sheet, in grid spacings."""
    spacing = 1.0
    z = np.arange(-60.0, 0.0, spacing) + 0.5
    worst = 0.0
    for shift in np.linspace(0.0, 1.0, 41):
        true = 30.0 + shift
        found = depths.maximum_stratification_depth(z, thickness * np.tanh((z + true) / thickness))
        worst = max(worst, abs(found - true))
    assert worst <= bound + 0.0005  # the bounds are rounded to three decimals


def test_uniform_water_has_no_depth() -> None:
    assert np.isnan(depths.maximum_stratification_depth(Z, np.full(Z.size, 15.0)))
    assert np.isnan(depths.threshold_depth(Z, np.zeros(Z.size)))
    assert np.isnan(depths.flux_minimum_depth(Z, np.zeros(Z.size)))


def test_threshold_by_hand() -> None:
    """Mixed to 30 m, then b falls by 1e-5 m s-2 a metre: the step 2.87e-4 is reached 28.7 m below."""
    buoyancy = np.where(Z > -30.0, 0.0, 1e-5 * (Z + 30.0))
    assert depths.threshold_depth(Z, buoyancy) == pytest.approx(58.7, abs=0.02)


def test_flux_minimum_and_stress_decay_by_hand() -> None:
    flux = np.where(Z > -40.0, 1e-6 * (1 + 1.2 * Z / 40.0), 0.0)
    assert depths.flux_minimum_depth(Z, flux) == pytest.approx(40.0, abs=1.25)
    uw = -(0.006**2) * np.clip(1 + Z / 50.0, 0.0, None)
    assert depths.stress_decay_depth(Z, uw, 0 * Z, 0.006) == pytest.approx(0.95 * 50.0, abs=0.05)
    assert np.isnan(depths.stress_decay_depth(Z, uw, 0 * Z, 0.0))


def test_a_deep_remnant_of_stress_does_not_deepen_the_layer() -> None:
    uw = -(0.006**2) * (np.clip(1 + Z / 30.0, 0.0, None) + 0.2 * (Z < -70.0))
    assert depths.stress_decay_depth(Z, uw, 0 * Z, 0.006) == pytest.approx(28.5, abs=0.05)


def profiles(u: np.ndarray, uw_face: np.ndarray, **more: np.ndarray) -> xr.Dataset:
    zero = np.zeros((1, Z.size))
    data = {"u": (("time", "z"), u[None]), "v": (("time", "z"), zero), "uw_face": (("time", "z_face"), uw_face[None]),
            "vw_face": (("time", "z_face"), np.zeros((1, FACES.size)))}
    data |= {name: (("time", "z_face" if name.endswith("_face") else "z"), values[None]) for name, values in more.items()}
    return xr.Dataset(data, coords={"time": [0.0], "z": Z, "z_face": FACES})


def forcing(stokes: np.ndarray | None = None, ustar: float = 0.006) -> xr.Dataset:
    drift = np.zeros(Z.size) if stokes is None else stokes
    return xr.Dataset(
        {"stokes_u": (("time", "z"), drift[None]), "stokes_v": (("time", "z"), np.zeros((1, Z.size))),
         "friction_velocity": ("time", [ustar]), "stress_direction": ("time", [0.0]), "surface_temperature_flux": ("time", [1e-6]),
         "gravity": ((), 9.81), "thermal_expansion": ((), 2e-4), "haline_contraction": ((), 7e-4)},
        coords={"time": [0.0], "z": Z, "z_face": FACES},
    )


def test_production_is_what_the_mean_flow_loses() -> None:
    """Σ U_k (F_{k+½} - F_{k-½}) = -Σ F ΔU for fluxes that vanish at both ends: summation by parts, exact to rounding."""
    rng = np.random.default_rng(0)
    u = rng.standard_normal(Z.size)
    flux = rng.standard_normal(FACES.size)
    flux[[0, -1]] = 0.0
    lost = float((u * np.diff(flux)).sum())
    at_faces = -flux[1:-1] * np.diff(u)
    assert at_faces.sum() == pytest.approx(lost, abs=1e-12)
    shear = add_production(profiles(u, flux), forcing())["tke_shear"].values[0]
    dz = FACES[1] - FACES[0]
    inner = np.concatenate([[at_faces[0]], 0.5 * (at_faces[1:] + at_faces[:-1]), [at_faces[-1]]]) / dz
    np.testing.assert_allclose(shear, inner, atol=1e-12)


def test_stokes_production_of_a_linear_stress() -> None:
    """-⟨u'w'⟩ = u*² (1 + z/h) over h: ∫ P_S dz = u*² (u_s0 - mean of u_s over h) (closed form); 0.068 m/s, k = 0.105 m-1."""
    k, us0, h = 0.105, 0.068, 80.0
    stokes = us0 * np.diff(np.exp(2 * k * FACES)) / (2 * k * np.diff(FACES))
    flux = -(0.006**2) * (1 + FACES / h)
    added = add_production(profiles(np.zeros(Z.size), flux), forcing(stokes))
    column = float((added["tke_stokes"].values[0] * np.diff(FACES)).sum())
    exact = 0.006**2 * (us0 - us0 * (1 - np.exp(-2 * k * h)) / (2 * k * h))
    assert column == pytest.approx(exact, rel=0.03)  # the uppermost half level has no face difference of its own
    assert not np.any(added["tke_shear"].values)


def test_lagrangian_velocity_hides_no_stokes_production() -> None:
    k = 0.105
    stokes = 0.068 * np.exp(2 * k * Z)
    flux = -(0.006**2) * (1 + FACES / 80.0)
    eulerian = add_production(profiles(0.1 + 0.001 * Z, flux), forcing(stokes))
    lagrangian = profiles(0.1 + 0.001 * Z + stokes, flux)
    lagrangian.attrs["velocity_kind"] = "lagrangian"
    for name in ("tke_shear", "tke_stokes"):
        np.testing.assert_allclose(add_production(lagrangian, forcing(stokes))[name].values, eulerian[name].values, atol=1e-15)


def test_buoyancy_production_and_transport() -> None:
    heat = 1e-6 * (1 + FACES / 80.0)
    carried = 1e-7 * np.sin(np.pi * Z / 80.0)
    added = add_production(profiles(0 * Z, 0 * FACES, wtheta=0.5 * (heat[1:] + heat[:-1]), wtheta_face=heat, uuw=carried, vvw=0 * Z,
                                    www=0 * Z), forcing())
    np.testing.assert_allclose(added["tke_buoyancy"].values[0], 9.81 * 2e-4 * 1e-6 * (1 + Z / 80.0), rtol=1e-12)
    transport = added["tke_transport"].values[0]
    assert (transport * np.diff(FACES)).sum() == pytest.approx(0.0, abs=1e-20)  # it only moves energy about
    np.testing.assert_allclose(transport[10:-10], -0.5e-7 * np.pi / 80.0 * np.cos(np.pi * Z[10:-10] / 80.0), rtol=0.01)
    assert added["tke_buoyancy"].attrs["units"] == "m2 s-3"


def test_unknown_ingredients_stay_unknown() -> None:
    added = add_production(profiles(0 * Z, 0 * FACES), forcing(np.full(Z.size, np.nan)))
    for name in ("tke_stokes", "tke_buoyancy", "tke_transport"):
        assert np.isnan(added[name].values).all(), name


def test_the_surface_flux_is_the_declared_one() -> None:
    flux = np.zeros(FACES.size)
    subgrid = np.full(FACES.size, -1e-6)
    subgrid[[0, -1]] = np.nan
    centre = np.full(Z.size, -1e-6)
    before = profiles(0 * Z, flux, uw=0 * Z, uw_sgs_face=subgrid, uw_total_face=subgrid, uw_sgs=centre, uw_total=centre)
    after = close_surface(before, forcing())
    assert after["uw_total_face"].values[0, -1] == pytest.approx(-(0.006**2))
    assert after["uw_sgs"].values[0, -1] == pytest.approx(0.5 * (-(0.006**2) - 1e-6))
    assert np.isnan(before["uw_total_face"].values[0, -1])  # the argument is left as it was


def test_integrals_over_a_band() -> None:
    added = add_production(profiles(0.001 * Z, np.full(FACES.size, -1e-5)), forcing()).isel(time=0)
    shares = layer_shares(added, -40.0, -10.0)
    assert shares["shear"] == pytest.approx(1e-5 * 0.001 * 30.0, rel=0.05)
    assert np.isnan(shares["buoyancy"])
