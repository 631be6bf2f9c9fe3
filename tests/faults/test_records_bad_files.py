"""Damaged and contradictory records: a RecordError that says what to do, or a flagged gap; never a wrong
number, never a traceback."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import pytest
import xarray as xr

from lespost.errors import LespostError, RecordError
from lespost.records.describe import describe
from lespost.records.read import open_raw, read_record
from lespost.records.settings import RecordSettings
from tests.unit.records.record_files import moored_profiler

VELOCITY = {n: np.random.default_rng(1).normal(0.0, 0.1, (30, 4)) for n in ("u", "v", "w")}


def read(path: Path, **settings: Any) -> xr.Dataset:
    return read_record(RecordSettings(name="mooring", path=str(path), **settings), path.parent)


def codes(series: xr.Dataset) -> set[str]:
    return {f["code"] for f in json.loads(series.attrs["findings"])}


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"time": np.array([*range(10), *range(5, 25)]) * 60.0}, "time goes back"),
        ({"time": np.array([*range(10), 9, *range(11, 30)]) * 60.0}, "times repeat"),
        ({"time": np.where(np.arange(30) == 4, np.nan, np.arange(30) * 60.0)}, "times are missing"),
        ({"time": np.where(np.arange(30) > 20, 9.96921e36, np.arange(30) * 60.0)}, "times are missing"),
        ({"time_units": "60 s steps"}, "no reference time"),
        ({"time_units": "fortnights since 2026-01-01"}, "not second, minute, hour or day"),
        ({"time_units": "seconds since last Tuesday"}, "cannot be read"),
        ({"time_units": "seconds since 2026-02-30"}, "is no date"),
        ({"time_units": "days since 2026-01-01", "time": np.arange(30) * 1e9}, "is no date"),
        ({"time": 1.7e9 + np.arange(30) * 10.0, "time_type": "f4"}, "float32"),
        ({"units": {"u": None}}, "has no units"),
        ({"units": {"u": "kg"}}, "does not convert"),
        ({"units": {"u": "wobbles"}}, "is not a unit"),
        ({"depth": -(5.0 + 2.0 * np.arange(4))}, "above the surface"),
        ({"depth": np.array([5.0, 7.0, 7.0, 9.0])}, "share a depth"),
        ({"depth": np.array([5.0, np.nan, 9.0, 11.0])}, "depths"),
        ({"attributes": {"featureType": "trajectoryProfile"}}, "fixed instruments"),
        (
            {
                "flags": {"u": np.ones((30, 4))},
                "flag_attributes": {"flag_values": [1, 2, 4], "flag_meanings": "good bad"},
            },
            "do not divide",
        ),
        ({"flags": {"u": np.ones((30, 4))}, "flag_attributes": {}}, "without flag_values"),
        (
            {
                "flags": {"u": np.ones((30, 4))},
                "flag_attributes": {"flag_values": [1, 1], "flag_meanings": "good bad"},
            },
            "repeat a number",
        ),
        (
            {
                "flags": {"u": np.ones((30, 4))},
                "flag_attributes": {"flag_values": [1, 2], "flag_meanings": "fine meh"},
            },
            "no known vocabulary",
        ),
        ({"variable_attributes": {"zero": {"scale_factor": 0.0}}}, "cannot be used"),
    ],
)
def test_contradictions_are_refused_in_words(tmp_path: Path, change: dict[str, Any], message: str) -> None:
    values = {**VELOCITY, "zero": np.full((30, 4), np.nan)} if "scale_factor" in str(change) else VELOCITY
    path = moored_profiler(tmp_path / "bad.nc", values, **change)
    with pytest.raises(LespostError, match=message) as caught:
        read(path)
    assert "bad.nc" in str(caught.value)
    assert caught.value.exit_code == 3
    if "scale_factor" not in str(change):
        assert describe(open_raw(path)).file == "bad.nc"  # the same file can still be described


def test_whole_record_in_the_wrong_unit_is_refused(tmp_path: Path) -> None:
    path = moored_profiler(tmp_path / "bad.nc", {"u": np.full((30, 4), 31.0), "v": np.full((30, 4), -12.0)})
    with pytest.raises(RecordError, match="the unit is wrong"):
        read(path)
    right = read(path, column_units={"u": "cm s-1", "v": "cm s-1"}, x_axis_compass_bearing=90)
    np.testing.assert_allclose(right["u"].values, 0.31, rtol=1e-6)


@pytest.mark.parametrize("sentinel", [999.0, -999.9, 99999.0, 1e35, np.inf])
def test_undeclared_sentinels_never_pass_as_velocities(tmp_path: Path, sentinel: float) -> None:
    values = {n: v.copy() for n, v in VELOCITY.items()}
    values["w"][3, 2] = 5.0
    path = moored_profiler(tmp_path / "bad.nc", values)
    with netCDF4.Dataset(path, "a") as f:
        f.set_auto_maskandscale(False)
        f["w"][3, 2] = sentinel
    series = read(path)
    assert series["w_flag"].values[0, 3, 2] in (4, 9)
    assert (np.delete(series["w_flag"].values.ravel(), 3 * 4 + 2) == 2).all()


def test_values_outside_the_declared_range_are_flagged(tmp_path: Path) -> None:
    values = {n: v.copy() for n, v in VELOCITY.items()}
    values["w"][5, 0] = 3.0
    path = moored_profiler(
        tmp_path / "bad.nc", values, variable_attributes={"w": {"valid_min": -2.0, "valid_max": 2.0}}
    )
    series = read(path)
    assert series["w_flag"].values[0, 5, 0] == 4
    assert "outside-valid-range" in codes(series)


def test_packed_integers_with_each_files_own_scale(tmp_path: Path) -> None:
    for scale in (0.001, 0.01):
        path = tmp_path / f"packed{scale}.nc"
        moored_profiler(path, {"v": VELOCITY["v"], "w": VELOCITY["w"]})
        with netCDF4.Dataset(path, "a") as f:
            u = f.createVariable("u", "i2", ("time", "depth"), fill_value=np.int16(-32768))
            u.set_auto_maskandscale(False)
            u.setncatts(
                {
                    "standard_name": "eastward_sea_water_velocity",
                    "units": "m s-1",
                    "scale_factor": scale,
                    "add_offset": 0.5,
                }
            )
            counts = np.arange(120, dtype="i2").reshape(30, 4) - 60
            counts[2, 2] = -32768
            u[:] = counts
        series = read(path, x_axis_compass_bearing=90)
        expected = counts * scale + 0.5
        keep = counts != -32768
        np.testing.assert_allclose(series["u"].values[0][keep], expected[keep], rtol=1e-12)
        assert series["u_flag"].values[0, 2, 2] == 9


@pytest.mark.parametrize(
    ("name", "data", "message"),
    [
        ("empty.nc", b"", "is empty"),
        ("text.nc", b"this is no netCDF file\n" * 20, "does not begin like it"),
        ("zeros.csv", b"\x00" * 300, "NUL bytes"),
        ("head.csv", b"time,depth,UCUR,VCUR\n", "holds 1 lines"),
        ("units.csv", b"time,depth,UCUR,VCUR\nUTC,m,m/s,m/s\n", "no data"),
        ("bare.csv", b"2026-01-01T00:00:00Z,5,0.1,0.2\n2026-01-01T00:01:00Z,5,0.1,0.2\n", "first row holds data"),
        ("twice.csv", b"time,depth,UCUR,UCUR\nUTC,m,m/s,m/s\n2026-01-01,5,1,1\n", "appears twice"),
        ("ragged.csv", b"time,depth,UCUR\nUTC,m,m/s\n2026-01-01,5\n2026-01-02,5,1\n2026-01-03,5,1\n", "do not have the 3 cells"),
        ("nottime.csv", b"time,depth,UCUR,VCUR\nUTC,m,m/s,m/s\nyesterday,5,0.1,0.1\ntoday,5,0.1,0.1\n", "not an ISO 8601 time"),
        ("nodepth.csv", b"time,UCUR,VCUR\nUTC,m/s,m/s\n2026-01-01,.1,.1\n2026-01-02,.1,.1\n", "depth of the sensor"),
        (
            "double.csv",
            b"time,depth,UCUR,VCUR\nUTC,m,m/s,m/s\n2026-01-01,5,1,1\n2026-01-01,5,1,1\n2026-01-02,6,1,1\n",
            "more than one row",
        ),
        ("novel.csv", b"time,depth,sst\nUTC,m,degC\n2026-01-01T00:00:00Z,5,11\n2026-01-01T00:01:00Z,5,11\n", "no water velocity"),
    ],
)  # fmt: skip
def test_files_that_are_no_record(tmp_path: Path, name: str, data: bytes, message: str) -> None:
    path = tmp_path / name
    path.write_bytes(data)
    with pytest.raises(RecordError, match=message):
        read(path)


def test_absent_file_and_folder(tmp_path: Path) -> None:
    with pytest.raises(RecordError, match="no such file"):
        read(tmp_path / "nowhere.nc")
    with pytest.raises(RecordError, match="is a folder"):
        read(tmp_path)


def test_a_cell_that_is_no_number_becomes_a_flagged_gap(tmp_path: Path) -> None:
    path = tmp_path / "r.csv"
    rows = [f"2026-01-01T00:{i:02d}:00Z,5,{'***' if i == 3 else 0.1},0.2" for i in range(10)]
    path.write_text("\n".join(["time,depth,UCUR,VCUR", "UTC,m,m/s,m/s", *rows]) + "\n")
    series = read(path, x_axis_compass_bearing=90)
    assert np.isnan(series["u"].values[0, 3, 0])
    assert series["u_flag"].values[0, 3, 0] == 9
    assert np.isfinite(np.delete(series["u"].values[0, :, 0], 3)).all()
    assert "cells-not-numbers" in codes(series)


def test_a_table_cut_in_its_last_row_keeps_the_rest(tmp_path: Path) -> None:
    path = tmp_path / "r.csv"
    rows = [f"2026-01-01T00:{i:02d}:00Z,5,0.1,0.2" for i in range(10)]
    path.write_text("\n".join(["time,depth,UCUR,VCUR", "UTC,m,m/s,m/s", *rows, "2026-01-01T00:10:00Z,5"]))
    series = read(path)
    assert series.sizes["time"] == 10
    assert "table-cut-short" in codes(series)


@pytest.mark.parametrize("share", [0.02, 0.3, 0.6, 0.9, 0.99])
def test_truncated_netcdf(tmp_path: Path, share: float) -> None:
    data = moored_profiler(tmp_path / "whole.nc", VELOCITY).read_bytes()
    path = tmp_path / "cut.nc"
    path.write_bytes(data[: int(share * len(data))])
    with pytest.raises(RecordError, match=r"cut\.nc"):
        read(path)


FUZZ = """
import sys
import numpy as np
from pathlib import Path
from lespost.errors import LespostError
from lespost.records.describe import describe
from lespost.records.read import open_raw, read_record
from lespost.records.settings import RecordSettings

