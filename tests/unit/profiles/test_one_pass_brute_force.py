"""Every variable of the one pass against plain numpy in extended precision, on all arrangements of the grid.

The tolerance is 1e-12 of the scale of each level: product of the root mean squares of the factors.
"""

from __future__ import annotations

import re

import numpy as np
import pytest
import xarray as xr

from lespost.errors import DataError
from lespost.profiles.one_pass import profile_statistics
from lespost.profiles.settings import ProfilesSettings
from tests.unit.profiles.synthetic import centred, dataset, departure, random_arrays

ARRANGEMENTS = [(False, False), (False, True), (True, True), (True, False)]
MOMENTS = """uu vv ww uv uw vw thetatheta utheta vtheta wtheta uuu vvv www uuw vvw thetathetaw wwtheta
thetathetatheta uuuu vvvv wwww""".split()
ALL = ("u", "v", "w", "theta", "salinity", "tracer_dye", "nu_sgs", "tke_sgs")


@pytest.fixture(scope="module", params=ARRANGEMENTS, ids=["collocated", "w on faces", "all on faces", "u, v on faces"])
def case(request: pytest.FixtureRequest) -> tuple[xr.Dataset, xr.Dataset]:
    """(fields, profiles) of two snapshots of random numbers."""
    staggered, vertical = request.param
    rng = np.random.default_rng(5)
    arrays = random_arrays(rng, (6, 12, 20), 2, vertical=vertical, names=ALL)
    fields = dataset(arrays, staggered=staggered, vertical=vertical, prandtl_number=0.5)
    return fields, profile_statistics(fields, ProfilesSettings())


def factors(name: str) -> list[str]:
    return re.findall("theta|u|v|w", name)


def assert_close(actual: np.ndarray, expected: np.ndarray, scale: np.ndarray) -> None:
    assert actual.shape == expected.shape
    assert np.isfinite(actual).all()
    assert (np.abs(actual - expected) <= 1e-12 * scale).all(), np.abs((actual - expected) / scale).max()


@pytest.mark.parametrize("name", MOMENTS)
def test_moments_at_centres(case: tuple[xr.Dataset, xr.Dataset], name: str) -> None:
    fields, profiles = case
    primes = [departure(centred(fields, factor)) for factor in factors(name)]
    scale = np.prod([np.sqrt((p**2).mean(axis=(2, 3))) for p in primes], axis=0)
    assert_close(profiles[name].values, np.prod(primes, axis=0).mean(axis=(2, 3)), scale)


@pytest.mark.parametrize("name", ["u", "v", "w", "theta", "salinity", "tracer_dye"])
def test_means(case: tuple[xr.Dataset, xr.Dataset], name: str) -> None:
    fields, profiles = case
    values = centred(fields, name)
    assert_close(profiles[name].values, values.astype(np.longdouble).mean(axis=(2, 3)), np.abs(values).max(axis=(2, 3)))


def test_salinity_and_tracers_have_variance_and_flux(case: tuple[xr.Dataset, xr.Dataset]) -> None:
    fields, profiles = case
    w = departure(centred(fields, "w"))
    for scalar, variance, flux in (
        ("salinity", "salinitysalinity", "wsalinity"), ("tracer_dye", "tracer_dye_variance", "w_tracer_dye")
    ):  # fmt: skip
        c = departure(centred(fields, scalar))
        scale_c, scale_w = (c**2).mean(axis=(2, 3)), (w**2).mean(axis=(2, 3))
        assert_close(profiles[variance].values, (c * c).mean(axis=(2, 3)), scale_c)
        assert_close(profiles[flux].values, (w * c).mean(axis=(2, 3)), np.sqrt(scale_c * scale_w))


