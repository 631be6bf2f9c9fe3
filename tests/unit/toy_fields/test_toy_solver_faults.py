"""Requests the solver must refuse, each with a message that says what to do; NaN is never written."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from toy_fields.cases import case, changed
from toy_fields.errors import (
    FieldsNotFinite,
    GridError,
    ToyRequestError,
    UnresolvedStokesDepth,
    UnstableTimeStep,
)
from toy_fields.solver.forcing import Forcing, Ramp
from toy_fields.solver.grid import Grid
from toy_fields.solver.output import dataset
from toy_fields.solver.run import run, snapshot, start
from toy_fields.store import check_target, write_store

SMALL = {"nx": 12, "ny": 12, "nz": 24, "output_times": (60.0,)}


@pytest.mark.parametrize(("name", "value"), [("nx", 15), ("ny", 13), ("nx", 4), ("nz", 2)])
def test_odd_and_tiny_sizes(name: str, value: int) -> None:
    sizes = {"nx": 16, "ny": 16, "nz": 16} | {name: value}
    with pytest.raises(GridError, match=f"{name} = {value}.*use"):
        Grid(**sizes, length_x=10.0, length_y=10.0, depth=10.0)


def test_lengths() -> None:
    with pytest.raises(GridError, match="length_x"):
        Grid(8, 8, 8, -1.0, 10.0, 10.0)


def test_unresolved_stokes_depth_says_how_many_levels() -> None:
    # decay depth 1 / (2 k) = 0.5 m in levels of 2.5 m; three levels per decay depth in 60 m are 360
    with pytest.raises(UnresolvedStokesDepth, match="nz = 360"):
        changed(case("langmuir"), {"nz": 24, "stokes_wavenumber": 1.0})


def test_waves_need_a_wavenumber() -> None:
    with pytest.raises(ToyRequestError, match="wavenumber"):
        Forcing(surface_stokes_drift=Ramp.constant(0.05))


def test_fixed_time_step_beyond_the_limit() -> None:
    small = changed(case("langmuir"), {**SMALL, "time_step": 5000.0})
    with pytest.raises(UnstableTimeStep, match=r"5000 s.*the limit is.*leave the time step out"):
        list(run(small))


def test_courant_beyond_the_limit() -> None:
    with pytest.raises(UnstableTimeStep, match=r"0\.83"):
        start(changed(case("langmuir"), {**SMALL, "courant": 0.9}))


@pytest.mark.parametrize("name", ["u", "w", "theta"])
def test_a_value_that_is_not_finite_stops_the_run(name: str) -> None:
    stepper = start(changed(case("langmuir"), SMALL))
    getattr(stepper.state, name)[5, 1, 1] = np.nan
    with pytest.raises(FieldsNotFinite):
        for _ in range(3):
            stepper.step(10.0)
        snapshot(stepper, 16.0)


def test_nothing_is_written_with_nan(tmp_path: Path) -> None:
    small = changed(case("langmuir"), SMALL)
    fields = dataset(small, list(run(small)))
    fields["u"][0, 0, 0, 0] = np.nan
    with pytest.raises(FieldsNotFinite):
        write_store(fields, tmp_path / "a.zarr")
    assert list(tmp_path.iterdir()) == []


def test_an_existing_store_is_kept(tmp_path: Path) -> None:
    (tmp_path / "a.zarr").mkdir()
    small = changed(case("langmuir"), SMALL)
    with pytest.raises(ToyRequestError, match="--replace"):
        write_store(dataset(small, list(run(small))), tmp_path / "a.zarr")


def test_a_folder_that_is_no_store_is_never_removed(tmp_path: Path) -> None:
    (tmp_path / "thesis.zarr").mkdir()
    (tmp_path / "thesis.zarr" / "chapter.txt").write_text("text")
    with pytest.raises(ToyRequestError, match="no zarr store"):
        check_target(tmp_path / "thesis.zarr", replace=True)
    assert (tmp_path / "thesis.zarr" / "chapter.txt").exists()


@pytest.mark.parametrize(
    ("times", "values"), [((0.0, 0.0), (1.0, 2.0)), ((0.0,), (1.0, 2.0)), ((), ()), ((0.0,), (float("nan"),))]
)
def test_ramps_must_make_sense(times: tuple[float, ...], values: tuple[float, ...]) -> None:
    with pytest.raises(ToyRequestError, match="ramp"):
        Ramp(times, values)


def test_unknown_case_and_setting() -> None:
    with pytest.raises(ToyRequestError, match="langmuir, shear, convective"):
        case("calm")
    with pytest.raises(ToyRequestError, match="wind_speed"):
        changed(case("shear"), {"wind_speed": 10.0})


def test_mixed_layer_deeper_than_the_box() -> None:
    with pytest.raises(ToyRequestError, match="mixed_layer_depth"):
        start(changed(case("langmuir"), {**SMALL, "mixed_layer_depth": 90.0}))


def test_output_times_must_increase() -> None:
    with pytest.raises(ToyRequestError, match="output_times"):
        changed(case("langmuir"), {**SMALL, "output_times": (60.0, 30.0)})
