"""What an instrument adds to the water's velocity: ping noise, wrapping at the ambiguity velocity, quantisation."""

from __future__ import annotations

import numpy as np


def wrap(velocity: np.ndarray, ambiguity: float) -> np.ndarray:
    """Velocity as recorded with ambiguity ±`ambiguity`: beyond it, it comes back from the other side."""
    return np.asarray((velocity + ambiguity) % (2.0 * ambiguity) - ambiguity)


def quantise(velocity: np.ndarray, step: float) -> np.ndarray:
    """Velocity rounded to multiples of `step` (0: as it is)."""
    return velocity if step == 0 else np.asarray(np.round(velocity / step) * step)


def noise_of_components(ping_noise: float, pings: int, beam_angle: float) -> tuple[float, float, float]:
    """Standard deviations of (u or v, w, error velocity) of an ensemble of level four-beam solutions [m s-1].

    σ_b/(√2 sin θ), σ_b/(2 cos θ), σ_b/(√2 sin θ), each over √pings; follows from the transforms.
    """
    theta = np.radians(beam_angle)
    single = ping_noise / np.sqrt(pings)
    return (float(single / (np.sqrt(2) * np.sin(theta))), float(single / (2 * np.cos(theta))),
            float(single / (np.sqrt(2) * np.sin(theta))))
