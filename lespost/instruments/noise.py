"""What an instrument adds to the water's velocity: ping noise, wrapping at the ambiguity velocity, quantisation.

The closed forms of pulse-pair processing relate noise to correlation and correlation to the spread of velocity inside a cell; what
averaging takes away is in response.py. sound_speed, velocities in m s-1, lengths in m, times in s, frequency in Hz.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


def wrap(velocity: np.ndarray, ambiguity: float) -> np.ndarray:
    """Velocity as recorded with ambiguity ±`ambiguity`: beyond it, it comes back from the other side (2.1 at ±1.75 reads -1.4)."""
    return np.asarray((velocity + ambiguity) % (2.0 * ambiguity) - ambiguity)


def quantise(velocity: np.ndarray, step: float) -> np.ndarray:
    """Velocity rounded to multiples of `step` (0: as it is)."""
    return velocity if step == 0.0 else np.asarray(np.round(velocity / step) * step)


@dataclass(frozen=True)
class PingNoise:
    """Noise of the pings of one ensemble: standard deviation of one ping along a beam [m s-1], pings, ambiguity velocity
    (None: no wrapping), step of the recorded ensemble mean (0: none)."""

    deviation: float
    pings: int
    ambiguity: float | None = None
    step: float = 0.0

    @property
    def ensemble_deviation(self) -> float:
        """Standard deviation of what is added to an ensemble mean without wrapping: √(σ²/N + step²/12)."""
        return float(np.sqrt(self.deviation**2 / self.pings + self.step**2 / 12.0))

    def of_mean(self, water: np.ndarray, rng: np.random.Generator) -> np.ndarray:
        """Recorded ensemble means where `water` holds the means over the pings: white noise σ/√N, quantised."""
        return quantise(water + rng.normal(0.0, self.deviation / np.sqrt(self.pings), water.shape), self.step)

    def of_pings(self, water: np.ndarray, rng: np.random.Generator) -> np.ndarray:
        """Recorded ensemble means where `water` holds every ping along axis 0: noise and wrapping on each, mean, quantised."""
        noisy = water + rng.normal(0.0, self.deviation, water.shape)
        return quantise((noisy if self.ambiguity is None else wrap(noisy, self.ambiguity)).mean(axis=0), self.step)


def beam_noise_of_horizontal(horizontal: float, beam_angle: float) -> float:
    """Noise along a beam that gives a horizontal component of opposing beams the noise `horizontal`: σ_u √2 sin θ."""
    return horizontal * float(np.sqrt(2.0) * np.sin(np.radians(beam_angle)))


def ambiguity_velocity(sound_speed: float, frequency: float, lag: float) -> float:
    """Largest unambiguous velocity along a beam of pulses `lag` apart: c/(4 f τ)."""
    return sound_speed / (4.0 * frequency * lag)


def velocity_range_product(sound_speed: float, frequency: float) -> float:
    """Ambiguity velocity times range [m2 s-1] where the next pulse leaves when the last has returned: c²/(8 f)."""
    return sound_speed**2 / (8.0 * frequency)


def pulse_pair_deviation(ambiguity: float, correlation: float, looks: float) -> float:
    """Standard deviation of a pulse-pair velocity: (V_a/π) √((ρ^-2 - 1)/(2 M)), M independent looks (Miller & Rochwarger 1972;
    Zrnić 1977, from memory)."""
    return float(ambiguity / np.pi * np.sqrt((correlation**-2 - 1.0) / (2.0 * looks)))


def pulse_correlation(frequency: float, sound_speed: float, lag: float, spread: float) -> float:
    """Correlation left of two pulses `lag` apart by a Gaussian spread of velocity inside the cell [m s-1]: exp(-2 k² σ² τ²),
    k = 2 π f/c (derived: the mean of exp(2ikvτ) over the spread)."""
    wavenumber = 2.0 * np.pi * frequency / sound_speed
    return float(np.exp(-2.0 * (wavenumber * spread * lag) ** 2))


def shear_spread(shear: float, cell: float) -> float:
    """Standard deviation of velocity inside a range cell weighted by a triangle of base 2 cell, in a shear along the beam: G L/√6."""
    return abs(shear) * cell / float(np.sqrt(6.0))
