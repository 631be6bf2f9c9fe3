"""Forcing from a table over time: interpolated to the snapshots, part of the recipe, refused where it contradicts itself."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr

from lespost.errors import DataError, LespostError, RecipeError
from lespost.findings import Hint
from lespost.forcing.resolve import resolve_forcing
from lespost.forcing.series import read_series
from lespost.forcing.settings import ForcingSettings, StokesSettings

TIME = np.array([0.0, 1800.0, 3600.0])
FACES = np.array([-40.0, -20.0, -8.0, -2.0, 0.0])
CENTRES = 0.5 * (FACES[1:] + FACES[:-1])


def table(folder: Path, text: str, name: str = "storm.csv") -> Path:
    path = folder / name
    path.write_text(text)
    return path


def resolve(folder: Path, forcing: dict[str, Any], stokes: dict[str, Any], hints: dict[str, Hint] | None = None) -> xr.Dataset:
    return resolve_forcing(ForcingSettings(**forcing), StokesSettings(**stokes), hints or {}, TIME, CENTRES, FACES, folder)


def test_a_table_is_interpolated_to_the_snapshots_in_its_own_units(tmp_path: Path) -> None:
    table(tmp_path, "time [h],stress [mPa],surface_heat_flux (W m-2)\n0,100,-50\n0.5,300,-150\n2,300,-150\n")
    found = resolve(tmp_path, {"series": "storm.csv", "thermal_expansion": 2e-4}, {"kind": "none"})
    assert found["friction_velocity"].values == pytest.approx(np.sqrt(np.array([0.1, 0.3, 0.3]) / 1025.0))
    flux = 9.81 * 2e-4 / (1025.0 * 3991.86795711963)  # g alpha / (rho c), closed form
    assert found["surface_buoyancy_flux"].values == pytest.approx(flux * np.array([50.0, 150.0, 150.0]))
    decisions = {item["subject"]: item for item in json.loads(found.attrs["decisions"])}
    assert decisions["stress"]["how"] == "recipe"
    assert "storm.csv" in decisions["stress"]["evidence"]


def test_directions_turn_the_short_way_round(tmp_path: Path) -> None:
    path = table(tmp_path, "time [s],stress_direction [degree]\n0,170\n3600,-170\n")
    found = read_series(path, TIME)["stress_direction"].value
    assert found[1] == pytest.approx(180.0)
    assert (found[0], found[2]) == pytest.approx((170.0, -170.0))
    opposite = table(tmp_path, "time [s],stress_direction [degree]\n0,0\n3600,180\n", "flip.csv")
    with pytest.raises(LespostError, match="180 degrees"):
        read_series(opposite, TIME)


def test_calendar_times_need_the_start_of_the_run(tmp_path: Path) -> None:
    text = "time,wind_speed [kt],stokes_surface_speed\n2026-01-01T06:00,10,0.05\n2026-01-01T08:00,20,0.15\n"
    table(tmp_path, text)
    with pytest.raises(RecipeError, match="series_start"):
        resolve(tmp_path, {"series": "storm.csv"}, {"wavelength": 60})
    found = resolve(tmp_path, {"series": "storm.csv", "series_start": "2026-01-01T07:00"}, {"wavelength": 60})
    assert found["us0"].values == pytest.approx([0.10, 0.125, 0.15])
    ratio = found["stokes_u"].values / found["us0"].values[:, None]
    assert ratio == pytest.approx(np.broadcast_to(ratio[0], ratio.shape))


def test_the_table_wins_over_the_files_whatever_form_they_use(tmp_path: Path) -> None:
    table(tmp_path, "time [s],wind_speed [m s-1]\n0,8\n3600,8\n")
    hints = {"friction_velocity": Hint(0.02, "m s-1", 'attribute "ustar"'), "stress": Hint(0.4, "N m-2", 'attribute "tau"')}
    found = resolve(tmp_path, {"series": "storm.csv"}, {"kind": "none"}, hints)
    scalar = resolve(tmp_path, {"wind_speed": 8.0}, {"kind": "none"}, hints)
    assert found["friction_velocity"].values == pytest.approx(scalar["friction_velocity"].values)


@pytest.mark.parametrize(
    ("forcing", "stokes", "word"),
    [
        ({"friction_velocity": 0.01}, {}, "friction_velocity"),
        ({"stress": 0.1}, {}, "stress"),
        ({}, {"surface_speed": 0.1, "wavelength": 60}, "stokes_surface_speed"),
    ],
)
def test_recipe_and_table_must_not_both_speak(tmp_path: Path, forcing: dict[str, Any], stokes: dict[str, Any], word: str) -> None:
    table(tmp_path, "time [s],wind_speed,stokes_surface_speed\n0,8,0.1\n3600,8,0.1\n")
    with pytest.raises(RecipeError, match=word):
        resolve(tmp_path, {"series": "storm.csv", **forcing}, stokes)


@pytest.mark.parametrize(
    ("text", "word"),
    [
        ("time [s],wind_speed\n0,8\n1800,8\n", "covers run times 0 to 1800"),
        ("time [s],wind_speed\n0,8\n0,9\n3600,8\n", "do not increase"),
        ("time [s],wind_speed\n0,8\n3600,fast\n", '"fast" is not a number'),
        ("time [s],wind_speed\n0,8\n3600,nan\n", "missing value"),
        ("time [s],wind_speed\n0,8\n3600\n", "row 3"),
        ("time [s],wind_sped\n0,8\n3600,8\n", "wind_sped"),
        ("time [s],wind_speed\n0,-8\n3600,8\n", "negative"),
        ("time [s],wind_speed [N m-2]\n0,8\n3600,8\n", "does not convert"),
        ("hour,wind_speed\n0,8\n3600,8\n", 'no column called "time'),
        ("time [s],wind_speed\n", "at least one row"),
        ("time [s],stress,stress\n0,1,1\n3600,1,1\n", "share a name"),
    ],
)
def test_a_damaged_table_is_refused_with_its_place(tmp_path: Path, text: str, word: str) -> None:
    path = table(tmp_path, text)
    with pytest.raises(DataError, match=word) as error:
        read_series(path, TIME)
    assert "storm.csv" in str(error.value)


def test_columns_that_say_the_same_thing_are_refused(tmp_path: Path) -> None:
    table(tmp_path, "time [s],wind_speed,stress\n0,8,0.1\n3600,8,0.1\n")
    with pytest.raises(RecipeError, match="say the same thing"):
        resolve(tmp_path, {"series": "storm.csv"}, {"kind": "none"})


def test_a_table_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(RecipeError, match="relative to the recipe"):
        resolve(tmp_path, {"series": "none.csv"}, {"kind": "none"})


def test_a_friction_velocity_that_is_a_stress_is_asked_about(tmp_path: Path) -> None:
    table(tmp_path, "time [s],friction_velocity\n0,0.1\n3600,0.1\n")
    with pytest.raises(RecipeError, match="stress in"):
        resolve(tmp_path, {"series": "storm.csv"}, {"kind": "none"})
