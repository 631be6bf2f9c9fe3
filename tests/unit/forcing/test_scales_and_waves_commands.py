"""`lespost scales` and `lespost waves`: exact keys, known numbers, unknown as null, impossible requests refused."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from click.testing import CliRunner
from hypothesis import given
from hypothesis import strategies as st

from lespost.cli import run
from lespost.cli.scales import command as scales_command
from lespost.cli.waves import command as waves_command
from lespost.errors import RequestError
from lespost.forcing.one_forcing import one_forcing

KEYS = ("ustar, b0, wstar, us0, la_t, la_sl, la_proj, alpha_deg, hoenikker, h_over_l_langmuir, obukhov, dissipation_shear, "
        "dissipation_langmuir, dissipation_convective, forcing_regime, conventions").split(", ")
EXAMPLE = ["--ustar", "0.0061", "--us0", "0.068", "--decay-wavenumber", "0.1047", "--depth", "33"]


def scales_json(*options: str) -> dict[str, Any]:
    done = CliRunner().invoke(scales_command, [*options, "--json"], catch_exceptions=False)
    found: dict[str, Any] = json.loads(done.output)
    return found


def test_example_has_exactly_the_keys_and_the_numbers() -> None:
    found = scales_json(*EXAMPLE)
    assert list(found) == KEYS
    assert found["la_t"] == pytest.approx(np.sqrt(0.0061 / 0.068), rel=1e-12)  # definition
    reach = 0.4 * 0.1047 * 33
    assert found["la_sl"] == pytest.approx(np.sqrt(0.0061 / (0.068 * -np.expm1(-reach) / reach)), rel=1e-12)  # closed form
    assert found["la_proj"] == found["la_t"]
    assert (found["alpha_deg"], found["b0"], found["hoenikker"]) == (0.0, 0.0, 0.0)
    assert found["wstar"] is None and found["obukhov"] is None
    assert found["forcing_regime"] == "langmuir"
    assert isinstance(found["conventions"], dict)


def test_cooling_fills_the_convective_numbers() -> None:
    found = scales_json(*EXAMPLE, "--heat", "-100")
    b0 = 9.81 * 2.137232503e-4 * 100 / (1025 * 3991.86795711963)  # TEOS-10 at 15 degC, 35 g/kg
    assert found["b0"] == pytest.approx(b0, rel=1e-8)
    assert found["wstar"] == pytest.approx((b0 * 33) ** (1 / 3), rel=1e-8)
    assert found["obukhov"] == pytest.approx(-(0.0061**3) / (0.4 * b0), rel=1e-8)
    assert found["hoenikker"] == pytest.approx(4 * b0 / (2 * 0.1047) / (0.068 * 0.0061**2), rel=1e-8)
    assert found["h_over_l_langmuir"] == pytest.approx(b0 * 33 / (0.0061**2 * 0.068), rel=1e-8)
    assert scales_json(*EXAMPLE, "--heat", "100")["wstar"] is None


def test_reference_drift_is_named_and_used() -> None:
    found = scales_json(*EXAMPLE, "--la-sl-reference", "base")
    assert found["la_sl"] > scales_json(*EXAMPLE)["la_sl"]
    assert "base" in found["conventions"]["la_sl"]


def test_misaligned_waves_use_the_height_of_the_equivalent_wave() -> None:
    found = scales_json(*EXAMPLE, "--angle", "45")
    amplitude = np.sqrt(0.068 / (np.sqrt(9.81 * 0.1047) * 0.1047))
    assert f"{2 * amplitude:.4g} m, trough to crest" in found["conventions"]["wave_height"]
    assert found["alpha_deg"] == pytest.approx(33.33714, abs=0.02)  # Van Roekel et al. 2012 with H_s 1.6 m; here 1.601 m
    stated = scales_json(*EXAMPLE, "--angle", "45", "--wave-height", "1.6")
    assert stated["alpha_deg"] == pytest.approx(33.33714, abs=1e-4)
    assert stated["la_proj"] == pytest.approx(0.2766312, rel=1e-5)
    opposite = scales_json(*EXAMPLE, "--angle", "135", "--wave-height", "1.6")
    assert opposite["alpha_deg"] == pytest.approx(115.63142, abs=1e-4)


def test_waves_not_given_are_unknown_and_no_waves_is_zero() -> None:
    unknown = scales_json("--ustar", "0.01", "--depth", "50")
    assert unknown["us0"] is None and unknown["la_t"] is None and unknown["forcing_regime"] == "undetermined"
    none = scales_json("--ustar", "0.01", "--depth", "50", "--no-waves")
    assert none["us0"] == 0 and none["la_t"] is None
    assert (none["dissipation_shear"], none["dissipation_langmuir"], none["forcing_regime"]) == (2.0, 0.0, "shear")


def test_numbers_that_need_no_decay_or_depth_are_given_without() -> None:
    found = scales_json("--ustar", "0.0061", "--us0", "0.068")
    assert found["la_t"] == pytest.approx(0.29950940)
    assert found["la_sl"] is None
    assert found["dissipation_convective"] == 0.0 and found["forcing_regime"] == "langmuir"


def test_wave_of_an_amplitude_and_of_a_height() -> None:
    amplitude = scales_json("--ustar", "0.0061", "--amplitude", "0.8", "--wavelength", "60", "--gravity", "9.80665")
    assert amplitude["us0"] == pytest.approx(0.06791774, rel=1e-6)  # McWilliams et al. 1997
    height = scales_json("--ustar", "0.0061", "--wave-height", str(0.8 * 2 * np.sqrt(2)), "--wavelength", "60", "--gravity", "9.80665")
    assert height["us0"] == pytest.approx(0.06791774, rel=1e-6)  # equal variance


def test_stress_and_wind_with_units() -> None:
    assert scales_json("--stress", "0.1")["ustar"] == pytest.approx(9.877296e-3, rel=1e-6)
    assert scales_json("--stress", "100 mPa")["ustar"] == pytest.approx(9.877296e-3, rel=1e-6)
    assert scales_json("--wind", "10 kt")["ustar"] == pytest.approx(scales_json("--wind", str(10 * 1852 / 3600))["ustar"], rel=1e-12)
    assert scales_json("--wind", "10", "--bulk-formula", "large_pond_1981")["ustar"] == pytest.approx(np.sqrt(1.22 * 0.12 / 1025))


@given(turn=st.floats(-134, 134), ustar=st.floats(1e-3, 0.05), us0=st.floats(1e-3, 0.5))
def test_mirrored_waves_mirror_the_axis_only(turn: float, ustar: float, us0: float) -> None:
    numbers = {"friction_velocity": ustar, "surface_speed": us0, "wavelength": 60.0, "mixed_layer_depth": 40.0, "wave_height": 1.5}
    one, other = (one_forcing({**numbers, "direction": angle}).scales for angle in (turn, -turn))
    assert other.alpha_deg == pytest.approx(-one.alpha_deg, abs=1e-9)
    for name in ("la_t", "la_sl", "la_proj", "us0"):
        assert getattr(other, name) == pytest.approx(getattr(one, name), rel=1e-9)


@pytest.mark.parametrize(("options", "word"), [
    (["--ustar", "0.01", "--wind", "8"], "--wind"), (["--stress", "0.1", "--wind", "8"], "--stress"), (["--ustar", "0.1"], "hurricane"),
    (["--ustar", "0.01", "--depth", "-3"], "--depth"), (["--ustar", "-0.01"], "--ustar"), (["--wind", "fast"], "--wind"),
    (["--depth", "3 kg", "--ustar", "0.01"], "--depth"), (["--amplitude", "1"], "--wavelength"), (["--wavelength", "60"], "--us0"),
    (["--us0", "0.1", "--no-waves"], "--no-waves"), (["--us0", "0.1", "--amplitude", "1", "--wavelength", "60"], "--amplitude"),
    (["--ustar", "0.01", "--latitude", "100"], "--latitude"), (["--ustar", "nan"], "--ustar"), (["--us0", "0"], ""),
])
def test_impossible_requests(options: list[str], word: str) -> None:
    if not word:  # no drift is a statement, not an error
        assert scales_json(*options)["us0"] == 0
        return
    done = CliRunner().invoke(scales_command, options)
    assert isinstance(done.exception, RequestError)
    assert word in str(done.exception)
    assert "\n" not in str(done.exception)


def test_exit_code_and_paragraph(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["scales", "--ustar", "0.5"]) == 2
    assert capsys.readouterr().err.startswith("lespost: --ustar")
    assert run(["waves", "absent.csv"]) == 3
    assert "no such file" in capsys.readouterr().err


def test_text_form_shows_unknowns_as_dashes_and_rotation_with_latitude_only() -> None:
    text = CliRunner().invoke(scales_command, EXAMPLE).output
    rows = {line.split()[0]: line.split() for line in text.splitlines()}
    assert rows["wstar"][1] == "-" and rows["la_t"][1] == "0.29951"
    assert "inertial" not in text
    turning = CliRunner().invoke(scales_command, [*EXAMPLE, "--latitude", "45"]).output
    assert any(line.split()[:3] == ["inertial", "period", "16.924"] for line in turning.splitlines())
    assert "Ekman scale" in turning


@pytest.fixture
def sea(tmp_path: Path) -> Path:
    from lespost.forcing.wave_models import pierson_moskowitz

    frequency = np.linspace(0.02, 0.5, 2001)
    lines = [f"{f:.9f},{e:.9e}" for f, e in zip(frequency, pierson_moskowitz(frequency, 0.1, gravity=9.80665), strict=True)]
    path = tmp_path / "sea.csv"
    path.write_text("f (Hz),E (m2/Hz)\n" + "\n".join(lines) + "\n")
    return path


def waves_json(*options: str | Path) -> dict[str, Any]:
    done = CliRunner().invoke(waves_command, [*map(str, options), "--json"], catch_exceptions=False)
    found: dict[str, Any] = json.loads(done.output)
    return found


def test_waves_of_a_fully_developed_sea(sea: Path) -> None:
    found = waves_json(sea, "--gravity", "9.80665")
    assert list(found) == ["us0", "transport", "decay_scale", "hs", "fp", "tail_fraction"]
    assert found["us0"] == pytest.approx(0.2166643, rel=1e-4)  # derived; Breivik et al. 2014 for the tail
    assert found["tail_fraction"] == pytest.approx(0.0504681 / 0.2166643, rel=1e-4)
    assert found["decay_scale"] == pytest.approx(found["transport"] / found["us0"], rel=1e-12)
    assert found["fp"] == pytest.approx(0.1, abs=2.5e-4)
    cut = waves_json(sea, "--no-tail", "--gravity", "9.80665", "--depths", "0,1,5")
    assert cut["us0"] == pytest.approx(0.1661962, rel=1e-4)  # derived
    assert cut["tail_fraction"] == 0
    assert [row["depth"] for row in cut["profile"]] == [0, 1, 5]
    assert cut["profile"][1]["speed"] == pytest.approx(0.1139777, rel=1e-4)  # derived
    assert cut["profile"][1]["v"] == 0


def test_waves_in_shallow_water_and_as_text(sea: Path) -> None:
    assert waves_json(sea, "--water-depth", "10")["us0"] > waves_json(sea)["us0"]
    text = CliRunner().invoke(waves_command, [str(sea), "--depths", "0, 3 m"]).output
    assert "m s-1" in text and "depth [m]" in text and "0.5 Hz" in text
    for options in (["--depths", "-1"], ["--depths", "deep"], ["--water-depth", "-3"], ["--water-depth", "5", "--depths", "6"]):
        assert isinstance(CliRunner().invoke(waves_command, [str(sea), *options]).exception, RequestError)