def test_fluxes_on_faces(case: tuple[xr.Dataset, xr.Dataset]) -> None:
    fields, profiles = case
    if "z_face" not in fields["w"].dims:
        assert not [name for name in profiles if str(name).endswith("_face")]
        return
    w = departure(fields["w"].values.astype(np.float64))
    expected = {"ww_face": w * w}
    for name, flux in (("u", "uw_face"), ("v", "vw_face"), ("theta", "wtheta_face"), ("salinity", "wsalinity_face"),
                       ("tracer_dye", "w_tracer_dye_face")):  # fmt: skip
        cells = departure(centred(fields, name))
        faces = np.concatenate([cells[:, :1], 0.5 * (cells[:, 1:] + cells[:, :-1]), cells[:, -1:]], axis=1)
        expected[flux] = faces * w
    for name, product in expected.items():
        scale = np.abs(product).mean(axis=(2, 3)) + 1e-300
        assert_close(profiles[name].values, product.mean(axis=(2, 3)), scale)
    assert_close(profiles["w_face"].values, fields["w"].values.astype(np.longdouble).mean(axis=(2, 3)),
                 np.abs(fields["w"].values).max(axis=(2, 3)) + 1e-300)  # fmt: skip


def test_face_flux_is_the_advective_flux_of_the_staggered_grid(case: tuple[xr.Dataset, xr.Dataset]) -> None:
    """<(u averaged in z) (w averaged in x)>, formed at the points of u, equals what the pass forms at cell centres."""
    fields, profiles = case
    if "x_face" not in fields["u"].dims or "z_face" not in fields["w"].dims:
        assert profiles.attrs["divergence_is_exact"] == 0
        return
    u = departure(fields["u"].values.astype(np.float64))
    w = departure(fields["w"].values.astype(np.float64))
    w_at_u = 0.5 * (w + np.roll(w, 1, axis=3))
    product = 0.5 * (u[:, 1:] + u[:, :-1]) * w_at_u[:, 1:-1]
    assert_close(profiles["uw_face"].values[:, 1:-1], product.mean(axis=(2, 3)), np.abs(product).mean(axis=(2, 3)))


def test_native_variances_of_staggered_components(case: tuple[xr.Dataset, xr.Dataset]) -> None:
    fields, profiles = case
    for name in ("u", "v"):
        if fields[name].dims[2:] == ("y", "x"):
            assert f"{name}{name}_native" not in profiles
            continue
        prime = departure(fields[name].values.astype(np.float64))
        expected = (prime**2).mean(axis=(2, 3))
        assert_close(profiles[f"{name}{name}_native"].values, expected, expected)


def test_tiles_are_means_over_tiles_of_departures_from_the_level_mean(case: tuple[xr.Dataset, xr.Dataset]) -> None:
    fields, profiles = case
    assert (profiles.sizes["tile_y"], profiles.sizes["tile_x"]) == (4, 4)
    assert (profiles.attrs["tile_y_points"], profiles.attrs["tile_x_points"]) == (3, 5)
    for name in ("uu", "vv", "ww", "uv", "uw", "vw", "thetatheta", "wtheta"):
        product = np.prod([departure(centred(fields, factor)) for factor in factors(name)], axis=0)
        tiles = product.reshape(2, 6, 4, 3, 4, 5).mean(axis=(3, 5))
        scale = np.abs(product).mean(axis=(2, 3))[..., None, None]
        assert_close(profiles[f"{name}_tile"].values, tiles, scale)


def test_structure_tensor_and_grid_scale_share(case: tuple[xr.Dataset, xr.Dataset]) -> None:
    fields, profiles = case
    w = centred(fields, "w")
    dx, dy = 100.0 / 20, 80.0 / 12
    gradient = {
        "x": (np.roll(w, -1, 3) - np.roll(w, 1, 3)) / (2 * dx),
        "y": (np.roll(w, -1, 2) - np.roll(w, 1, 2)) / (2 * dy),
    }
    for a, b in ("xx", "xy", "yy"):
        product = gradient[a] * gradient[b]
        assert_close(profiles[f"dwd{a}_dwd{b}"].values, product.mean((2, 3)), np.abs(product).mean((2, 3)))
    steps = sum(((np.roll(w, -1, axis) - w) ** 2).mean((2, 3)) for axis in (2, 3))
    variance = (departure(w) ** 2).mean((2, 3)).astype(float)
    np.testing.assert_allclose(profiles["w_grid_scale_share"], steps / (8 * variance), rtol=1e-11)


