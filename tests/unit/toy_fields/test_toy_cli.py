"""`python -m toy_fields` makes every kind of toy field, and refuses what it cannot make."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from click.testing import CliRunner

from toy_fields.cli import cli
from toy_fields.closed_form.layout import divergence
from toy_fields.errors import ToyRequestError

SMALL = ["--nx", "16", "--ny", "16", "--nz", "8"]


def run(*arguments: str) -> None:
    outcome = CliRunner().invoke(cli, list(arguments), catch_exceptions=False)
    assert outcome.exit_code == 0, outcome.output


def test_help_names_every_command() -> None:
    text = CliRunner().invoke(cli, ["--help"]).output
    for command in ("solve", "closed-form", "random", "record", "checksums"):
        assert command in text
        assert CliRunner().invoke(cli, [command, "--help"]).exit_code == 0


@pytest.mark.parametrize("flow", ["roll", "cellular", "lines", "abc", "rotation", "strain", "shear"])
def test_closed_form(flow: str, tmp_path: Path) -> None:
    out = tmp_path / f"{flow}.nc"
    run("closed-form", flow, *SMALL, "--out", str(out), "--arrangement", "staggered")
    with xr.open_dataset(out) as fields:
        assert fields["u"].dims == ("time", "z", "y", "x_face")
        assert f"closed-form {flow}" in fields.attrs["command"]
        if flow in ("roll", "cellular", "lines"):
            scale = np.abs(np.diff(fields["w"].values, axis=1)).max()
            assert np.abs(divergence(fields)).max() < 1e-13 * scale


def test_settings_of_a_flow(tmp_path: Path) -> None:
    out = tmp_path / "lines.zarr"
    run("closed-form", "lines", *SMALL, "--out", str(out), "--set", "waves_x=2", "--set", "vertical_amplitude=0.1",
        "--times", "0,30", "--continuum")
    with xr.open_zarr(out, consolidated=False) as fields:
        assert fields.attrs["flow_waves_x"] == 2 and fields.sizes["time"] == 2
        assert "--set waves_x=2 --set vertical_amplitude=0.1" in fields.attrs["command"]
        # variance W² / 2 at mid depth
        assert float(fields["w"][0, 4].var()) == pytest.approx(0.5 * 0.1**2, rel=1e-6)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["closed-form", "roll", "--set", "jets=1"], "NAME=VALUE with one of vertical_amplitude"),
        (["closed-form", "lines", "--set", "waves_x=1.5"], "whole number"),
        (["closed-form", "roll", "--set", "wavelength=70"], "2.857 waves in the box"),
        (["closed-form", "roll", "--times", "now"], "--times"),
        (["random", "--spacing", "300"], "spacing"),
    ],
)
def test_refusals(arguments: list[str], words: str, tmp_path: Path) -> None:
    with pytest.raises(ToyRequestError, match=words):
        CliRunner().invoke(cli, [*arguments, "--out", str(tmp_path / "x.nc")], catch_exceptions=False)
    assert list(tmp_path.iterdir()) == []


def test_format_must_be_plain(tmp_path: Path) -> None:
    with pytest.raises(ToyRequestError, match=r"\.nc or \.zarr"):
        CliRunner().invoke(cli, ["random", *SMALL, "--out", str(tmp_path / "x.dat")], catch_exceptions=False)


def test_random(tmp_path: Path) -> None:
    out = tmp_path / "random.nc"
    run("random", *SMALL, "--out", str(out), "--times", "0,600", "--tracer", "0.5", "--seed", "3")
    with xr.open_dataset(out) as fields:
        assert fields["u"].values.var(axis=(1, 2, 3)) == pytest.approx([3e-5, 3e-5], rel=1e-4)
        assert set(fields.data_vars) == {"u", "v", "w", "tracer_streaks"}
