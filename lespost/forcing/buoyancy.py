"""Surface fluxes of temperature, salinity and buoyancy; upward positive, so that cooling and evaporation destabilise."""

from __future__ import annotations

from typing import Any

import numpy as np

from lespost.errors import DataError

#: Paulson & Simpson (1977): share of the fast-absorbed band and the two e-folding depths [m] by optical water type. Type I was
#: seen in print; the others are from memory.
WATER_TYPES = {"I": (0.58, 0.35, 23.0), "IA": (0.62, 0.60, 20.0), "IB": (0.67, 1.0, 17.0), "II": (0.77, 1.5, 14.0),
               "III": (0.78, 1.4, 7.9)}


def seawater_properties(absolute_salinity: float, conservative_temperature: float, pressure: float = 0.0
                        ) -> tuple[float, float, float]:
    """(thermal expansion [K-1], haline contraction [kg g-1], density [kg m-3]) by TEOS-10 (gsw).

    absolute_salinity in g kg-1, conservative_temperature in degC, pressure in dbar.
    """
    import gsw

    return (float(gsw.alpha(absolute_salinity, conservative_temperature, pressure)),
            float(gsw.beta(absolute_salinity, conservative_temperature, pressure)),
            float(gsw.rho(absolute_salinity, conservative_temperature, pressure)))


def temperature_flux(heat_flux: Any, density: float, specific_heat: float) -> np.ndarray:
    """Kinematic temperature flux, upward [K m s-1], from a heat flux into the ocean [W m-2]."""
    return -np.asarray(heat_flux, dtype=np.float64) / (density * specific_heat)


def salinity_flux(evaporation_minus_precipitation: Any, salinity: float) -> np.ndarray:
    """Kinematic salinity flux, upward [g kg-1 m s-1]: evaporation leaves salt behind, so it is negative then."""
    return -salinity * np.asarray(evaporation_minus_precipitation, dtype=np.float64)


def buoyancy_flux(temperature_flux_up: Any, salinity_flux_up: Any, gravity: float, thermal_expansion: float,
                  haline_contraction: float) -> np.ndarray:
    """Surface buoyancy flux [m2 s-3], upward: g (α ⟨w'θ'⟩ - β ⟨w'S'⟩); positive destabilises."""
    heat = thermal_expansion * np.asarray(temperature_flux_up, dtype=np.float64)
    salt = haline_contraction * np.asarray(salinity_flux_up, dtype=np.float64)
    return gravity * (heat - salt)


def light(depth: Any, water_type: str = "I") -> np.ndarray:
    """Share of the sunlight below the surface that reaches `depth` [m, positive down] (Paulson & Simpson 1977)."""
    if water_type not in WATER_TYPES:
        raise DataError(f'water type "{water_type}" is not known; use one of {", ".join(WATER_TYPES)}.')
    share, fast, slow = WATER_TYPES[water_type]
    below = np.asarray(depth, dtype=np.float64)
    return share * np.exp(-below / fast) + (1 - share) * np.exp(-below / slow)


def absorbed_in_layer(shortwave: Any, depth: Any, water_type: str = "I") -> np.ndarray:
    """Sunlight absorbed between the surface and `depth` [W m-2]."""
    return np.asarray(shortwave, dtype=np.float64) * (1.0 - light(depth, water_type))