def test_divergence(case: tuple[xr.Dataset, xr.Dataset]) -> None:
    fields, profiles = case
    u, v, w = (fields[name].values.astype(np.float64) for name in ("u", "v", "w"))
    dx, dy, dz = 100.0 / 20, 80.0 / 12, 50.0 / 6
    if "x_face" in fields["u"].dims:
        terms = [(np.roll(u, -1, 3) - u) / dx, (np.roll(v, -1, 2) - v) / dy]
    else:
        terms = [(np.roll(u, -1, 3) - np.roll(u, 1, 3)) / (2 * dx), (np.roll(v, -1, 2) - np.roll(v, 1, 2)) / (2 * dy)]
    if "z_face" in fields["w"].dims:
        terms.append(np.diff(w, axis=1) / dz)
    else:
        terms.append(np.gradient(w, dz, axis=1))
    np.testing.assert_allclose(profiles["divergence_rms"], np.sqrt((sum(terms) ** 2).mean((2, 3))), rtol=1e-12)
    np.testing.assert_allclose(profiles["divergence_scale"], np.sqrt(sum((t**2).mean((2, 3)) for t in terms)), rtol=1e-12)


def test_extremes(case: tuple[xr.Dataset, xr.Dataset]) -> None:
    fields, profiles = case
    for name in ("u", "v", "theta", "w"):
        low, high = fields[name].values.min((2, 3)), fields[name].values.max((2, 3))
        if "z_face" in fields[name].dims:
            low, high = np.minimum(low[:, 1:], low[:, :-1]), np.maximum(high[:, 1:], high[:, :-1])
        np.testing.assert_array_equal(profiles[f"{name}_min"], low)
        np.testing.assert_array_equal(profiles[f"{name}_max"], high)
    assert not profiles["nan_count"].values.any()


def test_subgrid_fluxes(case: tuple[xr.Dataset, xr.Dataset]) -> None:
    """-nu (du/dz + dw/dx) and so on, each at the points of its velocity component; scalars over the Prandtl number 0.5."""
    fields, profiles = case
    u, v, w, c, nu = (fields[name].values.astype(np.float64) for name in ("u", "v", "w", "theta", "nu_sgs"))
    dx, dy, dz = 100.0 / 20, 80.0 / 12, 50.0 / 6
    on_faces = "z_face" in fields["w"].dims
    if on_faces:
        w, nu = w[:, 1:-1], nu[:, 1:-1]
        gradient = {name: np.diff(values, axis=1) / dz for name, values in (("u", u), ("v", v), ("c", c))}
    else:
        gradient = {name: np.gradient(values, dz, axis=1) for name, values in (("u", u), ("v", v), ("c", c))}
    if "x_face" in fields["u"].dims:
        tau_x = -0.5 * (nu + np.roll(nu, 1, 3)) * (gradient["u"] + (w - np.roll(w, 1, 3)) / dx)
        tau_y = -0.5 * (nu + np.roll(nu, 1, 2)) * (gradient["v"] + (w - np.roll(w, 1, 2)) / dy)
    else:
        tau_x = -nu * (gradient["u"] + (np.roll(w, -1, 3) - np.roll(w, 1, 3)) / (2 * dx))
        tau_y = -nu * (gradient["v"] + (np.roll(w, -1, 2) - np.roll(w, 1, 2)) / (2 * dy))
    expected = {"uw": tau_x, "vw": tau_y, "wtheta": -nu / 0.5 * gradient["c"]}
    for name, product in expected.items():
        scale = np.abs(product).mean((2, 3))
        if not on_faces:
            assert_close(profiles[f"{name}_sgs"].values, product.mean((2, 3)), scale)
            continue
        assert_close(profiles[f"{name}_sgs_face"].values[:, 1:-1], product.mean((2, 3)), scale)
        assert np.isnan(profiles[f"{name}_sgs_face"].values[:, [0, -1]]).all()
        inner = product.mean((2, 3))
        cells = np.concatenate([inner[:, :1], 0.5 * (inner[:, 1:] + inner[:, :-1]), inner[:, -1:]], axis=1)
        np.testing.assert_allclose(profiles[f"{name}_sgs"], cells, atol=1e-12 * scale.max())
        np.testing.assert_allclose(
            profiles[f"{name}_total_face"][:, 1:-1], profiles[f"{name}_face"].values[:, 1:-1] + inner, atol=1e-12 * scale.max()
        )
    for name in expected:
        np.testing.assert_array_equal(profiles[f"{name}_total"], profiles[name] + profiles[f"{name}_sgs"])
    assert {"wsalinity_sgs", "w_tracer_dye_sgs"} <= set(profiles)


