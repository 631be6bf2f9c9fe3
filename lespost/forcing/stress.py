"""Wind stress from the neutral wind at 10 m, by published drag laws, and friction velocities on either side of the surface."""

from __future__ import annotations

from typing import Any

import numpy as np

from lespost.constants import AIR_DENSITY, VON_KARMAN
from lespost.errors import DataError
from lespost.forcing.settings import BulkFormula

#: Wind below which the smooth-flow drag is held constant [m s-1]; common practice, no source.
SLOWEST_WIND = 1e-3


def drag_coefficient(wind_speed: Any, formula: BulkFormula = "large_yeager_2009", temperature: float = 15.0,
                     gravity: float = 9.81) -> np.ndarray:
    """Neutral drag coefficient at 10 m [1] for `wind_speed` [m s-1], any shape.

    large_yeager_2009: Large & Yeager 2009; large_yeager_2004; large_pond_1981 (4 to 25 m s-1, held constant outside);
    coare_3_5: Edson et al. 2013, smooth flow plus a Charnock parameter limited to zero from below.
    temperature: of the air [degC], for its viscosity (coare_3_5). Raises DataError for negative wind.
    """
    wind = np.asarray(wind_speed, dtype=np.float64)
    if np.any(wind < 0):
        raise DataError("wind speed is negative; a speed cannot be: check the sign and whether it is a component.")
    with np.errstate(divide="ignore", invalid="ignore"):
        if formula == "large_pond_1981":
            return np.asarray(1e-3 * np.where(wind < 11.0, 1.2, 0.49 + 0.065 * np.minimum(wind, 25.0)))
        if formula == "large_yeager_2004":
            return np.asarray(1e-3 * (2.70 / wind + 0.142 + 0.0764 * wind))
        if formula == "large_yeager_2009":
            slow = 2.7 / wind + 0.142 + wind / 13.09 - 3.14807e-10 * wind**6
            return np.asarray(1e-3 * np.where(wind < 33.0, slow, 2.34))
    return np.asarray(np.vectorize(lambda speed: _coare(float(speed), temperature, gravity))(wind), dtype=np.float64)


def charnock_coare(wind_speed: Any) -> np.ndarray:
    """Charnock parameter of COARE 3.5 (Edson et al. 2013): 0.0017 min(U, 19) - 0.005, never below zero."""
    return np.maximum(0.0017 * np.minimum(np.asarray(wind_speed, dtype=np.float64), 19.0) - 0.005, 0.0)


def air_viscosity(temperature: float) -> float:
    """Kinematic viscosity of air [m2 s-1] at `temperature` [degC]; polynomial of the COARE algorithm, from memory."""
    t = temperature
    return float(1.326e-5 * (1 + 6.542e-3 * t + 8.301e-6 * t**2 - 4.84e-9 * t**3))


def _coare(wind: float, temperature: float, gravity: float) -> float:
    if wind == 0.0:
        return float("inf")
    # Below a millimetre per second the logarithm of smooth flow turns negative; the drag there moves nothing.
    wind = max(wind, SLOWEST_WIND)
    charnock, viscosity = float(charnock_coare(wind)), air_viscosity(temperature)
    friction = 0.035 * wind
    for _ in range(200):
        roughness = charnock * friction**2 / gravity + 0.11 * viscosity / friction
        new = VON_KARMAN * wind / np.log(10.0 / roughness)
        if abs(new - friction) < 1e-12:
            break
        friction = new
    return float((friction / wind) ** 2)


def wind_stress(wind_speed: Any, formula: BulkFormula = "large_yeager_2009", air_density: float = AIR_DENSITY,
                temperature: float = 15.0, gravity: float = 9.81) -> np.ndarray:
    """Wind stress [N m-2], air_density · C_D · U². Zero for calm, though the drag coefficients diverge there."""
    wind = np.asarray(wind_speed, dtype=np.float64)
    coefficient = drag_coefficient(wind, formula, temperature, gravity)
    return np.where(wind > 0, air_density * np.where(wind > 0, coefficient, 0.0) * wind**2, 0.0)


def friction_velocity(stress: Any, density: float) -> np.ndarray:
    """Friction velocity [m s-1], (|stress| / density)^(1/2); density of water gives the one below the surface."""
    return np.sqrt(np.abs(np.asarray(stress, dtype=np.float64)) / density)
