"""Published scales of wave-driven mixing, entrainment and deepening; the numbers of a forcing itself are in `scales`."""

from __future__ import annotations

from typing import Any

import numpy as np


def langmuir_velocity(friction_velocity: Any, surface_stokes_drift: Any) -> np.ndarray:
    """w*_L = (u*² u_s0)^(1/3) [m s-1] (Grant & Belcher 2009)."""
    return np.cbrt(np.asarray(friction_velocity, float) ** 2 * np.asarray(surface_stokes_drift, float))


def mixed_velocity(friction_velocity: Any, surface_stokes_drift: Any) -> np.ndarray:
    """Scale between shear and Langmuir turbulence [m s-1]: v*³ = w*_L³ + (1 - exp(-La_t²/2)) u*³ (after Grant & Belcher 2009)."""
    ustar = np.asarray(friction_velocity, float)
    la_squared = ustar / np.asarray(surface_stokes_drift, float)
    return np.cbrt(langmuir_velocity(ustar, surface_stokes_drift) ** 3 - np.expm1(-la_squared / 2) * ustar**3)


def stokes_depth_factor(layer_depth_over_stokes_depth: Any) -> np.ndarray:
    """Reduction of the Langmuir velocity where the drift is shallow or deep against the layer [1] (after Grant & Belcher 2009).

    [1.12 (1 - (1 - e^-r)/r)]^(1/3) (1 - e^(-15/r)), r = h / δ.
    """
    r = np.asarray(layer_depth_over_stokes_depth, float)
    return np.cbrt(1.12 * (1 + np.expm1(-r) / r)) * -np.expm1(-15 / r)


def entrainment_li_fox_kemper_2017(friction_velocity: Any, surface_layer_langmuir_number: Any, convective_velocity: Any
                                   ) -> np.ndarray:
    """-⟨w'b'⟩_e h [m3 s-3] = 0.17 u*³ + 0.083 u*³ La_SL^-2 + 0.15 w*³ (Li & Fox-Kemper 2017); w* = 0 without cooling."""
    cubed = np.asarray(friction_velocity, float) ** 3
    langmuir = 0.083 * np.asarray(surface_layer_langmuir_number, float) ** -2.0
    return cubed * (0.17 + langmuir) + 0.15 * np.asarray(convective_velocity, float) ** 3


def entrainment_grant_belcher_2009(friction_velocity: Any, surface_stokes_drift: Any, convective_velocity: Any) -> np.ndarray:
    """-⟨w'b'⟩_e h [m3 s-3] = 0.2 w*³ + 0.135 La_t w*_L³ (after Grant & Belcher 2009)."""
    la = np.sqrt(np.asarray(friction_velocity, float) / np.asarray(surface_stokes_drift, float))
    langmuir = langmuir_velocity(friction_velocity, surface_stokes_drift) ** 3
    return 0.2 * np.asarray(convective_velocity, float) ** 3 + 0.135 * la * langmuir


def entrainment_shear_and_langmuir(friction_velocity: Any, surface_stokes_drift: Any, convective_velocity: Any) -> np.ndarray:
    """The other form in use [m3 s-3]: 0.2 w*³ + [0.15 (1 - e^(-La_t/2)) + 0.03 La_t^-2] u*³ (after Grant & Belcher 2009)."""
    ustar = np.asarray(friction_velocity, float)
    la = np.sqrt(ustar / np.asarray(surface_stokes_drift, float))
    return 0.2 * np.asarray(convective_velocity, float) ** 3 + (-0.15 * np.expm1(-la / 2) + 0.03 * la**-2.0) * ustar**3


def vertical_variance_convection(depth_fraction: Any) -> np.ndarray:
    """⟨w²⟩/w*² = 1.8 ζ^(2/3) (1 - 0.8 ζ)², ζ = depth / h (Lenschow, Wyngaard & Pennell 1980)."""
    zeta = np.asarray(depth_fraction, float)
    return 1.8 * (np.cbrt(zeta) * (1 - 0.8 * zeta)) ** 2


def shear_deepening(friction_velocity: float, buoyancy_frequency: float, coriolis_parameter: float, time: Any,
                    critical_richardson: float = 1.0) -> np.ndarray:
    """Layer depth [m] at `time` [s] after a wind starts over linear stratification, stopping where Ri_b = `critical_richardson`.

    h = u*/√(f N) [4 Ri_c (1 - cos f t)]^(1/4), Ri_b = Δb h / |ΔU|² (Pollard, Rhines & Thompson 1973); 0.65 gives the
    bulk criterion of Price, Weller & Pinkel (1986) under the same assumptions. Deepest at half an inertial period.
    """
    f = abs(coriolis_parameter)
    phase = 4 * critical_richardson * (1 - np.cos(f * np.asarray(time, float)))
    return friction_velocity / np.sqrt(f * buoyancy_frequency) * phase**0.25


def langmuir_deepening(friction_velocity: float, buoyancy_frequency: float, factor: float = 10.0) -> float:
    """Depth 10 u*/N [m] at which cells stop deepening (Li & Garrett 1997)."""
    return factor * friction_velocity / buoyancy_frequency


def arresting_buoyancy_jump(friction_velocity: float, layer_depth: float) -> float:
    """Buoyancy jump 50 u*²/h [m s-2] at which cells are arrested (Li & Garrett 1997)."""
    return 50 * friction_velocity**2 / layer_depth


def stokes_production_linear_stress(friction_velocity: float, surface_stokes_drift: float, mean_stokes_drift: float) -> float:
    """Column integral of the Stokes production [m3 s-3] for a stress falling linearly to zero at h: u*² (u_s0 - ⟨u_s⟩_h)."""
    return friction_velocity**2 * (surface_stokes_drift - mean_stokes_drift)
