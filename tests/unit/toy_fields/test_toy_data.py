"""The shipped stores and record: whole, small, finite, with what a reader needs; and the same bytes from the same seed."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from click.testing import CliRunner

from toy_fields.cases import CASES, case, changed
from toy_fields.cli import cli
from toy_fields.store import checksum_lines, round_values

STORES = ("convective", "langmuir", "shear")


@pytest.fixture(scope="module")
def data(repository: Path) -> Path:
    return repository / "toy_fields" / "data"


def files(folder: Path) -> list[Path]:
    return sorted(path for path in folder.rglob("*") if path.is_file())


def test_checksums(data: Path) -> None:
    names = [f"{name}.zarr" for name in STORES] + ["invented_mooring.nc"]
    assert (data / "checksums.txt").read_text().splitlines() == checksum_lines(data, names)


def test_sizes(data: Path) -> None:
    stores = [data / f"{name}.zarr" for name in STORES]
    assert sum(file.stat().st_size for store in stores for file in files(store)) <= 12e6
    assert all(len(files(store)) < 60 for store in stores)
    assert (data / "invented_mooring.nc").stat().st_size < 500e3


@pytest.mark.parametrize("name", STORES)
def test_stores_carry_what_a_reader_needs(data: Path, name: str) -> None:
    shipped = case(name)
    with xr.open_zarr(data / f"{name}.zarr", consolidated=False) as fields:
        assert fields.attrs["command"] == f"python -m toy_fields solve {name} --out toy_fields/data/{name}.zarr"
        assert fields.attrs["friction_velocity"] == shipped.forcing.friction_velocity.values[0]
        assert fields.attrs["seed"] == shipped.initial.seed
        assert tuple(fields["time"].values) == shipped.output_times
        assert "Invented" in fields.attrs["comment"]
        for variable in ("u", "v", "w", "theta", "nu_sgs"):
            values = fields[variable].values
            assert values.dtype == np.float32 and np.all(np.isfinite(values)) and values.std() > 0
            assert fields[variable].attrs["units"]
        assert np.all(fields["w"].values[:, [0, -1]] == 0)
    assert not json.loads((data / f"{name}.zarr" / "zarr.json").read_text()).get("consolidated_metadata")


def test_seeds_differ() -> None:
    assert len({shipped.initial.seed for shipped in CASES.values()}) == len(CASES)


def test_the_record_says_that_it_is_invented(data: Path) -> None:
    with xr.open_dataset(data / "invented_mooring.nc", mask_and_scale=False) as record:
        assert record.attrs["title"].startswith("INVENTED") and "Never use" in record.attrs["summary"]
        assert record.attrs["seed"] != case("langmuir").initial.seed
        flags = record["WCUR_QC"].values.squeeze()
        velocity = record["WCUR"].values.squeeze()
        # one gap, the shallow cells bad, a few spikes, most of it good
        assert 5 <= (flags == 9).all(axis=1).sum() <= 30
        assert np.all(np.isin(flags[:, record["DEPTH"].values < 3.0], (4, 9)))
        assert 0 < (flags == 3).mean() < 0.01 and (flags == 1).mean() > 0.75
        assert np.all((velocity == np.float32(99999.0)) == (flags == 9))


TINY = ["--nx", "12", "--ny", "12", "--nz", "24", "--output-times", "300,600"]


def solve(out: Path, *more: str) -> None:
    outcome = CliRunner().invoke(cli, ["solve", "langmuir", *TINY, "--out", str(out), *more], catch_exceptions=False)
    assert outcome.exit_code == 0, outcome.output


def test_same_seed_same_bytes_whatever_the_threads(tmp_path: Path) -> None:
    solve(tmp_path / "a" / "x.zarr", "--threads", "1")
    solve(tmp_path / "b" / "x.zarr", "--threads", "2")
    solve(tmp_path / "c" / "x.zarr", "--seed", "5")
    contents = {
        which: {str(f.relative_to(tmp_path / which)): f.read_bytes() for f in files(tmp_path / which) if f.name != "zarr.json"}
        for which in "abc"
    }
    assert len(contents["a"]) > 10
    assert contents["a"] == contents["b"]
    assert contents["a"] != contents["c"]


def test_the_record_is_the_same_twice(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    # The file's command holds the path of the file: write to the same relative path from two folders.
    contents = []
    for which in ("a", "b"):
        (tmp_path / which).mkdir()
        monkeypatch.chdir(tmp_path / which)
        arguments = ["record", "convective", "--seed", "3", "--begin", "0", "--end", "120", "--out", "r.nc"]
        outcome = CliRunner().invoke(cli, arguments, catch_exceptions=False)
        assert outcome.exit_code == 0, outcome.output
        contents.append(Path("r.nc").read_bytes())
    assert contents[0] == contents[1]


def test_command_in_the_attributes_names_what_was_asked(tmp_path: Path) -> None:
    solve(tmp_path / "x.zarr", "--seed", "5", "--friction-velocity", "0:0.002,600:0.008", "--threads", "1")
    with xr.open_zarr(tmp_path / "x.zarr", consolidated=False) as fields:
        assert fields.attrs["command"] == (
            f"python -m toy_fields solve langmuir --out {tmp_path / 'x.zarr'} --seed 5 --nx 12 --ny 12 --nz 24 "
            "--friction-velocity 0:0.002,600:0.008 --output-times 300,600"
        )
        # a ramp is a variable over time, not an attribute
        assert fields["friction_velocity"].values == pytest.approx([0.005, 0.008])
        assert "friction_velocity" not in fields.attrs


def test_errors_are_one_paragraph_with_the_exit_code(repository: Path, tmp_path: Path) -> None:
    for arguments, words in (
        (["solve", "langmuir", "--nx", "13", "--out", "x.zarr"], "nx = 13 is odd"),
        (["solve", "langmuir", "--friction-velocity", "strong", "--out", "x.zarr"], "--friction-velocity"),
        (["record", "langmuir", "--seed", "11", "--out", "x.nc"], "needs another one"),
    ):
        outcome = subprocess.run(
            [sys.executable, "-c", "import sys; sys.path.insert(0, sys.argv.pop(1)); from toy_fields.cli import main; main()",
             str(repository), *arguments],
            capture_output=True, text=True, cwd=tmp_path, check=False,
        )
        assert outcome.returncode == 2
        assert words in outcome.stderr and "Traceback" not in outcome.stderr
        assert list(tmp_path.iterdir()) == []


def test_rounding_keeps_what_it_says() -> None:
    values = np.random.default_rng(0).normal(size=2000).astype(np.float32)
    rounded = round_values(values, 8)
    # half a unit in the last of 8 bits
    assert np.all(np.abs(rounded - values) <= np.abs(values) * 2.0**-8)
    assert np.all(rounded.view(np.uint32) & np.uint32((1 << 15) - 1) == 0)
    assert np.array_equal(round_values(rounded, 8), rounded)
    stepped = round_values(values, 23, 2.0**-6)
    assert np.all(np.abs(stepped - values) <= 2.0**-7)
    assert np.array_equal(stepped * 2**6, np.rint(stepped * 2**6))
    assert not np.any(np.signbit(round_values(np.float32([-0.0, -1e-9]), 23, 2.0**-6)))


def test_changes_reach_every_part() -> None:
    new = changed(case("shear"), {"nx": 32, "smagorinsky_constant": 0.2, "seed": 9, "gravity": 9.8, "courant": 0.3})
    assert (new.grid.nx, new.subgrid.smagorinsky_constant, new.initial.seed) == (32, 0.2, 9)
    assert (new.forcing.gravity, new.courant, new.grid.ny) == (9.8, 0.3, 64)
