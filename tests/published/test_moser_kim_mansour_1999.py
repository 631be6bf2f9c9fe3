"""Plane channel flow, Re_tau 395 (Moser, Kim & Mansour 1999, Phys. Fluids 11, 943): a shear flow whose ordering is known.

Their y is wall-normal, z spanwise: R_uu is along, R_ww across, R_vv normal to the wall (our vertical).
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from lespost.profiles.windows import Window
from lespost.regime.anisotropy import anisotropy, tensor
from lespost.regime.classify import classify
from lespost.regime.settings import RegimeSettings
from tests.unit.regime.toy_profiles import Truth, make_forcing, make_profiles


@pytest.fixture(scope="module")
def stresses(shared: Path) -> pd.DataFrame:
    names = ["y", "y_plus", "uu", "vv", "ww", "uv", "uw", "vw"]
    return pd.read_csv(shared / "data" / "channel_dns" / "chan395.reystress", comment="#", sep=r"\s+", names=names)


@pytest.fixture(scope="module")
def means(shared: Path) -> pd.DataFrame:
    names = ["y", "y_plus", "U", "dUdy", "W", "dWdy", "P"]
    return pd.read_csv(shared / "data" / "channel_dns" / "chan395.means", comment="#", sep=r"\s+", names=names)


def test_the_data_close_their_own_momentum_budget(stresses: pd.DataFrame, means: pd.DataFrame) -> None:
    """Total stress is 1 - y: viscous dU/dy / Re plus -R_uv (exact for a steady channel), which also fixes columns and signs."""
    total = means["dUdy"] / 392.24 - stresses["uv"]
    np.testing.assert_allclose(total, 1.0 - stresses["y"], atol=0.012)


def test_every_level_of_the_inner_flow_is_ordered_as_shear(stresses: pd.DataFrame) -> None:
    inner = stresses[(stresses["y_plus"] > 5) & (stresses["y"] < 0.7)]
    assert (inner["uu"] > inner["ww"]).all() and (inner["ww"] > inner["vv"]).all()


def test_peak_of_the_streamwise_intensity(stresses: pd.DataFrame) -> None:
    """u'_rms peaks at about 2.7 u_tau near y+ = 15 (common practice, no source; MKM print 2.74 for this run, from memory)."""
    peak = stresses.loc[stresses["uu"].idxmax()]
    assert np.sqrt(peak["uu"]) == pytest.approx(2.74, rel=0.01)
    assert 12 < peak["y_plus"] < 18


def test_near_wall_turbulence_is_two_component(stresses: pd.DataFrame) -> None:
    """The wall takes the normal component away first: C3 -> 0 at the wall, growing towards the centre."""
    found = anisotropy(tensor(stresses["uu"].to_numpy(), stresses["ww"].to_numpy(), stresses["vv"].to_numpy(),
                              stresses["uw"].to_numpy(), stresses["uv"].to_numpy(), stresses["vw"].to_numpy()))
    wall = (stresses["y_plus"] > 0.05) & (stresses["y_plus"] < 1)
    assert float(np.max(found.isotropic[wall])) < 0.02
    assert float(found.isotropic[-1]) > 0.5


def test_the_classifier_calls_it_shear(stresses: pd.DataFrame) -> None:
    """Channel variances put on a layer of depth h = half-width, with sampling scatter of 10 % per tile."""
    truth = Truth(scatter=0.1, shear=1e-7, stokes=0.0, buoyancy=0.0, coherent=False)
    profiles = make_profiles(truth, np.random.default_rng(0))
    height = -profiles["z"].values / 40.0  # wall at the surface, centre at the layer depth of the toy profiles
    levels = {name: np.interp(height, stresses["y"], stresses[theirs]) for name, theirs in (("uu", "uu"), ("vv", "ww"), ("ww", "vv"))}
    profiles = _scaled(profiles, levels, 3.7e-5)
    row = classify(profiles, make_forcing(truth, us0=0.0), [Window("channel", 0.0, 6000.0)],
                   RegimeSettings(bootstrap_samples=500)).iloc[0]
    assert row["regime"] == "shear"
    assert row["p_shear"] > 0.95
    assert row["forcing_regime"] == "shear"


def _scaled(profiles: xr.Dataset, levels: dict[str, np.ndarray], stress: float) -> xr.Dataset:
    out = profiles.copy()
    for name, values in levels.items():
        noise = profiles[f"{name}_tile"].values / profiles[f"{name}_tile"].values.mean()
        tiles = stress * values[None, :, None, None] * noise
        out[f"{name}_tile"] = profiles[f"{name}_tile"].copy(data=tiles)
        out[name] = profiles[name].copy(data=tiles.mean((-2, -1)))
    out["uv_tile"] = 0.0 * profiles["uv_tile"]
    out["uv"] = 0.0 * profiles["uv"]
    return out
