"""`lespost record`: real and minimal files are described with sane numbers, velocity or not."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

from lespost.cli.record import command
from lespost.errors import RecordError
from lespost.records.describe import describe
from lespost.records.read import open_raw, read_record
from lespost.records.settings import RecordSettings
from tests.unit.records.record_files import moored_profiler


def only(shared: Path, pattern: str) -> Path:
    """The one real or minimal record whose name fits."""
    hits = list((shared / "data" / "records").glob(pattern))
    assert len(hits) == 1
    return hits[0]


def test_numbers_of_a_known_record(tmp_path: Path) -> None:
    rng = np.random.default_rng(0)
    w = rng.normal(0.0, 0.05, (2000, 3))
    w[10:20] = np.nan
    flags = np.ones((2000, 3), np.int8)
    flags[:200] = 4
    path = moored_profiler(tmp_path / "r.nc", {"w": w}, flags={"w": flags})
    found = describe(open_raw(path))
    variable = {v.name: v for v in found.variables}["w"]
    assert found.sampling_interval == 60.0
    assert found.regular
    assert found.time_end == "2026-01-02T09:19:00Z"
    assert (found.shallowest, found.deepest) == (5.0, 9.0)
    assert variable.missing_share == pytest.approx(30 / 6000)
    assert variable.good_share == pytest.approx((6000 - 600) / (6000 - 30))
    # white noise is all noise: sd 0.05
    assert variable.noise_plateau == pytest.approx(0.05, rel=0.1)
    assert variable.noise_lag_zero == pytest.approx(0.05, rel=0.1)
    assert found.usable_for_comparison


def test_command_prints_text_and_json(tmp_path: Path) -> None:
    path = moored_profiler(
        tmp_path / "r.nc", {"w": np.full((30, 2), np.nan), "u": np.ones((30, 2)), "v": np.ones((30, 2))}
    )
    text = CliRunner().invoke(command, [str(path)])
    assert text.exit_code == 0
    assert "can be compared" in text.output
    answer = CliRunner().invoke(command, [str(path), "--json"])
    data = json.loads(answer.output)
    by_name = {v["name"]: v for v in data["variables"]}
    assert by_name["w"]["mean"] is None
    assert by_name["u"]["mean"] == 1.0
    assert data["usable_for_comparison"] is True


@pytest.mark.parametrize(
    ("name", "says"),
    [
        ("OS_*_MCTD_*.nc",
         {"flags-not-integers", "flag-meanings-absent", "flags-with-units", "fill-on-coordinate", "unit-spelling",
          "outside-valid-range"}),
        ("argo-*.nc", {"feature-type-absent", "flag-meanings-absent", "flags-unreadable", "unit-spelling"}),
        ("*_knockdown.nc", {"orientation-contradicts", "fill-on-coordinate", "feature-type-absent"}),
        ("gdp-*.csv", {"time-order"}),
        ("minimal/OS_EX-1_202601_D_ADCP.nc", {"feature-type-absent"}),
        ("minimal/min_erddap.csv", set()),
        ("minimal/min_timeSeriesProfile.nc", set()),
        ("minimal/min_trajectoryProfile.nc", set()),
        ("minimal/min_wave_spectrum.nc", set()),
    ],
)  # fmt: skip
def test_real_records_are_described(shared: Path, name: str, says: set[str]) -> None:
    path = only(shared, name)
    found = describe(open_raw(path))
    assert {f.code for f in found.findings} == says
    assert found.time_start is not None
    json.dumps(found.to_dict(), allow_nan=False)
    assert found.file in found.to_text()


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("OS_*_MCTD_*.nc", "no water velocity"),
        ("argo-*.nc", "no water velocity"),
        ("gdp-*.csv", "no water velocity"),
        ("minimal/min_wave_spectrum.nc", "no water velocity"),
        ("minimal/min_trajectoryProfile.nc", "fixed instruments"),
        ("*_knockdown.nc", "magnetic_declination"),
    ],
)
def test_real_records_without_usable_velocity_are_refused(shared: Path, name: str, message: str) -> None:
    with pytest.raises(RecordError, match=message):
        read_record(RecordSettings(name="r", path=str(only(shared, name))), shared)


def test_knocked_down_profiler(shared: Path) -> None:
    settings = RecordSettings(
        name="r", path=str(only(shared, "*_knockdown.nc")), magnetic_declination=-15.48, x_axis_compass_bearing=90
    )
    series = read_record(settings, shared)
    assert dict(series.sizes) == {"deployment": 1, "time": 300, "depth": 37}
    assert set(series.data_vars) == {"u", "v", "u_flag", "v_flag"}
    spacing = np.diff(series["depth"].values)
    np.testing.assert_allclose(
        spacing, 16.0, atol=0.3
    )  # 16 m cells by the file's header, levelled by the instrument
    speed = np.hypot(series["u"].values, series["v"].values)
    assert 0.05 < np.nanmedian(speed) < 1.0
    assert np.array_equal(np.isfinite(series["u"].values), series["u_flag"].values != 9)


def test_minimal_profilers_are_read(shared: Path) -> None:
    for name in ("OS_EX-1_202601_D_ADCP.nc", "min_timeSeriesProfile.nc"):
        series = read_record(
            RecordSettings(name="r", path=name, x_axis_compass_bearing=90),
            shared / "data" / "records" / "minimal",
        )
        assert series["depth"].values.tolist() == [5.0, 10.0, 20.0]
        np.testing.assert_allclose(series["time"].values, [0.0, 60.0, 120.0, 180.0], atol=1e-3)
        assert (series["w_flag"].values == 1).all()
