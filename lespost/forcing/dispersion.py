"""Linear gravity waves: ω² = g k tanh kD, solved for the wavenumber."""

from __future__ import annotations

from typing import Any

import numpy as np

from lespost.errors import DataError


def wavenumber(angular_frequency: Any, depth: float | None = None, gravity: float = 9.81) -> np.ndarray:
    """Wavenumber [rad m-1] of a wave of `angular_frequency` [rad s-1] in water `depth` [m] deep (None: deep water).

    Newton's method on κ tanh κ = ω²D/g from κ = √y (shallow) or y (deep); converges to round-off.
    Raises DataError for a depth that is not positive.
    """
    omega = np.asarray(angular_frequency, dtype=np.float64)
    if depth is None or np.isinf(depth):
        return omega**2 / gravity
    if not depth > 0:
        raise DataError(f"water depth {depth} m: give a positive depth, or none for deep water.")
    y = omega**2 * depth / gravity
    kappa = np.where(y < 1.0, np.sqrt(y), y)
    for _ in range(60):
        tanh = np.tanh(kappa)
        slope = tanh + kappa * (1.0 - tanh**2)
        step = np.where(slope > 0, (kappa * tanh - y) / np.where(slope > 0, slope, 1.0), 0.0)
        kappa = kappa - step
        if np.all(np.abs(step) <= 1e-15 * np.maximum(kappa, 1e-300)):
            break
    return kappa / depth


def angular_frequency(wavenumber_value: Any, depth: float | None = None, gravity: float = 9.81) -> np.ndarray:
    """Angular frequency [rad s-1] of a wave of the given wavenumber [rad m-1]."""
    k = np.asarray(wavenumber_value, dtype=np.float64)
    return np.sqrt(gravity * k * (1.0 if depth is None else np.tanh(k * depth)))
