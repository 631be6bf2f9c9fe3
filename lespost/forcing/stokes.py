"""Stokes drift profiles in closed form: monochromatic waves (deep and finite depth) and two published bulk profiles.

z is upward, zero at the surface, negative below. `cell_means` averages any profile over model cells, which is what a model
that resolves the drift poorly should use: at the surface face the shear of a broad spectrum is singular.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from scipy.special import erfc

from lespost.forcing.dispersion import angular_frequency


def monochromatic(z: Any, amplitude: float, wavenumber: float, depth: float | None = None, gravity: float = 9.81) -> np.ndarray:
    """Drift [m s-1] of a wave of `amplitude` [m]: a²ωk exp(2kz), or a²ωk cosh 2k(z+D) / (2 sinh² kD) in water D deep."""
    heights, k = np.asarray(z, float), wavenumber
    omega = float(angular_frequency(k, depth, gravity))
    if depth is None:
        return amplitude**2 * omega * k * np.exp(2 * k * heights)
    # cosh/sinh² in a form that does not overflow
    return (amplitude**2 * omega * k * (np.exp(2 * k * heights) + np.exp(-2 * k * (heights + 2 * depth)))
            / (1 - np.exp(-2 * k * depth)) ** 2)


def monochromatic_transport(amplitude: float, wavenumber: float, depth: float | None = None, gravity: float = 9.81) -> float:
    """Stokes transport [m2 s-1]: a²ω/2, or a²ω coth(kD)/2."""
    omega = float(angular_frequency(wavenumber, depth, gravity))
    return amplitude**2 * omega / 2 / (1.0 if depth is None else float(np.tanh(wavenumber * depth)))


def exponential(z: Any, surface_speed: float, wavenumber: float) -> np.ndarray:
    """u_s0 exp(2 k z)."""
    return surface_speed * np.exp(2 * wavenumber * np.asarray(z, float))


def exponential_cell_means(faces: Any, surface_speed: float, wavenumber: float) -> np.ndarray:
    """Exact means of u_s0 exp(2 k z) between successive `faces` (n+1,) -> (n,)."""
    heights = np.asarray(faces, float)
    return surface_speed * np.diff(np.exp(2 * wavenumber * heights)) / (2 * wavenumber * np.diff(heights))


def surface_layer_mean_exponential(surface_speed: float, wavenumber: float, layer_depth: float) -> float:
    """Mean of u_s0 exp(2 k z) over the upper fifth of the layer: u_s0 (1 - exp(-0.4 k h)) / (0.4 k h)."""
    reach = 0.4 * wavenumber * layer_depth
    return surface_speed * -np.expm1(-reach) / reach


def breivik_2014_wavenumber(surface_speed: float, transport: float) -> float:
    """Inverse depth scale k_e of the exponential-integral profile: k_m/3 with k_m = v0 / (2 V) (Breivik et al. 2014)."""
    return surface_speed / (2 * transport) / 3


def breivik_2014(z: Any, surface_speed: float, transport: float) -> np.ndarray:
    """v0 exp(2 k_e z) / (1 - 8 k_e z) (Breivik et al. 2014)."""
    k, heights = breivik_2014_wavenumber(surface_speed, transport), np.asarray(z, float)
    return surface_speed * np.exp(2 * k * heights) / (1 - 8 * k * heights)


def breivik_2016_wavenumber(surface_speed: float, transport: float, beta: float = 1.0) -> float:
    """Inverse depth scale of the Phillips-spectrum profile: v0 (1 - 2β/3) / (2 V) (Breivik et al. 2016)."""
    return surface_speed * (1 - 2 * beta / 3) / (2 * transport)


def breivik_2016(z: Any, surface_speed: float, transport: float, beta: float = 1.0) -> np.ndarray:
    """v0 [exp(2kz) - β √(-2πkz) erfc √(-2kz)] (Breivik et al. 2016); exact for an f^-5 spectrum with β = 1."""
    k, heights = breivik_2016_wavenumber(surface_speed, transport, beta), np.asarray(z, float)
    x = -2 * k * heights
    return surface_speed * (np.exp(-x) - beta * np.sqrt(np.pi * x) * erfc(np.sqrt(x)))


def breivik_2016_transport_above(z: Any, surface_speed: float, transport: float, beta: float = 1.0) -> np.ndarray:
    """Transport [m2 s-1] between `z` and the surface (Breivik et al. 2016)."""
    k = breivik_2016_wavenumber(surface_speed, transport, beta)
    x = -2 * k * np.asarray(z, float)
    inner = 1 + np.sqrt(np.pi) * x**1.5 * erfc(np.sqrt(x)) - (1 + x) * np.exp(-x)
    return surface_speed / (2 * k) * (1 - np.exp(-x) - (2 * beta / 3) * inner)


def cell_means(profile: Callable[[np.ndarray], np.ndarray], faces: Any, points: int = 24) -> np.ndarray:
    """Means of `profile` between successive `faces` (n+1,) -> (n,), by Gauss-Legendre quadrature.

    The nodes never touch the faces, and a substitution that clusters them at the upper face handles the square-root cusp of
    broad-banded profiles at the surface.
    """
    heights = np.asarray(faces, float)
    nodes, weights = np.polynomial.legendre.leggauss(points)
    t = 0.5 * (nodes + 1.0)
    thickness = np.diff(heights)
    below = heights[1:, None] - thickness[:, None] * t[None, :] ** 2
    return (profile(below) * (2.0 * t * 0.5 * weights)[None, :]).sum(axis=1)


def theory_wave_surface_layer(wind_speed: float, layer_depth: float, gravity: float = 9.81) -> float:
    """⟨u_s⟩ over the upper fifth of a layer from the wind alone (Li, Fox-Kemper, Breivik & Webb 2017) [m s-1].

    wind_speed: at 10 m [m s-1]. layer_depth: h [m]; the averaging depth is h/5 (passing that depth instead of h is a
    published trap worth a factor of five). Ill-conditioned for very shallow layers.
    """
    from scipy.special import erfc as erfc_

    if wind_speed <= 0:
        return 0.0
    us0 = 0.0162 * wind_speed
    peak_mean = 1.296 * 0.877 * gravity / (2 * np.pi * 1.075 * wind_speed)
    transport = 0.125 * np.pi * 0.667 * peak_mean * (0.0246 * wind_speed**2) ** 2
    k = 0.176 * us0 / transport
    k_star, z0 = 2.56 * k, 0.2 * layer_depth
    first = 0.715 + (0.151 / (k * z0) - 0.84) * (1 - np.exp(-2 * k * z0))
    second = (0.84 + 0.0591 / (k * z0)) * np.sqrt(2 * np.pi * k * z0) * erfc_(np.sqrt(2 * k * z0))
    third = (0.0632 / (k_star * z0) + 0.125) * (1 - np.exp(-2 * k_star * z0))
    fourth = (0.125 + 0.0946 / (k_star * z0)) * np.sqrt(2 * np.pi * k_star * z0) * erfc_(np.sqrt(2 * k_star * z0))
    return float(us0 * (first - second + third + fourth))


def theory_wave_bulk(wind_speed: float, gravity: float = 9.81) -> tuple[float, float]:
    """(surface drift [m s-1], transport [m2 s-1]) of a fully developed sea from the wind at 10 m (Li et al. 2017)."""
    us0 = 0.0162 * wind_speed
    peak_mean = 1.296 * 0.877 * gravity / (2 * np.pi * 1.075 * wind_speed)
    return us0, 0.125 * np.pi * 0.667 * peak_mean * (0.0246 * wind_speed**2) ** 2
