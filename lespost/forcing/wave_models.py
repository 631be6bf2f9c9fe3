"""Wave spectra and surface drift from formulas: what to use where no spectrum was measured.

Each returns a density over frequency that `spectrum.Spectrum` takes; the bulk profiles that need no spectrum are in `stokes`.
"""

from __future__ import annotations

from typing import Any

import numpy as np


def pierson_moskowitz(frequency: Any, peak_frequency: float, alpha: float = 0.0081, gravity: float = 9.81) -> np.ndarray:
    """α g² (2π)^-4 f^-5 exp[-1.25 (f_p/f)^4] [m2 s] at `frequency` [Hz] > 0 (Pierson & Moskowitz 1964)."""
    f = np.asarray(frequency, dtype=np.float64)
    return alpha * gravity**2 * (2 * np.pi) ** -4.0 * f**-5.0 * np.exp(-1.25 * (peak_frequency / f) ** 4)


def peak_frequency_of_wind(wind_speed_at_19_5: float, gravity: float = 9.81) -> float:
    """Peak frequency [Hz] of a fully developed sea, 0.877 g / (2π U_19.5) (Pierson & Moskowitz 1964)."""
    return 0.877 * gravity / (2 * np.pi * wind_speed_at_19_5)


def jonswap(frequency: Any, peak_frequency: float, peakedness: float = 3.3, alpha: float = 0.0081, gravity: float = 9.81
            ) -> np.ndarray:
    """Pierson-Moskowitz density times γ^exp[-(f-f_p)²/(2σ²f_p²)], σ = 0.07 to the peak, 0.09 beyond (Hasselmann et al. 1973)."""
    f = np.asarray(frequency, dtype=np.float64)
    width = np.where(f <= peak_frequency, 0.07, 0.09)
    bump = np.exp(-((f - peak_frequency) ** 2) / (2 * width**2 * peak_frequency**2))
    return pierson_moskowitz(f, peak_frequency, alpha, gravity) * peakedness**bump


def donelan_hamilton_hui(frequency: Any, wind_speed: float, wave_age: float, gravity: float = 9.81) -> np.ndarray:
    """Density [m2 s] of a growing sea (Donelan, Hamilton & Hui 1985) at `frequency` [Hz].

    wind_speed [m s-1] at 10 m; wave_age: phase speed at the peak over wind speed. In angular frequency it reads
    α g² / (ω_p ω^4) exp[-(ω_p/ω)^4] γ^Γ. Its f^-4 tail makes the surface drift grow without end with the last frequency:
    always say where it was cut.
    """
    omega = 2 * np.pi * np.asarray(frequency, dtype=np.float64)
    peak = gravity / (wave_age * wind_speed)
    alpha, width = 0.006 * wave_age**-0.55, 0.08 * (1 + 4 * wave_age**3)
    peakedness = 1.7 if wave_age >= 1 else 1.7 - 6 * np.log10(wave_age)
    bump = np.exp(-((omega - peak) ** 2) / (2 * width**2 * peak**2))
    return 2 * np.pi * alpha * gravity**2 / (peak * omega**4) * np.exp(-((peak / omega) ** 4)) * peakedness**bump


def surface_drift_ardhuin_2009(wind_speed: Any, wave_height: Any, cut_off: float = 0.5) -> np.ndarray:
    """Surface drift [m s-1] of the waves up to `cut_off` [Hz] from wind [m s-1, at 10 m] and significant wave height [m].

    5e-4 [1.25 - 0.25 (0.5/f_c)^1.3] U min(U, 14.5) + 0.027 (H_s - 0.4) (Ardhuin et al. 2009).
    """
    wind, height = np.asarray(wind_speed, dtype=np.float64), np.asarray(wave_height, dtype=np.float64)
    return 5e-4 * (1.25 - 0.25 * (0.5 / cut_off) ** 1.3) * wind * np.minimum(wind, 14.5) + 0.027 * (height - 0.4)
