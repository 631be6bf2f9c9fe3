"""Two months of measured wind, stress, heat flux and Stokes drift: do the package's formulas give a sensible sea?

The expected ranges are common practice for mid-latitude autumn, no source, except where a line says otherwise.
"""

from __future__ import annotations

from datetime import datetime
from pathlib import Path

import numpy as np
import pytest

from lespost.forcing.langmuir import turbulent_langmuir_number
from lespost.forcing.scales import scales
from lespost.forcing.stress import drag_coefficient, friction_velocity, wind_stress


def _table(path: Path) -> tuple[np.ndarray, np.ndarray]:
    """(seconds since 1970, columns) of a table of date, time and numbers."""
    rows = [line.split() for line in path.read_text().splitlines() if line.strip() and not line.startswith("#")]
    stamps = np.array([datetime.fromisoformat(f"{row[0]} {row[1]}+00:00").timestamp() for row in rows])
    return stamps, np.array([[float(word) for word in row[2:]] for row in rows])


@pytest.fixture(scope="module")
def station(shared: Path) -> Path:
    folder = shared / "data" / "ocean_station"
    if not folder.is_dir():
        pytest.skip("no measured forcing beside this checkout")
    return folder


def test_bulk_stress_agrees_with_the_stress_of_the_file(station: Path) -> None:
    time, wind = _table(station / "u10.dat")
    stress_time, stress = _table(station / "momentum_flux.dat")
    assert np.array_equal(time, stress_time)
    speed, measured = np.hypot(*wind.T), np.hypot(*stress.T)
    blowing = speed > 4.0
    for formula in ("large_yeager_2009", "large_pond_1981", "coare_3_5"):
        ours = wind_stress(speed, formula)[blowing]  # type: ignore[arg-type]
        ratio = ours / measured[blowing]
        # air density and stability differ between the file and a neutral law; the laws themselves spread by a tenth
        assert 0.8 < np.median(ratio) < 1.25, formula
        assert np.corrcoef(np.log(ours), np.log(measured[blowing]))[0, 1] > 0.97, formula
    # and the drag of the file itself is that of the open sea
    implied = measured[blowing] / (1.22 * speed[blowing] ** 2)
    assert 0.8e-3 < np.median(implied) < 1.8e-3
    assert np.median(drag_coefficient(speed[blowing])) == pytest.approx(np.median(implied), rel=0.25)


def test_langmuir_numbers_of_a_wind_driven_sea(station: Path) -> None:
    time, stress = _table(station / "momentum_flux.dat")
    wave_time, drift = _table(station / "us_surface.dat")
    ustar = friction_velocity(np.hypot(*stress.T), 1025.0)
    us0 = np.hypot(*(np.interp(time, wave_time, part) for part in drift.T))
    assert 1e-3 < np.median(ustar) < 0.03
    assert ustar.max() < 0.06
    la_t = turbulent_langmuir_number(ustar, us0)
    known = np.isfinite(la_t)
    assert known.mean() > 0.95
    # fully developed seas have about 0.3 (Li, Garrett & Skyllingstad 2005); a buoy's last frequency hides part of the drift,
    # which only raises the number
    assert 0.25 < np.median(la_t[known]) < 0.5
    assert np.quantile(la_t[known], 0.9) < 1.0


def test_scales_of_every_hour_are_numbers_or_unknown(station: Path) -> None:
    _, stress = _table(station / "momentum_flux.dat")
    heat_time, heat = _table(station / "heat_flux.dat")
    wave_time, drift = _table(station / "us_surface.dat")
    ustar = friction_velocity(np.hypot(*stress.T), 1025.0)
    us0 = np.hypot(*(np.interp(heat_time, wave_time, part) for part in drift.T))
    regimes = set()
    for hour in range(0, ustar.size, 6):
        b0 = -9.81 * 1.9e-4 * heat[hour, 0] / (1025.0 * 3990.0)
        found = scales(
            friction_velocity=float(ustar[hour]), buoyancy_flux=b0, surface_stokes_drift=float(us0[hour]), stokes_depth=3.0,
            layer_depth=40.0,
        )
        assert (found.obukhov < 0) == (b0 > 0)
        assert np.isfinite(found.wstar) == (b0 > 0)
        regimes.add(found.forcing_regime)
    assert {"langmuir", "mixed"} <= regimes <= {"langmuir", "mixed", "convective", "shear"}
