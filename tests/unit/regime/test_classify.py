"""The classifier on prescribed variances: it names what is there, and says when it cannot.

The orderings are the published ones (Li, Garrett & Skyllingstad 2005); everything else follows by construction.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from lespost.profiles.windows import Window
from lespost.regime.anisotropy import anisotropy_profiles
from lespost.regime.classify import COLUMNS, classify, production_regime
from lespost.regime.orderings import UNEQUAL_RATIO
from lespost.regime.settings import RegimeSettings
from tests.unit.regime.toy_profiles import Truth, make_forcing, make_profiles

QUICK = RegimeSettings(bootstrap_samples=400)
SHEAR = {"along": 3e-4, "cross": 2e-4, "vertical": 1e-4, "shear": 1e-7, "stokes": 0.0}


def upper(truth: Truth, seed: int = 0, settings: RegimeSettings = QUICK, **forcing: float) -> pd.Series:
    """The row of the upper mixed layer."""
    profiles = make_profiles(truth, np.random.default_rng(seed))
    window = Window("all", 0.0, 600.0 * truth.snapshots)
    return classify(profiles, make_forcing(truth, **forcing), [window], settings).iloc[0]


@pytest.mark.parametrize("angle", [0.0, 45.0, 120.0, -80.0])
def test_langmuir_turbulence_in_any_direction(angle: float) -> None:
    row = upper(Truth(angle=angle))
    assert row["regime"] == "langmuir"
    assert row["p_langmuir"] > 0.99
    assert row["axis_kind"] == "cell"
    assert (row["axis_deg"] - angle + 90.0) % 180.0 - 90.0 == pytest.approx(0.0, abs=1e-6)
    assert row["fraction_along"] == pytest.approx(0.2, abs=0.01)


def test_misaligned_cells_look_tied_in_wind_axes() -> None:
    """R(45°) diag(1, 2, 2) Rᵀ has equal horizontal variances (rotation, exact): wind axes cannot tell, the cell axis can."""
    truth = Truth(angle=45.0)
    in_wind = upper(truth, settings=RegimeSettings(frame="wind", bootstrap_samples=400), wind=0.0, waves=45.0)
    assert in_wind["fraction_along"] == pytest.approx(in_wind["fraction_cross"], abs=0.02)
    assert upper(truth, wind=0.0, waves=45.0)["regime"] == "langmuir"


def test_shear_turbulence() -> None:
    row = upper(Truth(**SHEAR), us0=0.0)
    assert row["regime"] == "shear"
    assert row["p_shear"] > 0.99
    assert row["forcing_regime"] == "shear"


def test_free_convection() -> None:
    """Variances 0.12, 0.12, 0.4 w*² (Deardorff 1974, from memory): vertical largest, no axis."""
    truth = Truth(along=1.2e-4, cross=1.2e-4, vertical=4e-4, shear=1e-10, stokes=0.0, buoyancy=1e-7, coherent=False)
    row = upper(truth, us0=0.0, b0=1e-7, ustar=0.001)
    assert row["regime"] == "convective"
    assert row["forcing_regime"] == "convective"
    assert row["wstar"] == pytest.approx((1e-7 * row["h"]) ** (1 / 3))


def test_convection_is_not_langmuir_where_waves_feed_little() -> None:
    """Equal horizontal variances below a largest vertical one, with both productions present: buoyancy's is the larger."""
    truth = Truth(along=1.2e-4, cross=1.22e-4, vertical=4e-4, stokes=1e-8, buoyancy=1e-7, coherent=False)
    assert upper(truth, b0=1e-7)["regime"] == "convective"


def test_isotropy_is_undetermined() -> None:
    row = upper(Truth(along=1e-4, cross=1e-4, vertical=1e-4, scatter=0.2))
    assert row["regime"] == "undetermined"
    assert "no ordering" in row["note"]


def test_opposing_swell_is_never_langmuir() -> None:
    row = upper(Truth(stokes=-1e-8), waves=180.0)
    assert row["p_langmuir"] == 0.0
    assert row["regime"] != "langmuir"
    assert "opposing" in row["note"]


def test_stable_heat_flux_leaves_convective_numbers_empty() -> None:
    row = upper(Truth(**SHEAR), b0=-1e-8)
    assert np.isnan(row["wstar"]) and np.isnan(row["hoenikker"])
    assert "-h/L" in row["note"]


def test_no_turbulence_gives_empty_cells() -> None:
    row = upper(Truth(along=0.0, cross=0.0, vertical=0.0))
    assert row["regime"] == "undetermined"
    for name in ("p_shear", "p_convective", "p_langmuir", "fraction_along", "fraction_cross", "fraction_vertical"):
        assert np.isnan(row[name]), name


def test_mixed_needs_both_witnesses_against_sure_variances() -> None:
    """Langmuir variances, but production and forcing both say shear."""
    both = upper(Truth(shear=1e-7, stokes=1e-9), us0=1e-4)
    assert both["regime"] == "mixed"
    assert "production and forcing say shear" in both["note"]
    one = upper(Truth(shear=1e-7, stokes=1e-9), us0=0.068)
    assert one["regime"] == "langmuir"


