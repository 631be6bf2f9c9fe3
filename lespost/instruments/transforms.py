"""From beam velocities to velocity vectors, error velocity and stress.

b is positive away from the head. The vector is the least-squares solution of E v = b with the beams' true directions, so that
heading and tilt need no separate rotations; for level beams it is the textbook one: u = (b1 - b2)/(2 sin θ), w = Σb/(4 cos θ).
"""

from __future__ import annotations

import numpy as np


def to_vectors(beams: np.ndarray, directions: np.ndarray) -> np.ndarray:
    """(..., 3) velocity from (..., 4) beam velocities and (4, 3) directions; NaN where a beam is.

    Three good beams suffice only in `to_vectors_three`; here all four are used.
    """
    return np.asarray(beams @ np.linalg.pinv(directions).T)


def to_vectors_three(beams: np.ndarray, directions: np.ndarray, missing: int) -> np.ndarray:
    """(..., 3) velocity from the three beams other than `missing` (0 to 3): exact only where the flow is the same in all."""
    keep = [beam for beam in range(4) if beam != missing]
    return np.asarray(beams[..., keep] @ np.linalg.inv(directions[keep]).T)


def error_velocity(beams: np.ndarray, beam_angle: float) -> np.ndarray:
    """(b1 + b2 - b3 - b4)/(2 √2 sin θ) [m s-1]: zero in uniform flow, and as noisy as u."""
    return np.asarray((beams[..., 0] + beams[..., 1] - beams[..., 2] - beams[..., 3])
                      / (2 * np.sqrt(2) * np.sin(np.radians(beam_angle))))


def map_to_heights(beams: np.ndarray, ranges: np.ndarray, directions: np.ndarray, heights: np.ndarray) -> np.ndarray:
    """Beam velocities (..., cells, 4) interpolated along each beam to common `heights` [m] above the head (bin mapping).

    A tilted beam reaches a height at another range than its nominal one. NaN outside the cells of the beam.
    """
    out = np.full(beams.shape, np.nan)
    for beam in range(4):
        own = ranges * directions[beam, 2]
        order = np.argsort(own)
        own_sorted = own[order]
        upper = np.clip(np.searchsorted(own_sorted, heights), 1, own.size - 1)
        share = (heights - own_sorted[upper - 1]) / (own_sorted[upper] - own_sorted[upper - 1])
        inside = (share >= -1e-9) & (share <= 1 + 1e-9)
        values = beams[..., order, beam]
        mapped = values[..., upper - 1] * (1 - share) + values[..., upper] * share
        out[..., beam] = np.where(inside, mapped, np.nan)
    return out


def stress_by_variances(beam_variances: np.ndarray, beam_angle: float) -> tuple[np.ndarray, np.ndarray]:
    """(⟨u'w'⟩, ⟨v'w'⟩) from the variances (..., 4) of level beams looking up, heading 0 [m2 s-2].

    (⟨b1²⟩ - ⟨b2²⟩)/(4 sin θ cos θ) (Stacey, Monismith & Burau 1999; Lu & Lueck 1999); noise common to the beams drops out.
    """
    theta = np.radians(beam_angle)
    factor = 4 * np.sin(theta) * np.cos(theta)
    return ((beam_variances[..., 0] - beam_variances[..., 1]) / factor, (beam_variances[..., 2] - beam_variances[..., 3]) / factor)
