"""Fields that cannot be used, given to the command line: exit code 3, one paragraph that names the place and the remedy.

Nothing that looks like a result may be left behind: no run.json, no profiles.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from tests.end_to_end.command_line import assert_one_paragraph, lespost


@pytest.fixture(scope="module")
def store(repository: Path) -> xr.Dataset:
    """Two snapshots of a shipped store, in memory."""
    path = repository / "toy_fields" / "data" / "langmuir.zarr"
    return xr.open_zarr(path, consolidated=False, decode_times=False).isel(time=slice(0, 2)).load().drop_encoding()


def unit_of_mass(data: xr.Dataset) -> xr.Dataset:
    data["u"].attrs["units"] = "kg"
    return data


def repeated_times(data: xr.Dataset) -> xr.Dataset:
    return data.assign_coords(time=("time", [0.0, 0.0], data["time"].attrs))


def backward_times(data: xr.Dataset) -> xr.Dataset:
    return data.assign_coords(time=("time", [600.0, 0.0], data["time"].attrs))


def without_w(data: xr.Dataset) -> xr.Dataset:
    return data.drop_vars("w")


def unwritten(data: xr.Dataset) -> xr.Dataset:
    data["u"].values[1] = np.float32(9.969209968386869e36)
    return data


@pytest.mark.parametrize(
    ("spoil", "words"),
    [(unit_of_mass, ("u", "kg")), (repeated_times, ("time",)), (backward_times, ("time",)), (without_w, ("w",)),
     (unwritten, ("u",))],
)
def test_spoilt_fields(spoil: Callable[[xr.Dataset], xr.Dataset], words: tuple[str, ...], store: xr.Dataset, tmp_path: Path) -> None:
    spoil(store.copy(deep=True)).to_netcdf(tmp_path / "run.nc")
    (tmp_path / "recipe.toml").write_text('[fields]\npath = "run.nc"\n')
    done = lespost("run", tmp_path / "recipe.toml", "--out", tmp_path / "out", expect=3)
    assert_one_paragraph(done)
    assert "run.nc" in done.stderr
    for word in words:
        assert word in done.stderr
    assert not (tmp_path / "out" / "run.json").exists()
    assert not (tmp_path / "out" / "profiles.zarr").exists()


def test_a_truncated_file(store: xr.Dataset, tmp_path: Path) -> None:
    store.to_netcdf(tmp_path / "whole.nc")
    whole = (tmp_path / "whole.nc").read_bytes()
    (tmp_path / "run.nc").write_bytes(whole[: len(whole) // 2])
    (tmp_path / "whole.nc").unlink()
    (tmp_path / "recipe.toml").write_text('[fields]\npath = "run.nc"\n')
    done = lespost("run", tmp_path / "recipe.toml", "--out", tmp_path / "out", expect=3)
    assert_one_paragraph(done)
    assert "run.nc" in done.stderr


def test_not_a_number_blocks_are_counted_and_placed(store: xr.Dataset, tmp_path: Path) -> None:
    """A block of NaN in one snapshot: said with its place; other levels keep their statistics, its own stay empty."""
    spoilt = store.copy(deep=True)
    spoilt["u"].values[1, 10, :8, :8] = np.nan
    spoilt.to_netcdf(tmp_path / "run.nc")
    (tmp_path / "recipe.toml").write_text('[fields]\npath = "run.nc"\n')
    done = lespost("run", tmp_path / "recipe.toml", "--out", tmp_path / "out", expect=None)
    assert "Traceback" not in done.stderr
    if done.returncode == 0:
        profiles = xr.open_zarr(tmp_path / "out" / "profiles.zarr", consolidated=False, decode_times=False)
        assert int(profiles["nan_count"].sum()) == 64
        assert np.isnan(profiles["uu"].values[1, 10]) and np.isfinite(profiles["uu"].values[0]).all()
        assert "not finite" in (tmp_path / "out" / "run.json").read_text()
    else:
        assert done.returncode == 3
        assert_one_paragraph(done)
        assert "run.nc" in done.stderr


def test_two_runs_into_one_folder(repository: Path, tmp_path: Path) -> None:
    """The second is told who holds the folder (a lock held by this test stands in for the first)."""
    from lespost.engine.journal import Journal

    recipe = tmp_path / "recipe.toml"
    recipe.write_text(f'[fields]\npath = "{repository}/toy_fields/data/shear.zarr"\n')
    with Journal(tmp_path / "out" / "journal", {}):
        done = lespost("run", recipe, "--out", tmp_path / "out", expect=2)
    assert_one_paragraph(done)
    assert "process" in done.stderr


def test_dry_run_computes_nothing(repository: Path, tmp_path: Path) -> None:
    done = lespost("run", repository / "recipes" / "first_look.toml", "--out", tmp_path / "out", "--dry-run", "--json")
    assert '"snapshots": 5' in done.stdout
    assert not (tmp_path / "out").exists()


def test_a_record_needs_an_instrument(repository: Path, tmp_path: Path) -> None:
    recipe = tmp_path / "recipe.toml"
    recipe.write_text(f'[fields]\npath = "{repository}/toy_fields/data/shear.zarr"\n'
                      f'[[record]]\nname = "m"\npath = "{repository}/toy_fields/data/invented_mooring.nc"\n')
    done = lespost("run", recipe, "--out", tmp_path / "out", expect=2)
    assert "[[instrument]]" in done.stderr