whole, folder, start, stop = Path(sys.argv[1]), Path(sys.argv[2]), int(sys.argv[3]), int(sys.argv[4])
data = whole.read_bytes()
settings = dict(name="fuzzed", x_axis_compass_bearing=90.0)
truth = read_record(RecordSettings(path=str(whole), **settings), folder)
refused = same = flagged = 0
for seed in range(start, stop):
    print("seed", seed, file=sys.stderr, flush=True)
    rng = np.random.default_rng(seed)
    bytes_ = bytearray(data)
    for _ in range(int(rng.integers(1, 9))):
        bytes_[int(rng.integers(8, len(data)))] = int(rng.integers(256))
    path = folder / f"fuzzed{whole.suffix}"
    path.write_bytes(bytes(bytes_))
    try:
        raw = open_raw(path)
        describe(raw)
        series = read_record(RecordSettings(path=str(path), **settings), folder)
    except LespostError as error:
        assert 20 < len(str(error)) < 800, str(error)
        refused += 1
        continue
    if series.sizes == truth.sizes and all(
        n in series and np.array_equal(series[n].values, truth[n].values, equal_nan=True) for n in ("u", "v",
        "w")
    ):
        same += 1
        continue
    flagged += 1
    for n in ("u", "v", "w"):
        if n in series:
            good = np.isin(series[n + "_flag"].values, (1, 2))
            assert np.isfinite(series[n].values[good]).all() and (abs(series[n].values[good]) <= 14.2).all()
