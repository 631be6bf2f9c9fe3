"""Properties of sea water and the buoyancy flux: TEOS-10's own check values, and numbers that follow from its constants."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.constants import SPECIFIC_HEAT_TEOS10
from lespost.forcing.buoyancy import buoyancy_flux, salinity_flux, seawater_properties, temperature_flux
from lespost.forcing.scales import scales


@pytest.mark.parametrize(
    ("salinity", "temperature", "pressure", "expected"),
    # TEOS-10 check values of the thermal expansion coefficient with respect to conservative temperature (IOC, SCOR & IAPSO 2010).
    [(34.7118, 28.7856, 10, 0.324464211877393e-3), (34.8915, 28.4329, 50, 0.322610094680523e-3),
     (35.0256, 22.8103, 125, 0.281335030247435e-3), (34.8472, 10.2600, 250, 0.173529986885424e-3),
     (34.7366, 6.8863, 600, 0.146898108553385e-3), (34.7324, 4.4036, 1000, 0.130265123640082e-3)],
)
def test_thermal_expansion_reproduces_the_standards_check_values(salinity: float, temperature: float, pressure: float,
                                                                 expected: float) -> None:
    assert seawater_properties(salinity, temperature, pressure)[0] == pytest.approx(expected, rel=1e-9)


def test_properties_at_15_degrees_and_35_grams_per_kilogram() -> None:
    alpha, beta, density = seawater_properties(35.0, 15.0, 0.0)
    assert alpha == pytest.approx(2.137232503e-4, rel=1e-8)  # TEOS-10 through its reference implementation
    assert beta == pytest.approx(7.423720672e-4, rel=1e-8)  # the same
    assert density == pytest.approx(1025.847622, rel=1e-8)  # the same


def test_buoyancy_flux_of_cooling_and_evaporation() -> None:
    alpha, beta, density = seawater_properties(35.0, 15.0)
    heat = temperature_flux(-200.0, density, SPECIFIC_HEAT_TEOS10)
    salt = salinity_flux(1e-8, 35.0)
    # Derived from the definitions: -g α Q / (ρ c_p) and g β S (E - P).
    assert buoyancy_flux(heat, 0.0, 9.81, alpha, beta) == pytest.approx(1.0239807e-7, rel=1e-5)
    assert buoyancy_flux(0.0, salt, 9.81, alpha, beta) == pytest.approx(2.5489e-9, rel=1e-4)
    assert buoyancy_flux(heat, salt, 9.81, alpha, beta) == pytest.approx(1.0494700e-7, rel=1e-5)


def test_cooling_is_upward_and_destabilises_unlike_the_opposite_convention_of_profile_models() -> None:
    alpha, beta, density = seawater_properties(35.0, 15.0)
    cooling = float(buoyancy_flux(temperature_flux(-200.0, density, SPECIFIC_HEAT_TEOS10), 0.0, 9.81, alpha, beta))
    assert cooling > 0
    assert scales(friction_velocity=0.01, buoyancy_flux=cooling, layer_depth=30.0).obukhov < 0
    wrong_sign = scales(friction_velocity=0.01, buoyancy_flux=-cooling, layer_depth=30.0)
    assert wrong_sign.obukhov > 0
    assert np.isnan(wrong_sign.wstar)


def test_convective_velocity_and_obukhov_length() -> None:
    found = scales(friction_velocity=0.01, buoyancy_flux=1e-7, layer_depth=50.0)
    assert found.wstar == pytest.approx(0.01709976, rel=1e-6)  # (B0 h)^(1/3), Deardorff 1970; derived in closed form
    assert found.obukhov == pytest.approx(-25.0, rel=1e-9)  # -u*³/(0.4 B0); derived in closed form
    assert -50.0 / found.obukhov == pytest.approx(0.4 * (found.wstar / 0.01) ** 3, rel=1e-12)  # identity κ (w*/u*)³
