"""Levels expected of a layer: the published laws put together, each alone in its own limit."""

from __future__ import annotations

import json

import numpy as np
import pytest
from click.testing import CliRunner

from lespost.cli.scales import command
from lespost.forcing.expected import LAWS, UNITS, expected_levels
from lespost.forcing.scales import scales

# The sea of McWilliams, Sullivan & Moeng (1997): a 0.8 m, 60 m; stress 3.72e-5 m2 s-2; buoyancy flux 2.307e-8; layer 33 m.
SEA = scales(friction_velocity=np.sqrt(3.72e-5), buoyancy_flux=2.307e-8, surface_stokes_drift=0.06791774, stokes_depth=60 / (4 * np.pi),
             surface_layer_drift=0.03680123, layer_depth=33.0)


def test_the_reference_sea() -> None:
    found = expected_levels(SEA, 33.0)
    ustar = np.sqrt(3.72e-5)
    # Harcourt & D'Asaro 2008: 0.398 + 0.480 La_SL^(-4/3) at 0.4071033 (exponent from memory); about 1.99, derived
    assert (found.w_rms_langmuir / ustar) ** 2 == pytest.approx(1.99, abs=0.005)
    # Lenschow et al. 1980: layer mean 0.3141816 w*², derived from the printed profile
    assert (found.w_rms_convective / 9.131046e-3) ** 2 == pytest.approx(0.3141816, rel=1e-5)
    # Belcher et al. 2012: 3.7347486 u*³/h; Li & Fox-Kemper 2017: 1.1741186 u*³/h
    assert found.dissipation * 33.0 / ustar**3 == pytest.approx(3.7347486, rel=1e-5)
    assert found.entrainment_flux * 33.0 / ustar**3 == pytest.approx(-1.1741186, rel=1e-5)


def test_without_waves_the_laws_reach_their_own_limits() -> None:
    wall = scales(friction_velocity=0.01, buoyancy_flux=0.0, surface_stokes_drift=0.0, layer_depth=50.0)
    found = expected_levels(wall, 50.0)
    assert found.w_rms_langmuir == pytest.approx(0.01 * np.sqrt(0.640))  # Harcourt & D'Asaro 2008 at La_SL -> infinity
    assert found.entrainment_flux == pytest.approx(-0.17 * 1e-6 / 50.0)  # Li & Fox-Kemper 2017
    assert found.dissipation == pytest.approx(2e-6 / 50.0)  # Belcher et al. 2012
    assert np.isnan(found.w_rms_convective)


def test_unknown_scales_make_unknown_levels() -> None:
    found = expected_levels(scales(friction_velocity=0.01), np.nan)
    assert np.isnan(list(found.to_dict().values())).all()


def test_heating_adds_no_entrainment() -> None:
    numbers = {"friction_velocity": 0.01, "surface_stokes_drift": 0.0, "layer_depth": 50.0}
    neutral, heated = (expected_levels(scales(buoyancy_flux=b0, **numbers), 50.0) for b0 in (0.0, -1e-7))
    assert heated.entrainment_flux == neutral.entrainment_flux


def test_the_command_prints_them_with_law_and_unit() -> None:
    arguments = ["--ustar", "0.0061", "--us0", "0.068", "--decay-wavenumber", "0.1047", "--depth", "33", "--latitude", "45"]
    text = CliRunner().invoke(command, arguments, catch_exceptions=False).output
    for name in LAWS:
        line = next(line for line in text.splitlines() if line.startswith(f"expected {name}"))
        assert UNITS[name] in line and LAWS[name] in line
    also = json.loads(CliRunner().invoke(command, [*arguments, "--json"], catch_exceptions=False).output)["conventions"]["also"]
    assert also["inertial_period"] / 3600 == pytest.approx(16.924228, rel=1e-6)  # 2 pi / (2 omega sin 45), derived
    assert also["w_rms_convective"] is None
    assert also["entrainment_flux"] < 0
