"""Times and places of circulating water in a steady roll, in closed form.

The stream function of the roll of `roll` is psi = Psi sin(l y) sin(m z), w = d psi / dy, v = -d psi / dz. Depths as a
share of the layer: zeta = depth / H. All formulas derived in closed form.
"""

from __future__ import annotations

import numpy as np
from scipy.special import ellipk

from toy_fields.errors import ToyRequestError


def centre_depth_of_powers(a: float, b: float) -> float:
    """zeta of the vortex centre where w varies as zeta^a (1 - zeta)^b: a / (a + b)."""
    return a / (a + b)


def centre_depth_of_decaying_sine(depth: float, decay_depth: float) -> float:
    """zeta of the vortex centre where psi varies as sin(pi zeta) exp(-zeta depth / decay_depth): arctan(m D) / pi."""
    return float(np.arctan(np.pi / depth * decay_depth) / np.pi)


def centre_period(vertical_amplitude: float, depth: float) -> float:
    """Turnover time at the centre of a roll as wide as deep in either half [s]: 2 H / W (wavelength = 2 H)."""
    return 2 * depth / vertical_amplitude


def streamline_period_ratio(level: float) -> float:
    """Turnover time on the streamline psi / Psi = level over that at the centre: (2 / pi) K(sqrt(1 - level²)).

    0 < level <= 1; scipy's K takes the square of the modulus. Raises ToyRequestError outside.
    """
    if not 0 < level <= 1:
        raise ToyRequestError(f"streamline level {level}: give 0 < level <= 1 (0 is the cell's edge: it takes for ever).")
    return float(2 / np.pi * ellipk(1 - level**2))


def instability_time(mean_shear: float, stokes_shear: float) -> float:
    """Growth time of the Craik-Leibovich instability [s]: (dU/dz dus/dz)^(-1/2); NaN where the product is not positive."""
    product = mean_shear * stokes_shear
    return float(1 / np.sqrt(product)) if product > 0 else float("nan")


def instability_growth(mean_shear: float, stokes_shear: float, across: float, vertical: float) -> float:
    """Growth rate of inviscid rolls of wavenumbers l across and m vertical [s-1]: sqrt(U_z us_z) l / sqrt(l² + m²).

    Negative product: NaN (such rolls oscillate). Craik & Leibovich (1976), second mechanism; derived for rigid lids.
    """
    product = mean_shear * stokes_shear
    return float(np.sqrt(product) * across / np.hypot(across, vertical)) if product > 0 else float("nan")
