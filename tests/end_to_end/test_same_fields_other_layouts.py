"""The same turbulence written in other ways gives the same profiles, through the command line.

Rewrites that inspect recognises by itself (zarr v3, swapped axes, depth instead of height) and one that needs a descriptor
(headerless Fortran-ordered binary).
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import netCDF4
import numpy as np
import pytest
import xarray as xr

from tests.end_to_end.command_line import lespost

FIELDS = ("u", "v", "w", "theta", "nu_sgs")


@pytest.fixture(scope="module")
def source(shared: Path) -> xr.Dataset:
    """Two snapshots of a real run, as plain as it came."""
    with xr.open_dataset(shared / "fields" / "langmuir.nc", decode_times=False) as data:
        return data.isel(time=slice(0, 2)).load()


def profiles(folder: Path, recipe: Path) -> xr.Dataset:
    out = folder / "out"
    lespost("run", recipe, "--out", out)
    return xr.open_zarr(out / "profiles.zarr", consolidated=False, decode_times=False).load()


@pytest.fixture(scope="module")
def reference(source: xr.Dataset, tmp_path_factory: pytest.TempPathFactory) -> xr.Dataset:
    folder = tmp_path_factory.mktemp("reference")
    source.to_netcdf(folder / "run.nc")
    lespost("inspect", folder / "run.nc", "--write", folder / "recipe.toml")
    return profiles(folder, folder / "recipe.toml")


def as_zarr(data: xr.Dataset, folder: Path) -> Path:
    path = folder / "run.zarr"
    data.drop_encoding().to_zarr(path, zarr_format=3, consolidated=False)
    return path


def swapped(data: xr.Dataset, folder: Path) -> Path:
    path = folder / "run.nc"
    order = {name: ("time", "z_w" if "z_w" in data[name].dims else "z", "x", "y") for name in FIELDS}
    data.assign({name: data[name].transpose(*dims) for name, dims in order.items()}).to_netcdf(path)
    return path


def as_depth(data: xr.Dataset, folder: Path) -> Path:
    path = folder / "run.nc"
    deep = data.assign_coords(z=-data["z"], z_w=-data["z_w"])
    for axis in ("z", "z_w"):
        deep[axis].attrs = {"units": "m", "positive": "down"}
    deep.to_netcdf(path)
    return path


@pytest.mark.parametrize("rewrite", [as_zarr, swapped, as_depth])
def test_recognised_layouts(rewrite: Callable[[xr.Dataset, Path], Path], source: xr.Dataset, reference: xr.Dataset,
                            tmp_path: Path) -> None:
    path = rewrite(source, tmp_path)
    lespost("inspect", path, "--write", tmp_path / "recipe.toml")
    assert_same(profiles(tmp_path, tmp_path / "recipe.toml"), reference)


def assert_same(found: xr.Dataset, expected: xr.Dataset) -> None:
    assert set(found.data_vars) == set(expected.data_vars)
    for name in expected.data_vars:
        np.testing.assert_array_equal(found[name].values, expected[name].values, err_msg=str(name))
    np.testing.assert_allclose(found["z"].values, expected["z"].values, atol=1e-12)


def test_headerless_fortran_binary(source: xr.Dataset, reference: xr.Dataset, tmp_path: Path) -> None:
    """Arrays (x, y, z) in Fortran order, big-endian, one file per variable, all times after each other."""
    for name in FIELDS:
        with open(tmp_path / f"{name}.bin", "wb") as file:
            for time in range(source.sizes["time"]):
                file.write(source[name].values[time].T.astype(">f4").tobytes(order="F"))
    z = ", ".join(f"{value:.6f}" for value in source["z"].values)
    attributes = source.attrs
    (tmp_path / "recipe.toml").write_text(f"""
[fields]
path = "."
format = "raw"
dx = 2.5
dy = 2.5
z = [{z}]
time_from = "index"
time_start = {float(source["time"][0])}
time_interval = "600 s"

[fields.raw]
shape = [80, 80, 64]
axes = ["x", "y", "z"]
order = "Fortran"
byte_order = "big"
shapes = {{w = [80, 80, 65], nu_sgs = [80, 80, 65]}}
files = {{{", ".join(f'{name} = "{name}.bin"' for name in FIELDS)}}}

[forcing]
friction_velocity = {attributes["ustar"]}
stress_direction = 0.0
surface_heat_flux = {attributes["Q"]}
coriolis_parameter = {attributes["f"]}
thermal_expansion = {attributes["alpha"]}
gravity = {attributes["g"]}
reference_density = {attributes["rho0"]}
specific_heat = {attributes["cp"]}

[stokes]
surface_speed = {attributes["us0"]}
wavenumber = {attributes["kwave"]}

[profiles]
prandtl_number = {attributes["pr"]}
""")
    found = profiles(tmp_path, tmp_path / "recipe.toml")
    for name in expected_moments(reference):
        np.testing.assert_array_equal(found[name].values, reference[name].values, err_msg=name)


def expected_moments(reference: xr.Dataset) -> list[str]:
    """All profiles but those that need the stored Stokes profile, which raw files do not carry."""
    return [str(name) for name in reference.data_vars if not str(name).startswith("tke_stokes")]


def test_the_reference_is_the_fields_own(source: xr.Dataset, reference: xr.Dataset, shared: Path) -> None:
    """An anchor outside the project: variances by plain numpy from the original file."""
    with netCDF4.Dataset(shared / "fields" / "langmuir.nc") as data:
        u = np.asarray(data["u"][:2], np.float64)
    variance = (u - u.mean((-2, -1), keepdims=True)).var((-2, -1))
    np.testing.assert_allclose(reference["uu"].values, variance, rtol=1e-9)
