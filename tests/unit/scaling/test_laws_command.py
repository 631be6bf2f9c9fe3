"""`lespost laws`: words, JSON, files, figures and errors; tables from results folders."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from lespost.cli import run
from lespost.errors import DataError, RequestError
from lespost.scaling.from_results import table_from_results
from lespost.scaling.table import ScaleTable
from tests.unit.scaling.storms import scattered, storm


def write(table: ScaleTable, path: Path) -> Path:
    assert table.time is not None
    names = ["ustar", "us0", "velocity"]
    body = np.column_stack([table.time / 3600, *(table.columns[name] for name in names)])
    path.write_text("time (h)," + ",".join(f"{name} (m s-1)" for name in names) + "\n"
                    + "\n".join(",".join(f"{value:.8g}" for value in row) for row in body) + "\n")
    return path


def test_words_files_and_figures(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    table = write(storm(np.random.default_rng(2)), tmp_path / "storm.csv")
    out = tmp_path / "out"
    assert run(["laws", str(table), "--law", "us0", "--law", "ustar", "--out", str(out), "--plan", "us0", "ustar"]) == 0
    said = capsys.readouterr().out
    assert "by chance" in said
    assert "To separate us0 from ustar at 80 % power" in said
    assert len(pd.read_csv(out / "scaling.csv")) == 5
    assert json.loads((out / "scaling.json").read_text())["rows"] == 40
    for name in ("laws", "laws_scaled", "laws_residual"):
        assert (out / "figures" / f"{name}.svg").stat().st_size > 5000
        assert (out / "figures" / f"{name}.png").read_bytes()[:4] == b"\x89PNG"


def test_json_is_one_object_without_nan(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    table = write(scattered(np.random.default_rng(2), rows=20, us0=1.0), tmp_path / "rows.csv")
    assert run(["laws", str(table), "--json", "--law", "us0", "--plan", "us0", "ustar la_t^n"]) == 0
    found = json.loads(capsys.readouterr().out, parse_constant=lambda word: pytest.fail(word))
    assert found["laws"][0]["slope_orthogonal"] is None  # no errors of the predictor are stated
    assert found["asked"][0]["rows"] is None  # the second law contains the first: no record would do


@pytest.mark.parametrize(("arguments", "code", "words"), [
    (["--law", "salt"], 2, "not a quantity"),
    (["--law", "wstar"], 2, "does not have"),
    (["--scale", "speed = 3 kg"], 2, "metres and seconds"),
    (["--plan", "us0", "wstar"], 2, "--plan"),
])
def test_wrong_requests(tmp_path: Path, capsys: pytest.CaptureFixture[str], arguments: list[str], code: int, words: str) -> None:
    table = write(scattered(np.random.default_rng(2), rows=20, us0=1.0), tmp_path / "rows.csv")
    assert run(["laws", str(table), *arguments]) == code
    said = capsys.readouterr().err
    assert words in said
    assert "Traceback" not in said


def test_missing_and_short_tables(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["laws", str(tmp_path / "none.csv")]) == 2
    short = write(scattered(np.random.default_rng(2), rows=2, us0=1.0), tmp_path / "two.csv")
    assert run(["laws", str(short)]) == 3
    assert "2 rows are too few" in capsys.readouterr().err
    assert run(["laws", str(short), str(short)]) == 2


def results(folder: Path, ustar: float, us0: float, variances: tuple[float, float, float, float]) -> Path:
    """A results folder with one window; variances: uu, vv, uv, ww, the same at all levels."""
    folder.mkdir()
    z = np.array([-35.0, -25.0, -15.0, -5.0])
    data = xr.Dataset(coords={"z": z, "window": ["all"]})
    for name, value in zip(("uu", "vv", "uv", "ww"), variances, strict=True):
        data[name] = (("window", "z"), np.full((1, 4), value))
        data[f"{name}_se"] = (("window", "z"), np.full((1, 4), 0.1 * abs(value)))
    data["surface_buoyancy_flux"] = ("window", [1e-8])
    data.to_netcdf(folder / "windows.nc")
    band = {"window": "all", "z_bottom": -20.0, "z_top": -4.0, "axis_deg": 90.0, "ustar": ustar, "us0": us0, "la_sl": 0.4,
            "h": 40.0}
    pd.DataFrame([band, {**band, "z_bottom": -36.0, "z_top": -20.0}]).to_csv(folder / "regime.csv", index=False)
    return folder


def test_table_from_results_folders(tmp_path: Path) -> None:
    folders = [results(tmp_path / str(i), 0.006 + 0.001 * i, 0.06 + 0.02 * i, (4e-4 * (i + 1), 1e-4, 0.0, 2e-4)) for i in range(3)]
    table = table_from_results(folders)
    # the axis is along y (90 degrees), so the crosswind variance is uu; the larger of it and ww is taken
    assert table.columns["velocity"] == pytest.approx(np.sqrt([4e-4, 8e-4, 12e-4]))
    assert table.errors["velocity"] == pytest.approx(0.05 * np.sqrt([4e-4, 8e-4, 12e-4]))  # closed form: half the relative error
    assert table.columns["us0"] == pytest.approx([0.06, 0.08, 0.10])
    assert table.columns["us_sl"] == pytest.approx(np.array([0.006, 0.007, 0.008]) / 0.16)  # La_SL² = u*/u_s,SL, turned round
    assert table.columns["b0"] == pytest.approx([1e-8] * 3)
    assert table.time is None
    assert "rms" in table.velocity_name
    assert run(["laws", *map(str, folders), "--law", "us0"]) == 0
    with pytest.raises(DataError, match="too few"):
        table_from_results(folders[:2])
    with pytest.raises(RequestError, match="given twice"):
        table_from_results([*folders, folders[0] / ".." / folders[0].name])
    (folders[0] / "windows.nc").unlink()
    with pytest.raises(DataError, match=r"no windows\.nc"):
        table_from_results(folders)