def test_between_convection_and_langmuir_is_mixed() -> None:
    """Vertical largest for sure, cross/along at the very limit that tells the two apart, both productions alike."""
    truth = Truth(along=2e-4, cross=2e-4 * UNEQUAL_RATIO, vertical=5e-4, stokes=1e-7, buoyancy=1e-7, scatter=0.3, coherent=False)
    rows = [upper(truth, seed=seed, b0=1e-7) for seed in range(12)]
    mixed = [row for row in rows if row["regime"] == "mixed"]
    assert len(mixed) >= 3
    for row in mixed:
        assert row["p_convective"] + row["p_langmuir"] >= QUICK.confidence
        assert "between convective" in row["note"]
    assert {row["regime"] for row in rows} <= {"mixed", "convective", "langmuir"}


def test_unknown_waves_leave_langmuir_numbers_empty_but_not_the_answer() -> None:
    row = upper(Truth(stokes=np.nan), us0=np.nan)
    assert np.isnan(row["la_t"]) and np.isnan(row["us0"])
    assert row["regime"] == "langmuir"
    assert row["forcing_regime"] == "undetermined"


def test_one_snapshot_is_said_to_be_one_realisation() -> None:
    row = upper(Truth(snapshots=1))
    assert row["regime"] == "langmuir"
    assert "one realisation" in row["note"]


def test_columns_bands_and_shares() -> None:
    truth = Truth()
    table = classify(make_profiles(truth, np.random.default_rng(1)), make_forcing(truth),
                     [Window("early", 0.0, 1200.0), Window("late", 1800.0, 3000.0)], QUICK)
    assert tuple(table.columns) == COLUMNS
    assert list(table["window"]) == ["early", "early", "late", "late"]
    assert (table["z_top"] > table["z_bottom"]).all()
    sums = table[["fraction_along", "fraction_cross", "fraction_vertical"]].sum(axis=1)
    np.testing.assert_allclose(sums, 1.0, atol=1e-12)


def test_turning_everything_changes_nothing_but_the_axis() -> None:
    truth = Truth(scatter=0.3)
    rows = [upper(Truth(scatter=0.3, angle=angle), seed=3) for angle in (0.0, 70.0)]
    for name in ("regime", "z_top", "la_t", "la_proj", "forcing_regime"):
        assert rows[0][name] == rows[1][name]
    for name in ("p_langmuir", "p_shear", "fraction_along", "fraction_cross", "fraction_vertical"):
        assert rows[0][name] == pytest.approx(rows[1][name], abs=1e-9)
    assert truth.angle == 0.0


def test_ties_are_seldom_called_and_clear_cases_are() -> None:
    """Two equal variances (cross = vertical do not matter, along = cross do): a sure Langmuir verdict must be rare.

    With along = cross exactly, the share of runs with p > 0.9 for either order is near 2 x 10 % if the probabilities are honest.
    """
    tied, clear = [], []
    for seed in range(150):
        tied.append(upper(Truth(along=2e-4, cross=2e-4, vertical=1e-4, stokes=0.0, scatter=0.5), seed=seed, us0=0.0)["p_shear"])
    for seed in range(30):
        clear.append(upper(Truth(**SHEAR, scatter=0.3), seed=seed, us0=0.0)["p_shear"])
    assert np.mean(np.array(tied) > 0.9) < 0.15
    assert np.mean(np.array(tied) < 0.1) < 0.15
    assert np.mean(np.array(clear) > 0.9) > 0.95


@pytest.mark.parametrize(
    ("shear", "stokes", "buoyancy", "regime"),
    [(1.0, 0.0, 0.0, "shear"), (0.1, 1.0, 0.0, "langmuir"), (0.1, -1.0, 1.0, "convective"), (1.0, 1.0, 0.0, "mixed"),
     (np.nan, 1.0, 0.0, ""), (0.0, 0.0, -1.0, "")],
)
def test_what_feeds_the_turbulence(shear: float, stokes: float, buoyancy: float, regime: str) -> None:
    assert production_regime({"shear": shear, "stokes": stokes, "buoyancy": buoyancy}) == regime


def test_anisotropy_goes_with_the_windows() -> None:
    """Langmuir-like variances 1 : 2 : 2 without covariances: weights 0, 0.4, 0.6 (exact)."""
    profiles = make_profiles(Truth(scatter=0.0), np.random.default_rng(0))
    profiles["uw"] = 0.0 * profiles["uw"]
    found = anisotropy_profiles(profiles)
    assert found["anisotropy_two_component"].dims == ("time", "z")
    np.testing.assert_allclose(found["anisotropy_one_component"].values, 0.0, atol=1e-12)
    np.testing.assert_allclose(found["anisotropy_two_component"].values, 0.4, atol=1e-12)
    np.testing.assert_allclose(found["anisotropy_isotropic"].values, 0.6, atol=1e-12)
