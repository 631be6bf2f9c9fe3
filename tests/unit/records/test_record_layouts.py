"""Layouts and spellings that real files use: stations, ragged arrays, companions in the wrong case, times in every unit."""

from __future__ import annotations

import json
from datetime import UTC, datetime, timedelta
from pathlib import Path

import netCDF4
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from lespost.cli import run
from lespost.errors import RecordError
from lespost.records.processing import process
from lespost.records.read import open_raw, read_record
from lespost.records.roles import find_role
from lespost.records.settings import ProcessingSettings, RecordSettings
from lespost.records.time import numeric_times, parse_iso, sampling, text_times
from tests.unit.records.record_files import QARTOD, moored_profiler


def record(path: Path, **settings: object) -> RecordSettings:
    return RecordSettings(name="r", path=str(path), x_axis_compass_bearing=90.0, **settings)  # type: ignore[arg-type]


def stations(path: Path, indexed: bool) -> Path:
    """Two stations with 5 and 3 samples as an indexed, or 4 and 4 as an orthogonal array."""
    with netCDF4.Dataset(path, "w") as f:
        f.setncatts({"Conventions": "CF-1.8", "featureType": "timeSeries"})
        f.createDimension("station", 2)
        f.createDimension("letters", 3)
        name = f.createVariable("name", "S1", ("station", "letters"))
        name.cf_role = "timeseries_id"
        name[:] = np.array([list("ABC"), list("XYZ")], dtype="S1")
        f.createDimension("obs", 8 if indexed else 4)
        t = f.createVariable("time", "f8", ("obs",))
        t.setncatts({"standard_name": "time", "units": "minutes since 2026-01-01"})
        dims: tuple[str, ...]
        if indexed:
            i = f.createVariable("index", "i4", ("obs",))
            i.instance_dimension = "station"
            i[:] = [0, 1, 0, 1, 0, 1, 0, 0]
            t[:] = [0, 0, 1, 1, 2, 2, 3, 4]
            dims, values = ("obs",), 0.1 * np.array([0, 10, 1, 11, 2, 12, 3, 4])
        else:
            t[:] = [0, 1, 2, 3]
            dims, values = ("station", "obs"), 0.1 * np.array([[0, 1, 2, 3], [10, 11, 12, 13]])
        w = f.createVariable("w", "f4", dims)
        w.setncatts({"standard_name": "upward_sea_water_velocity", "units": "m s-1"})
        w[:] = values
    return path


@pytest.mark.parametrize("indexed", [True, False])
def test_one_station_of_several(tmp_path: Path, indexed: bool) -> None:
    path = stations(tmp_path / "s.nc", indexed)
    with pytest.raises(RecordError, match="ABC, XYZ"):
        read_record(record(path, depth=5.0), tmp_path)
    first = read_record(record(path, depth=5.0, station="ABC"), tmp_path)["w"].values.ravel()
    second = read_record(record(path, depth=5.0, station="XYZ"), tmp_path)["w"].values.ravel()
    np.testing.assert_allclose(first, [0.0, 0.1, 0.2, 0.3, 0.4] if indexed else [0.0, 0.1, 0.2, 0.3], atol=1e-7)
    np.testing.assert_allclose(second, [1.0, 1.1, 1.2] if indexed else [1.0, 1.1, 1.2, 1.3], atol=1e-7)


def test_companions_in_the_wrong_case_are_found_and_reported(tmp_path: Path) -> None:
    w = np.full((10, 2), 0.1)
    path = moored_profiler(tmp_path / "r.nc", {"w": w}, variable_attributes={"w": {"ancillary_variables": "W_qc"}})
    with netCDF4.Dataset(path, "a") as f:
        q = f.createVariable("w_QC", "f4", ("time", "depth"), fill_value=np.float32(99999.0))
        q.setncatts({**QARTOD, "units": "m s-1"})
        q[:] = 1.0
        q[4, 1] = 4.0
    series = read_record(record(path), tmp_path)
    assert np.flatnonzero(series["w_flag"].values.ravel() != 1).tolist() == [9]
    codes = {f["code"] for f in json.loads(series.attrs["findings"])}
    assert {"ancillary-name", "flags-not-integers", "flags-with-units"} <= codes


