"""Waves by compass, from the wind alone, from stored profiles; spectra whose units leave a factor of 2 pi open."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr
from pydantic import ValidationError

from lespost.errors import DataError, RecipeError
from lespost.findings import Hint
from lespost.forcing.resolve import resolve_forcing
from lespost.forcing.settings import ForcingSettings, StokesSettings
from lespost.forcing.spectrum import summary
from lespost.forcing.spectrum_files import read_spectrum
from lespost.forcing.stokes import exponential_cell_means

FACES = -50.0 + np.arange(41) * 1.25
CENTRES = 0.5 * (FACES[1:] + FACES[:-1])


def resolve(forcing: dict[str, Any], stokes: dict[str, Any], hints: dict[str, Hint] | None = None) -> xr.Dataset:
    return resolve_forcing(ForcingSettings(**forcing), StokesSettings(**stokes), hints or {}, np.zeros(1), CENTRES, FACES)


@pytest.mark.parametrize(
    ("coming_from", "bearing", "towards"), [(270.0, 90.0, 0.0), (180.0, 90.0, 90.0), (270.0, 0.0, -90.0), (90.0, 90.0, 180.0)]
)
def test_waves_by_compass(coming_from: float, bearing: float, towards: float) -> None:
    # westerly swell runs east, which is +x where +x bears 90 degrees, and -y where +x points north
    waves = {"surface_speed": 0.1, "wavelength": 60.0, "waves_from_compass": coming_from}
    found = resolve({"friction_velocity": 0.01, "x_axis_compass_bearing": bearing}, waves)
    turned = np.degrees(np.arctan2(found["stokes_v"].values, found["stokes_u"].values))
    assert np.exp(1j * np.radians(turned)) == pytest.approx(np.full(turned.shape, np.exp(1j * np.radians(towards))), abs=1e-12)


def test_waves_by_compass_need_to_know_where_x_points() -> None:
    with pytest.raises(RecipeError, match="x_axis_compass_bearing"):
        resolve({"friction_velocity": 0.01}, {"surface_speed": 0.1, "wavelength": 60.0, "waves_from_compass": 270.0})


@pytest.mark.parametrize("word", ["NW", "nnw", "S"])
def test_a_compass_word_is_refused_with_its_number(word: str) -> None:
    number = {"NW": "315", "nnw": "337.5", "S": "180"}[word]
    for kind, key in ((StokesSettings, "direction"), (ForcingSettings, "stress_direction")):
        with pytest.raises(ValidationError, match=f"_from_compass = {number}"):
            kind(**{key: word})


def test_a_fully_developed_sea_from_the_wind() -> None:
    # Pierson & Moskowitz 1964, integrated in closed form: (alpha g / pi) Gamma(5/4) / (1.25^(1/4) f_p), Gamma(5/4) 0.9064025
    peak = 0.877 * 9.81 / (2 * np.pi * 1.075 * 10.0)
    us0 = 0.0081 * 9.81 / np.pi * 0.9064024771 / (1.25**0.25 * peak)
    found = resolve({"wind_speed": 10.0}, {"kind": "pierson_moskowitz"})
    assert float(found["us0"][0]) == pytest.approx(us0, rel=1e-4)
    # H_s = 4 (alpha g² / (5 (2 pi f_p)^4))^(1/2)
    height = 4 * np.sqrt(0.0081 * 9.81**2 / 5) / (2 * np.pi * peak) ** 2
    assert float(found["significant_wave_height"][0]) == pytest.approx(height, rel=1e-4)
    # all waves in one direction drift more than with the losses of spreading (Li et al. 2017), by less than a factor of two
    spread = resolve({"wind_speed": 10.0}, {"kind": "theory_wave"})
    assert 1.0 < float(found["us0"][0] / spread["us0"][0]) < 2.0
    with pytest.raises(RecipeError, match=r"pierson_moskowitz.*wind_speed"):
        resolve({"friction_velocity": 0.01}, {"kind": "pierson_moskowitz"})


def test_stored_cell_means_of_an_exponential_give_its_surface_value() -> None:
    # trap: the uppermost cell mean, or a straight line through two of them, is short of the surface drift
    k = 0.105
    stored = {"stokes_profile_u": Hint(exponential_cell_means(FACES, 0.068, k), "m s-1", 'variable "us"', ("z",))}
    found = resolve({"friction_velocity": 0.006}, {}, stored)
    assert float(found["us0"][0]) == pytest.approx(0.068, rel=1e-9)
    assert float(found["stokes_direction"][0]) == 0.0
    np.testing.assert_allclose(found["stokes_u"].values[0], exponential_cell_means(FACES, 0.068, k), rtol=1e-12)


def test_what_the_recipe_overrules_is_on_record() -> None:
    stated = {"friction_velocity": Hint(0.006, "m s-1", 'attribute "ustar"')}
    found = resolve({"friction_velocity": 0.012}, {"kind": "none"}, stated)
    entry = next(item for item in json.loads(found.attrs["decisions"]) if item["subject"] == "friction velocity")
    assert 'the files say 0.006 m s-1 (attribute "ustar")' in entry["evidence"]
    same = resolve({"friction_velocity": 0.006}, {"kind": "none"}, stated)
    entry = next(item for item in json.loads(same.attrs["decisions"]) if item["subject"] == "friction velocity")
    assert "the files say" not in entry["evidence"]


@pytest.mark.parametrize(
    ("header", "density_factor"),
    [("f [Hz],E [m2/Hz]", 1.0), ("omega [rad/s],S [m2 s rad-1]", 1 / (2 * np.pi)), ("omega [rad s-1],E [m2/Hz]", 1.0)],
)
def test_a_spectrum_over_frequency_or_angular_frequency(tmp_path: Path, header: str, density_factor: float) -> None:
    f = np.linspace(0.05, 0.5, 46)
    density = f**-5 * np.exp(-1.25 * (0.1 / f) ** 4) * 1e-5
    axis = 2 * np.pi * f if "rad" in header.split(",")[0] else f
    path = tmp_path / "sea.csv"
    rows = zip(axis.tolist(), (density * density_factor).tolist(), strict=True)
    path.write_text("\n".join([header, *(f"{a!r},{b!r}" for a, b in rows)]))
    found = summary(read_spectrum(path))
    assert found.hs == pytest.approx(4 * np.sqrt(np.trapezoid(density, f)), rel=1e-9)
    assert found.fp == pytest.approx(0.1, rel=1e-9)


def test_a_density_that_may_be_per_radian_or_per_hertz_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "sea.csv"
    path.write_text("omega [rad/s],S [m2 s]\n0.3,1\n0.6,2\n1.2,0.5\n")
    with pytest.raises(DataError, match=r"factor of 6\.28"):
        read_spectrum(path)


def test_a_spectrum_over_period_is_refused_with_the_conversion(tmp_path: Path) -> None:
    path = tmp_path / "sea.csv"
    path.write_text("period [s],E [m2/Hz]\n10,1\n5,2\n2,0.5\n")
    with pytest.raises(DataError, match="holds periods"):
        read_spectrum(path)