print("refused", refused, "same", same, "changed", flagged)
"""


@pytest.mark.parametrize("kind", ["netcdf4", "classic", "csv"])
def test_fuzzed_bytes_never_end_in_a_traceback(tmp_path: Path, kind: str) -> None:
    """Some hundreds of damaged copies, in a process of its own: a crash of a library would be seen as its
    exit code."""
    if kind == "csv":
        whole = tmp_path / "whole.csv"
        rows = [f"2026-01-01T00:{i:02d}:00Z,5,{0.01 * i:.3f},0.2,0.1" for i in range(40)]
        whole.write_text("\n".join(["time,depth,UCUR,VCUR,WCUR", "UTC,m,m/s,m/s,m/s", *rows]) + "\n")
    else:
        whole = moored_profiler(tmp_path / "whole.nc", VELOCITY, fletcher32=True)
        if kind == "classic":
            with xr.open_dataset(whole, decode_times=False) as stored:
                stored.to_netcdf(tmp_path / "classic.nc", format="NETCDF3_CLASSIC", engine="netcdf4")
            whole = tmp_path / "classic.nc"
    done = subprocess.run(
        [sys.executable, "-c", FUZZ, str(whole), str(tmp_path), "0", "250"],
        capture_output=True, text=True, check=False, timeout=240, env={**os.environ, "PYTHONPATH": os.getcwd()},
    )  # fmt: skip
    assert done.returncode == 0, done.stderr[-2000:]
    counts = dict(zip(done.stdout.split()[::2], map(int, done.stdout.split()[1::2]), strict=True))
    assert sum(counts.values()) == 250
    assert counts["refused"] > 0
    if kind == "netcdf4":
        assert counts["changed"] == 0  # checksummed data: damage is seen, never passed on as a number