def test_two_claimants_of_one_standard_name_need_a_choice(tmp_path: Path) -> None:
    path = moored_profiler(tmp_path / "r.nc", {"w": np.zeros((10, 2)), "raw": np.ones((10, 2))})
    with netCDF4.Dataset(path, "a") as f:
        f["raw"].standard_name = "upward_sea_water_velocity"
    with pytest.raises(RecordError, match="all carry the standard name"):
        read_record(record(path), tmp_path)
    assert read_record(record(path, columns={"upward": "raw"}), tmp_path)["w"].values.max() == 1.0
    with pytest.raises(RecordError, match="is not in the file"):
        read_record(record(path, columns={"upward": "absent"}), tmp_path)


def test_standard_names_win_over_misleading_names(tmp_path: Path) -> None:
    path = moored_profiler(tmp_path / "r.nc", {"u": np.zeros((10, 2)), "v": np.ones((10, 2))})
    with netCDF4.Dataset(path, "a") as f:
        f["u"].standard_name, f["v"].standard_name = "northward_sea_water_velocity", "eastward_sea_water_velocity"
    found = find_role(open_raw(path), "eastward")
    assert found is not None
    assert found.variable.name == "v"
    series = read_record(record(path), tmp_path)
    assert series["u"].values.max() == 1.0
    assert series["v"].values.max() == 0.0


@given(
    st.datetimes(datetime(1990, 1, 1), datetime(2040, 1, 1)),
    st.sampled_from([("seconds", 1.0), ("minutes", 60.0), ("hours", 3600.0), ("days", 86400.0)]),
    st.floats(0.0, 20000.0),
)
def test_numeric_times_against_calendar_arithmetic(reference: datetime, unit: tuple[str, float], start: float) -> None:
    reference = reference.replace(microsecond=0)
    numbers = np.array([start, start + 1.0, start + 2.5])
    axis = numeric_times(numbers, f"{unit[0]} since {reference:%Y-%m-%d %H:%M:%S}", "standard", "t")
    expected = reference.replace(tzinfo=UTC) + timedelta(seconds=start * unit[1])
    assert abs((parse_iso(axis.origin, "t") - expected).total_seconds()) < 1e-3
    np.testing.assert_allclose(axis.seconds, np.array([0.0, 1.0, 2.5]) * unit[1], rtol=1e-9)


def test_reference_times_are_read_loosely_and_with_zones() -> None:
    midnight = ("1950-01-01T00:00:00Z", "1950-1-1", "1950-01-01 00:00:0.0", "1950-01-01 02:00 +02:00", "1949-12-31T19:00:00-0500")
    for text in midnight:
        assert numeric_times(np.array([1.0, 2.0]), f"days since {text}", "standard", "t").origin == "1950-01-02T00:00:00Z"


def test_text_times() -> None:
    axis = text_times(np.array(["2026-01-01T00:00:00Z", "2026-01-01T02:00:30+01:00", "2026-01-01 01:01:00 UTC"], object), "t")
    assert axis.seconds.tolist() == [0.0, 3630.0, 3660.0]


def test_sampling_of_regular_gappy_and_jittered_axes() -> None:
    even = sampling(np.arange(10) * 2.0)
    assert (even.interval, even.regular, even.gaps) == (2.0, True, 0)
    gappy = sampling(np.array([0.0, 2.0, 4.0, 10.0, 12.0]))
    assert (gappy.regular, gappy.gaps, gappy.index.tolist()) == (True, 1, [0, 1, 2, 5, 6])
    assert not sampling(np.array([0.0, 2.0, 4.0, 6.7, 8.0])).regular


def test_irregular_records_need_an_averaging_interval(tmp_path: Path) -> None:
    rng = np.random.default_rng(0)
    time = np.sort(rng.uniform(0.0, 6000.0, 500))
    path = moored_profiler(tmp_path / "r.nc", {"w": np.ones((500, 2))}, time=time)
    series = read_record(record(path), tmp_path)
    assert "time-irregular" in {f["code"] for f in json.loads(series.attrs["findings"])}
    with pytest.raises(RecordError, match="irregularly"):
        process(series, ProcessingSettings())
    averaged = process(series, ProcessingSettings(averaging_interval=300.0))
    np.testing.assert_allclose(averaged["w"].values[np.isfinite(averaged["w"].values)], 1.0)


def test_faults_reach_the_command_line_as_one_paragraph(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    bad = tmp_path / "bad.nc"
    bad.write_bytes(b"\x89HDF\r\n\x1a\n" + bytes(200))
    assert run(["record", str(bad)]) == 3
    captured = capsys.readouterr()
    assert captured.out == ""
    assert "bad.nc" in captured.err
    assert "Traceback" not in captured.err