def test_subgrid_energy_adds_two_thirds_to_each_variance(case: tuple[xr.Dataset, xr.Dataset]) -> None:
    fields, profiles = case
    energy = fields["tke_sgs"].values.astype(np.float64).mean((2, 3))
    for name in ("uu", "vv", "ww"):
        np.testing.assert_allclose(profiles[f"{name}_sgs"], 2.0 / 3.0 * energy, rtol=1e-12)
        np.testing.assert_array_equal(profiles[f"{name}_total"], profiles[name] + profiles[f"{name}_sgs"])


def test_float64_fields_keep_their_precision() -> None:
    rng = np.random.default_rng(8)
    arrays = random_arrays(rng, (3, 8, 8), dtype="float64")
    arrays["u"] = arrays["u"].astype("float32")  # a mixture is taken as float64
    fields = dataset(arrays, staggered=False, vertical=True)
    profiles = profile_statistics(fields, ProfilesSettings())
    expected = (departure(centred(fields, "theta")) ** 2).mean((2, 3))
    assert_close(profiles["thetatheta"].values, expected, expected)


def test_without_temperature_without_higher_moments_without_tiles() -> None:
    rng = np.random.default_rng(9)
    fields = dataset(random_arrays(rng, (3, 8, 8), names=("u", "v", "w")), staggered=False, vertical=True)
    profiles = profile_statistics(fields, ProfilesSettings(tiles=1, higher_moments=False))
    assert not [name for name in profiles if "theta" in str(name) or "tile" in str(name) or str(name) in ("uuu", "wwww")]
    expected = (departure(centred(fields, "u")) ** 2).mean((2, 3))
    assert_close(profiles["uu"].values, expected, expected)


def test_no_prandtl_number_no_subgrid_scalar_flux() -> None:
    rng = np.random.default_rng(10)
    fields = dataset(random_arrays(rng, (3, 8, 8), names=("u", "v", "w", "theta", "nu_sgs")), staggered=False, vertical=True)
    profiles = profile_statistics(fields, ProfilesSettings())
    assert "uw_sgs" in profiles
    assert "wtheta_sgs" not in profiles
    given = profile_statistics(fields, ProfilesSettings(prandtl_number=0.7))
    assert "wtheta_sgs" in given


def test_not_a_number_empties_its_level_only_and_is_counted() -> None:
    rng = np.random.default_rng(11)
    arrays = random_arrays(rng, (5, 8, 8))
    arrays["theta"][0, 2, 3, 4] = np.nan
    arrays["w"][0, 1, 0, 0] = np.inf
    whole = dataset(random_arrays(np.random.default_rng(11), (5, 8, 8)), staggered=False, vertical=True)
    fields = dataset(arrays, staggered=False, vertical=True)
    profiles, clean = profile_statistics(fields, ProfilesSettings()), profile_statistics(whole, ProfilesSettings())
    np.testing.assert_array_equal(profiles["nan_count"].values[0], [0, 1, 1, 0, 0])
    np.testing.assert_array_equal(np.isnan(profiles["thetatheta"].values[0]), [False, False, True, False, False])
    np.testing.assert_array_equal(np.isnan(profiles["ww"].values[0]), [True, True, False, False, False])
    assert profiles["theta_max"].values[0, 2] == np.nanmax(arrays["theta"][0, 2])
    np.testing.assert_array_equal(profiles["uu"], clean["uu"])
    np.testing.assert_array_equal(profiles["ww"].values[0, 2:], clean["ww"].values[0, 2:])


def test_fields_without_a_component_are_refused() -> None:
    fields = dataset(random_arrays(np.random.default_rng(1), (3, 8, 8)), staggered=False, vertical=True).drop_vars("v")
    with pytest.raises(DataError, match="hold no v"):
        profile_statistics(fields, ProfilesSettings())
