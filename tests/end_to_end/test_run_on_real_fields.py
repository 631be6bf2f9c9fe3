"""The main job on real turbulence: `inspect` writes the recipe, `run` runs it, the numbers equal plain numpy.

The two runs (wave-averaged large-eddy simulations with and without Stokes drift) are described by their own attributes; the
expected regimes are those of the published orderings of the velocity variances (Li, Garrett & Skyllingstad 2005).
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import pandas as pd
import pytest
import xarray as xr

from tests.end_to_end.command_line import lespost

CASES = ("langmuir", "shear")

COLUMNS = """window t_start t_end z_bottom z_top regime p_shear p_convective p_langmuir fraction_along fraction_cross
fraction_vertical axis_deg axis_kind ustar wstar us0 la_t la_sl la_proj hoenikker h h_over_l_langmuir
forcing_regime agreement note""".split()

PROFILES = """u v w theta uu vv ww uv uw vw thetatheta utheta vtheta wtheta uuu vvv www uuw vvw thetathetaw wwtheta
thetathetatheta uuuu vvvv wwww tke_shear tke_stokes tke_buoyancy tke_transport""".split()


@pytest.fixture(scope="module", params=CASES)
def case(request: pytest.FixtureRequest, shared: Path, tmp_path_factory: pytest.TempPathFactory) -> tuple[str, Path, Path]:
    """(name, source file, results folder) of one run made by the two commands a newcomer types."""
    name = request.param
    folder = tmp_path_factory.mktemp(name)
    source = shared / "fields" / f"{name}.nc"
    lespost("inspect", source, "--write", folder / "recipe.toml")
    lespost("run", folder / "recipe.toml", "--out", folder / "out")
    return name, source, folder / "out"


def moments(source: Path) -> dict[str, np.ndarray]:
    """Second moments on cell centres by plain float64 numpy, nothing of ours."""
    with netCDF4.Dataset(source) as data:
        fields: dict[str, Any] = {name: np.asarray(data[name][:], np.float64) for name in ("u", "v", "w", "theta")}
    fields["w"] = 0.5 * (fields["w"][:, 1:] + fields["w"][:, :-1])
    primes = {name: values - values.mean((-2, -1), keepdims=True) for name, values in fields.items()}
    pairs = [("u", "u"), ("v", "v"), ("w", "w"), ("u", "v"), ("u", "w"), ("v", "w"), ("theta", "theta"), ("w", "theta")]
    return {a + b: (primes[a] * primes[b]).mean((-2, -1)) for a, b in pairs}


def test_second_moments_equal_plain_numpy(case: tuple[str, Path, Path]) -> None:
    _, source, out = case
    profiles = xr.open_zarr(out / "profiles.zarr", consolidated=False, decode_times=False)
    for name, expected in moments(source).items():
        values = profiles[name].transpose("time", "z").values
        scale = np.abs(expected).max()
        assert np.abs(values - expected).max() <= 1e-6 * scale, name
        if name in ("uu", "vv", "ww"):
            np.testing.assert_allclose(values, expected, rtol=1e-6)


def test_regime_of_the_upper_mixed_layer(case: tuple[str, Path, Path]) -> None:
    name, _, out = case
    upper = pd.read_csv(out / "regime.csv").iloc[0]
    assert upper["regime"] == name
    assert upper[f"p_{name}"] > 0.9
    shares = upper[["fraction_along", "fraction_cross", "fraction_vertical"]].astype(float)
    assert shares.sum() == pytest.approx(1.0, abs=1e-9)
    assert -33.0 < upper["z_bottom"] < upper["z_top"] < 0.0


def test_scales_match_the_attributes(case: tuple[str, Path, Path]) -> None:
    _, source, out = case
    row = pd.read_csv(out / "regime.csv").iloc[0]
    with netCDF4.Dataset(source) as data:
        ustar, us0 = float(data.ustar), float(data.us0)
    assert row["ustar"] == pytest.approx(ustar, rel=1e-6)
    if us0 > 0:
        assert row["la_t"] == pytest.approx((ustar / us0) ** 0.5, rel=1e-6)
    else:
        assert np.isnan(row["la_t"])  # no waves: there is no Langmuir number, and an empty cell says so


def test_the_results_folder_keeps_its_contract(case: tuple[str, Path, Path]) -> None:
    _, _, out = case
    run = json.loads((out / "run.json").read_text())
    assert {"recipe", "versions", "decisions", "findings", "timings", "input"} <= set(run)
    assert list(pd.read_csv(out / "regime.csv").columns) == COLUMNS
    with xr.open_dataset(out / "windows.nc", decode_times=False) as windows:
        assert {"uu", "uu_se", "uu_neff"} <= set(windows.data_vars)
        weights = [windows[f"anisotropy_{part}"].values for part in ("one_component", "two_component", "isotropic")]
    for weight in weights:
        assert (weight > -1e-9).all() and (weight < 1 + 1e-9).all()  # realisable: a stress of some flow
    page = (out / "report.html").read_text()
    assert "http://" not in page.replace("http://www.w3.org", "")
    assert "https://" not in page
    profiles = xr.open_zarr(out / "profiles.zarr", consolidated=False, decode_times=False)
    for name in PROFILES:
        assert profiles[name].dims == ("time", "z"), name
        assert profiles[name].attrs.get("units"), name
        assert profiles[name].attrs.get("long_name"), name


def test_running_again_reuses_the_work(case: tuple[str, Path, Path]) -> None:
    _, _, out = case
    before = (out / "regime.csv").read_bytes()
    again = lespost("run", out.parent / "recipe.toml", "--out", out, "--json")
    summary = json.loads(again.stdout)
    assert summary["tasks"]["computed"] == 0
    assert (out / "regime.csv").read_bytes() == before
