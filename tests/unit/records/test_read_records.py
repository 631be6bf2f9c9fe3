"""A record's numbers arrive in the canonical series to the sample: values, flags, axes, units."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import pytest
import xarray as xr

from lespost.errors import RecordError
from lespost.records.read import read_record, read_series
from lespost.records.settings import RecordSettings
from lespost.records.write import write_series
from lespost.series import compass_to_simulation, magnetic_to_true, make_series
from tests.unit.records.record_files import moored_profiler


def read(path: Path, **settings: Any) -> xr.Dataset:
    return read_record(RecordSettings(name="mooring", path=str(path), **settings), path.parent)


def codes(series: xr.Dataset) -> set[str]:
    return {f["code"] for f in json.loads(series.attrs["findings"])}


@pytest.fixture
def velocities() -> dict[str, np.ndarray]:
    rng = np.random.default_rng(3)
    return {
        name: rng.normal(0.0, 0.1, (40, 5)).astype(np.float32).astype(np.float64) for name in ("u", "v", "w")
    }


def test_values_depths_times_and_missing_flags(tmp_path: Path, velocities: dict[str, np.ndarray]) -> None:
    velocities["w"][3, 1] = np.nan
    series = read(moored_profiler(tmp_path / "r.nc", velocities), x_axis_compass_bearing=90.0)
    assert dict(series.sizes) == {"deployment": 1, "time": 40, "depth": 5}
    assert series["depth"].values.tolist() == [5.0, 7.0, 9.0, 11.0, 13.0]
    assert series["time"].values.tolist() == [60.0 * i for i in range(40)]
    assert series["time"].attrs["time_origin"] == "2026-01-01T00:00:00Z"
    for name in ("u", "v", "w"):
        np.testing.assert_allclose(series[name].values[0], velocities[name], rtol=0, atol=1e-12)
    assert series["w_flag"].values[0, 3, 1] == 9
    assert (np.delete(series["w_flag"].values[0].ravel(), 3 * 5 + 1) == 2).all()


@pytest.mark.parametrize(
    ("bearing", "expected"),
    [
        # closed form: with +x towards bearing B, u is the component along B, v along B - 90
        (90.0, (1.0, 2.0)),
        (0.0, (2.0, -1.0)),
        (180.0, (-2.0, 1.0)),
        (270.0, (-1.0, -2.0)),
        (45.0, (3.0 / np.sqrt(2.0), 1.0 / np.sqrt(2.0))),
    ],
)
def test_compass_to_simulation_axes(bearing: float, expected: tuple[float, float]) -> None:
    u, v = compass_to_simulation(np.array(1.0), np.array(2.0), bearing)
    np.testing.assert_allclose([u, v], expected, atol=1e-12)


def test_declination_turns_a_vector_clockwise_when_east() -> None:
    # towards magnetic north with 10 degrees east declination is towards true bearing 10
    east, north = magnetic_to_true(np.array(0.0), np.array(1.0), 10.0)
    np.testing.assert_allclose(np.rad2deg(np.arctan2(east, north)), 10.0, atol=1e-12)


def test_bearing_and_declination_reach_the_record(tmp_path: Path, velocities: dict[str, np.ndarray]) -> None:
    path = moored_profiler(tmp_path / "r.nc", velocities)
    series = read(path, x_axis_compass_bearing=30.0, magnetic_declination=-15.0)
    # the bearing of the current seen from +x: turning the axes by the declination is the same as turning x
    # back
    expected = compass_to_simulation(velocities["u"], velocities["v"], 45.0)
    np.testing.assert_allclose(series["u"].values[0], expected[0], atol=1e-12)
    np.testing.assert_allclose(series["v"].values[0], expected[1], atol=1e-12)
    np.testing.assert_allclose(series["w"].values[0], velocities["w"], atol=1e-12)


def test_an_assumed_x_axis_is_said(tmp_path: Path, velocities: dict[str, np.ndarray]) -> None:
    assert "x-axis-assumed" in codes(read(moored_profiler(tmp_path / "r.nc", velocities)))


def test_mixed_units_are_each_converted_and_reported(
    tmp_path: Path, velocities: dict[str, np.ndarray]
) -> None:
    stored = {"u": velocities["u"] * 100.0, "v": velocities["v"], "w": velocities["w"] * 1000.0}
    path = moored_profiler(tmp_path / "r.nc", stored, units={"u": "cm/s", "v": "m s-1", "w": "mm s-1"})
    series = read(path, x_axis_compass_bearing=90)
    for name in ("u", "v", "w"):
        np.testing.assert_allclose(series[name].values[0], velocities[name], atol=1e-7)
    assert "units-mixed" in codes(series)


def test_flags_are_honoured_to_the_sample(tmp_path: Path, velocities: dict[str, np.ndarray]) -> None:
    rng = np.random.default_rng(5)
    flags = {n: rng.choice([1, 2, 3, 4], (40, 5)).astype(np.int8) for n in velocities}
    series = read(moored_profiler(tmp_path / "r.nc", velocities, flags=flags), x_axis_compass_bearing=90)
    assert (series["w_flag"].values[0] == flags["w"]).all()
    # a horizontal component of rotated axes is as bad as the worse of the two recorded ones
    severity = {2: 0, 1: 1, 3: 2, 4: 3}
    expected = [
        a if severity[int(a)] >= severity[int(b)] else b
        for a, b in zip(flags["u"].ravel(), flags["v"].ravel(), strict=True)
    ]
    assert series["u_flag"].values.ravel().tolist() == expected


def test_one_test_can_be_ignored(tmp_path: Path) -> None:
    path = tmp_path / "r.nc"
    velocity = np.full((20, 2), 0.1)
    moored_profiler(
        path,
        {"w": velocity},
        variable_attributes={"w": {"ancillary_variables": "w_qc w_vertical_test w_spike_test"}},
    )
    meanings = {
        "flag_values": np.array([1, 2, 3, 4, 9], "i1"),
        "flag_meanings": "pass not_evaluated suspect fail missing",
    }
    vertical, spike = np.ones((20, 2), "i1"), np.ones((20, 2), "i1")
    vertical[4:12] = 3
    spike[10:14] = 4
    with netCDF4.Dataset(path, "a") as f:
        for name, data, standard in (
            ("w_qc", np.maximum(vertical, spike), "aggregate_quality_flag"),
            ("w_vertical_test", vertical, "gross_range_test_quality_flag"),
            ("w_spike_test", spike, "spike_test_quality_flag"),
        ):
            q = f.createVariable(name, "i1", ("time", "depth"))
            q.setncatts({**meanings, "standard_name": standard})
            q[:] = data
    plain = read(path)
    assert plain["w_flag"].values[0, :, 0].tolist() == [1] * 4 + [3] * 6 + [4] * 4 + [1] * 6
    assert "vertical-velocity-test" in codes(plain)
    spared = read(path, ignore_tests=("vertical",))
    assert spared["w_flag"].values[0, :, 0].tolist() == [1] * 10 + [4] * 4 + [1] * 6
    assert "test-not-found" in codes(read(path, ignore_tests=("no_such_test",)))


def test_gaps_in_time_become_flagged_gaps(tmp_path: Path, velocities: dict[str, np.ndarray]) -> None:
    keep = np.array([i for i in range(40) if i not in (7, 8, 9, 30)])
    path = moored_profiler(tmp_path / "r.nc", {n: v[keep] for n, v in velocities.items()}, time=keep * 60.0)
    series = read(path, x_axis_compass_bearing=90)
    assert series.sizes["time"] == 40
    np.testing.assert_allclose(series["time"].values, 60.0 * np.arange(40))
    assert np.isnan(series["u"].values[0, [7, 8, 9, 30]]).all()
    assert (series["u_flag"].values[0, [7, 8, 9, 30]] == 9).all()
    np.testing.assert_allclose(series["u"].values[0, keep], velocities["u"][keep], atol=1e-12)
    assert "time-gaps" in codes(series)


def test_a_time_window_cuts_and_moves_the_origin(tmp_path: Path, velocities: dict[str, np.ndarray]) -> None:
    path = moored_profiler(tmp_path / "r.nc", velocities)
    series = read(
        path, x_axis_compass_bearing=90, time_window=("2026-01-01T00:10:00Z", "2026-01-01T00:20:00Z")
    )
    assert series.sizes["time"] == 10
    assert series["time"].attrs["time_origin"] == "2026-01-01T00:10:00Z"
    np.testing.assert_allclose(series["u"].values[0], velocities["u"][10:20], atol=1e-12)
    with pytest.raises(RecordError, match="holds no sample"):
        read(path, time_window=("2027-01-01", "2027-01-02"))


def test_depths_may_come_as_heights(tmp_path: Path, velocities: dict[str, np.ndarray]) -> None:
    path = moored_profiler(
        tmp_path / "r.nc",
        velocities,
        depth=-(5.0 + 2.0 * np.arange(5)),
        depth_attributes={"standard_name": "height", "positive": "up"},
    )
    series = read(path, x_axis_compass_bearing=90)
    assert series["depth"].values.tolist() == [5.0, 7.0, 9.0, 11.0, 13.0]


def test_deepest_cell_first_is_turned_round(tmp_path: Path, velocities: dict[str, np.ndarray]) -> None:
    path = moored_profiler(tmp_path / "r.nc", velocities, depth=13.0 - 2.0 * np.arange(5))
    series = read(path, x_axis_compass_bearing=90)
    assert series["depth"].values.tolist() == [5.0, 7.0, 9.0, 11.0, 13.0]
    np.testing.assert_allclose(series["u"].values[0], velocities["u"][:, ::-1], atol=1e-12)


def test_moving_cells_are_put_on_fixed_depths(tmp_path: Path) -> None:
    path = tmp_path / "r.nc"
    moored_profiler(path, {"u": np.zeros((30, 6)), "v": np.zeros((30, 6))})
    dip = 1.5 * np.sin(np.arange(30) / 4.0)
    with netCDF4.Dataset(path, "a") as f:
        cells = 10.0 + 2.0 * np.arange(6) + dip[:, None]
        moving = f.createVariable("cell_depth", "f8", ("time", "depth"))
        moving.setncatts({"standard_name": "depth", "units": "m", "positive": "down"})
        moving[:] = cells
        del f["depth"].standard_name
        f["u"][:] = 0.01 * cells  # linear in depth: linear interpolation is exact
    series = read(path, x_axis_compass_bearing=90, columns={"depth": "cell_depth"})
    good = series["u_flag"].values[0] != 9
    target = np.median(cells, axis=0)
    expected = np.broadcast_to(0.01 * target, (30, 6))
    np.testing.assert_allclose(series["depth"].values, target)
    np.testing.assert_allclose(series["u"].values[0][good], expected[good], atol=1e-6)
    assert good[:, 1:5].all()
    assert not good.all()
    assert "cells-move" in codes(series)
    with pytest.raises(RecordError, match="cells move"):
        read(path, columns={"depth": "cell_depth"}, moving_depths="refuse")


def test_speed_and_direction_make_components(tmp_path: Path) -> None:
    path = tmp_path / "r.csv"
    path.write_text(
        "time,depth,CSPD,CDIR\nUTC,m,cm/s,degree\n2026-01-01T00:00:00Z,5,20,90\n2026-01-01T00:01:00Z,5,20,180\n"
        "2026-01-01T00:02:00Z,5,20,0\n"
    )
    series = read(path, x_axis_compass_bearing=90)
    np.testing.assert_allclose(series["u"].values.ravel(), [0.2, 0.0, 0.0], atol=1e-12)
    np.testing.assert_allclose(series["v"].values.ravel(), [0.0, -0.2, 0.2], atol=1e-12)


def test_one_component_keeps_its_axis(tmp_path: Path) -> None:
    path = tmp_path / "r.csv"
    path.write_text(
        "time,depth,eastward_sea_water_velocity\nUTC,m,m "
        "s-1\n2026-01-01T00:00:00Z,5,0.12\n2026-01-01T00:01:00Z,5,NaN\n"
    )
    for bearing, name, sign in ((90.0, "u", 1.0), (0.0, "v", -1.0), (270.0, "u", -1.0), (180.0, "v", 1.0)):
        series = read(path, x_axis_compass_bearing=bearing)
        assert {"u", "v"} & set(series.data_vars) == {name}
        assert series[name].values.ravel()[0] == pytest.approx(sign * 0.12)
        assert series[f"{name}_flag"].values.ravel().tolist() == [2, 9]
    with pytest.raises(RecordError, match="does not lie along an axis"):
        read(path, x_axis_compass_bearing=45.0)


@pytest.mark.parametrize("layout", ["two headers", "name (unit)", "units in the recipe", "semicolons"])
def test_tables_of_several_depths(tmp_path: Path, layout: str) -> None:
    rows = [(f"2026-01-01T00:0{t}:00Z", z, 0.1 * t + z, -z, 0.01 * t) for t in range(4) for z in (5, 8, 11)]
    names, units = ("time", "depth", "UCUR", "VCUR", "WCUR"), ("UTC", "m", "m/s", "m/s", "m/s")
    separator = ";" if layout == "semicolons" else ","
    settings: dict[str, Any] = {"largest_speed": 100.0, "x_axis_compass_bearing": 90.0}
    if layout == "name (unit)":
        head = [separator.join(f"{n} ({u})" for n, u in zip(names, units, strict=True))]
    elif layout == "units in the recipe":
        head = [separator.join(names)]
        settings["column_units"] = dict.fromkeys(("UCUR", "VCUR", "WCUR"), "m/s")
    else:
        head = [separator.join(names), separator.join(units)]
    path = tmp_path / "table.csv"
    path.write_text(
        "\n".join([*head, *(separator.join(map(str, r)) for r in rows)]) + "\n", encoding="iso-8859-1"
    )
    series = read(path, **settings)
    assert series["depth"].values.tolist() == [5.0, 8.0, 11.0]
    expected = np.array([[0.1 * t + z for z in (5, 8, 11)] for t in range(4)])
    np.testing.assert_allclose(series["u"].values[0], expected)
    np.testing.assert_allclose(series["w"].values[0, :, 0], [0.0, 0.01, 0.02, 0.03])


def test_contiguous_ragged_profiles(tmp_path: Path) -> None:
    path = tmp_path / "ragged.nc"
    sizes = [3, 2, 3, 3]
    with netCDF4.Dataset(path, "w") as f:
        f.setncatts({"Conventions": "CF-1.8", "featureType": "timeSeriesProfile"})
        f.createDimension("profile", 4)
        f.createDimension("obs", sum(sizes))
        t = f.createVariable("time", "f8", ("profile",))
        t.setncatts({"standard_name": "time", "units": "seconds since 2026-01-01"})
        t[:] = [0.0, 60.0, 120.0, 180.0]
        n = f.createVariable("row_size", "i4", ("profile",))
        n.sample_dimension = "obs"
        n[:] = sizes
        z = f.createVariable("depth", "f4", ("obs",))
        z.setncatts({"standard_name": "depth", "units": "m", "positive": "down"})
        z[:] = [5, 7, 9, 5, 7, 5, 7, 9, 5, 7, 9]
        w = f.createVariable("w", "f4", ("obs",))
        w.setncatts({"standard_name": "upward_sea_water_velocity", "units": "m s-1"})
        w[:] = np.arange(11) * 0.01
    series = read(path)
    assert series["depth"].values.tolist() == [5.0, 7.0, 9.0]
    expected = [[0.0, 0.01, 0.02], [0.03, 0.04, np.nan], [0.05, 0.06, 0.07], [0.08, 0.09, 0.10]]
    np.testing.assert_allclose(series["w"].values[0], expected, atol=1e-7)


def test_a_station_must_be_chosen_and_is_found(tmp_path: Path) -> None:
    path = tmp_path / "table.csv"
    rows = [f"2026-01-01T00:0{t}:00Z,5,{s},{0.1 if s == 'A' else 0.2},0" for t in range(3) for s in "AB"]
    path.write_text("\n".join(["time,depth,station,UCUR,VCUR", "UTC,m,,m/s,m/s", *rows]) + "\n")
    with pytest.raises(RecordError, match="2 stations"):
        read(path)
    np.testing.assert_allclose(read(path, station="B", x_axis_compass_bearing=90)["u"].values.ravel(), 0.2)
    with pytest.raises(RecordError, match='no station "C"'):
        read(path, station="C")


def test_a_series_survives_writing_and_reading(tmp_path: Path) -> None:
    rng = np.random.default_rng(2)
    values = {n: rng.normal(0, 0.1, (3, 20, 4)) for n in ("u", "v", "w", "error_velocity")}
    values["u"][1, 2, 3] = np.nan
    flags = {"u": rng.choice([1, 2, 3, 4, 9], (3, 20, 4)).astype(np.int8)}
    series = make_series(
        values, np.arange(20) * 2.0, [3.0, 4.0, 5.0, 6.0], instrument="profiler", flags=flags, averaging_interval=2.0,
        noise_standard_deviation=0.01,
    ).assign_coords(deployment_x=("deployment", [0.0, 10.0, 20.0]), deployment_y=("deployment", [0.0, 1.0, 2.0]))  # fmt: skip
    series["subgrid_share"] = ("depth", [0.1, 0.2, 0.3, 0.4])
    back = read_series(write_series(series, tmp_path / "s.nc"))
    assert back["time"].attrs["time_origin"] == "run"
    for name in (*values, "u_flag", "subgrid_share", "time", "depth", "deployment_x", "deployment_y"):
        np.testing.assert_array_equal(back[name].values, series[name].values)
    assert back.attrs["noise_standard_deviation"] == 0.01
    assert back.attrs["averaging_interval"] == 2.0
    assert back.attrs["chain"] == "[]"


def test_a_written_series_is_a_record_that_read_record_takes(tmp_path: Path) -> None:
    rng = np.random.default_rng(2)
    values = {n: rng.normal(0, 0.1, (1, 20, 4)) for n in ("u", "v", "w")}
    series = make_series(
        values, np.arange(20) * 2.0, [3.0, 4.0, 5.0, 6.0], instrument="p", time_origin="2026-03-01T12:00:00Z"
    )
    back = read(write_series(series, tmp_path / "s.nc"))
    assert back["time"].attrs["time_origin"] == "2026-03-01T12:00:00Z"
    for name in values:
        np.testing.assert_array_equal(back[name].values, series[name].values)


def test_files_written_pass_the_cf_checker(tmp_path: Path) -> None:
    checker = pytest.importorskip("compliance_checker.runner")
    rng = np.random.default_rng(2)
    values = {n: rng.normal(0, 0.1, (2, 20, 4)).astype(np.float32) for n in ("u", "v", "w", "error_velocity")}
    flags = {n: np.ones((2, 20, 4), np.int8) for n in values}
    series = make_series(
        values, np.arange(20) * 2.0, [3.0, 4.0, 5.0, 6.0], instrument="profiler", flags=flags
    )
    series = series.assign_coords(
        deployment_x=("deployment", [0.0, 10.0]), deployment_y=("deployment", [0.0, 1.0])
    )
    path = write_series(series, tmp_path / "s.nc")
    checker.CheckSuite.load_all_available_checkers()
    _, errors = checker.ComplianceChecker.run_checker(
        str(path),
        ["cf:1.8"],
        0,
        "normal",
        output_filename=str(tmp_path / "report.json"),
        output_format="json",
    )
    report = json.loads((tmp_path / "report.json").read_text())["cf:1.8"]
    assert not errors
    said = [
        m
        for level in ("high", "medium", "low")
        for item in report[f"{level}_priorities"]
        for m in item["msgs"]
    ]
    assert said == []


@pytest.mark.parametrize("text", ["time: mean (interval: 1 s)", "TIME: mean", "Time: Mean"])
def test_cell_methods_in_any_case_tell_the_averaging(text: str, tmp_path: Path) -> None:
    """OceanSITES names its axis TIME; CF writes lower case: both mean the mean over the sampling interval."""
    source = Path(__file__).parents[3] / "toy_fields" / "data" / "invented_mooring.nc"
    target = tmp_path / "record.nc"
    target.write_bytes(source.read_bytes())
    with netCDF4.Dataset(target, "a") as data:
        for name in ("UCUR", "VCUR", "WCUR"):
            data[name].cell_methods = text
    series = read_record(RecordSettings(name="m", path=str(target), x_axis_compass_bearing=90.0), tmp_path)
    assert series.attrs["averaging_interval"] == pytest.approx(60.0, abs=1e-5)  # times are stored in days
