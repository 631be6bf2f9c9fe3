"""What two months of measured forcing could separate: real stress and Stokes drift, velocities made with a known law."""

from __future__ import annotations

from datetime import datetime
from pathlib import Path

import numpy as np
import pytest

from lespost.forcing.stress import friction_velocity
from lespost.scaling.analyse import analyse
from lespost.scaling.laws import BUILT_IN, parse_law
from lespost.scaling.planner import plan
from lespost.scaling.settings import ScalingSettings
from lespost.scaling.table import ScaleTable
from tests.unit.scaling.storms import red_noise


def _columns(path: Path) -> tuple[np.ndarray, np.ndarray]:
    lines = [line.split() for line in path.read_text().splitlines() if line.strip() and not line.startswith("#")]
    stamps = np.array([datetime.fromisoformat(f"{line[0]} {line[1]}+00:00").timestamp() for line in lines])
    return stamps, np.array([[float(word) for word in line[2:]] for line in lines])


@pytest.fixture(scope="module")
def forcing(shared: Path) -> ScaleTable:
    folder = shared / "data" / "ocean_station"
    if not folder.is_dir():
        pytest.skip("no measured forcing beside this checkout")
    time, stress = _columns(folder / "momentum_flux.dat")
    wave_time, drift = _columns(folder / "us_surface.dat")
    ustar = friction_velocity(np.hypot(*stress.T), 1025.0)
    us0 = np.hypot(*(np.interp(time, wave_time, part) for part in drift.T))
    keep = (ustar > 2e-3) & (us0 > 5e-3)
    table = ScaleTable({"velocity": np.ones(time.size), "ustar": ustar, "us0": us0}, time=time - time[0])
    return table.rows(keep)


def test_such_a_record_separates_wind_from_waves_but_hardly_their_mixtures(forcing: ScaleTable) -> None:
    # scatter of a fifth and an integral time of one hour: a typical record, common practice, no source
    hours = {name: plan(BUILT_IN["us0"], BUILT_IN[name], forcing, 0.2, 3600.0).hours
             for name in ("ustar", "us0^1/2 ustar^1/2", "ustar^2/3 us0^1/3")}
    assert hours["ustar"] < hours["ustar^2/3 us0^1/3"] < hours["us0^1/2 ustar^1/2"] < 1456  # hours there are
    mixtures = plan(BUILT_IN["us0^1/2 ustar^1/2"], BUILT_IN["ustar^2/3 us0^1/3"], forcing, 0.2, 3600.0).hours
    assert mixtures > 4 * hours["us0^1/2 ustar^1/2"]
    # with fitted exponents the common rise of wind and waves hides more
    fitted = plan(BUILT_IN["us0"], BUILT_IN["ustar"], forcing, 0.2, 3600.0, free=True).hours
    assert fitted > hours["ustar"]


def test_a_year_of_such_forcing_tells_exponents_of_a_twentieth_apart(forcing: ScaleTable) -> None:
    # the same typical scatter; 8766 h in a year, 1456 h in the two months
    half = parse_law("us0^0.5 ustar^0.5")

    def hours(exponent: float) -> float:
        return plan(half, parse_law(f"us0^{exponent} ustar^{1 - exponent}"), forcing, 0.2, 3600.0).hours

    assert hours(0.45) < 8766 < hours(0.46)
    assert hours(0.37) < 1456 < hours(0.39)
    # derived: for small differences d the rows go as 1/d²
    assert hours(0.48) / hours(0.46) == pytest.approx(4.0, rel=0.01)


def test_true_law_is_found_in_velocities_made_with_it(forcing: ScaleTable) -> None:
    rng = np.random.default_rng(31)
    scatter = 0.2 * red_noise(rng, len(forcing), np.exp(-1.0))
    velocity = 0.6 * np.sqrt(forcing.columns["us0"] * forcing.columns["ustar"]) * np.exp(scatter)
    table = ScaleTable({**forcing.columns, "velocity": velocity}, time=forcing.time)
    found = analyse(table, ScalingSettings(laws=("us0", "ustar", "us0^1/2 ustar^1/2"), bootstrap_samples=150, permutations=150))
    assert found.fixed.standings[0].name == "us0^1/2 ustar^1/2"
    assert found.fixed.inseparable == ("us0^1/2 ustar^1/2",)
    truth = found.tested[2]
    assert truth.free.slope.low <= 1.0 <= truth.free.slope.high
    assert truth.fixed is not None
    assert truth.fixed.coefficient.low <= 0.6 <= truth.fixed.coefficient.high
    assert found.fixed.neff < len(table)
