"""From beam velocities to velocity vectors and error velocity.

b is positive away from the head. For level opposing pairs the solution is the textbook one, u = (b1 - b2)/(2 sin θ),
v = (b3 - b4)/(2 sin θ), w = Σb/(4 cos θ), e = (b1 + b2 - b3 - b4)/(2 √2 sin θ); in general it is the least-squares solution with the
beams' true directions. All of it is exact only where the flow is the same in all beams (response.py says what happens otherwise).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from lespost.instruments.geometry import OPPOSING_PAIRS, instrument_directions, rotation


def solution_matrix(directions: np.ndarray) -> np.ndarray:
    """(3, beams) least-squares matrix that takes beam velocities to the vector in the axes of `directions` (beams, 3)."""
    return np.asarray(np.linalg.pinv(directions))


def error_row(directions: np.ndarray) -> np.ndarray:
    """(4,) combination of the beam velocities that vanishes in uniform flow, as noisy as u of level beams: norm 1/(√2 sin θ), beam 1
    positive. For opposing pairs (1, 1, -1, -1)/(2 √2 sin θ)."""
    null = np.linalg.svd(directions.T)[2][-1]
    axis = solution_matrix(directions) @ np.ones(len(directions))  # the direction all beams share, times 1/cos θ
    sine = float(np.sqrt(1.0 - 1.0 / (axis @ axis)))
    return np.asarray(null * (np.sign(null[0]) or 1.0) / (np.sqrt(2.0) * sine))


def instrument_matrix(beam_angle: float, upward: bool = True, azimuths: Sequence[float] = OPPOSING_PAIRS) -> np.ndarray:
    """(4, 4) matrix from beam velocities to u, v, w, error velocity in the axes of the instrument (z up for an untilted one)."""
    directions = instrument_directions(beam_angle, upward, azimuths)
    return np.concatenate([solution_matrix(directions), error_row(directions)[None]])


def instrument_to_simulation(
    vectors: np.ndarray, heading: float, pitch: float, roll: float, upward: bool = True
) -> np.ndarray:
    """(..., 3) vectors in the axes of the simulation from those in the axes of the instrument; angles in degrees."""
    return np.asarray(vectors @ rotation(heading, pitch, roll, upward).T)


def to_vectors(beams: np.ndarray, directions: np.ndarray, three_beams: bool = True) -> np.ndarray:
    """(..., 3) velocity in the axes of `directions` (4, 3) from (..., 4) beam velocities.

    Where one beam is NaN the other three are solved (three_beams), which takes the error velocity for zero; with fewer: NaN.
    """
    out = np.asarray(beams @ solution_matrix(directions).T)
    if three_beams:
        missing = ~np.isfinite(beams)
        for beam in range(4):
            lone = missing[..., beam] & (missing.sum(axis=-1) == 1)
            if lone.any():
                out[lone] = three_beam_vectors(beams[lone], directions, beam)
    return out


def three_beam_vectors(beams: np.ndarray, directions: np.ndarray, missing: int) -> np.ndarray:
    """(..., 3) velocity from the three beams other than `missing` (0 to 3)."""
    keep = [beam for beam in range(4) if beam != missing]
    return np.asarray(beams[..., keep] @ np.linalg.inv(directions[keep]).T)


def error_velocity(beams: np.ndarray, directions: np.ndarray) -> np.ndarray:
    """Error velocity (...) [m s-1] from (..., 4) beam velocities: zero in uniform flow; NaN where a beam is."""
    return np.asarray(beams @ error_row(directions))


def map_to_heights(beams: np.ndarray, ranges: np.ndarray, directions: np.ndarray, heights: np.ndarray) -> np.ndarray:
    """Beam velocities (..., cells, 4) interpolated along each beam to common `heights` [m] above the head (bin mapping).

    A tilted beam reaches a height at another range than its nominal one. NaN outside the cells of the beam.
    """
    out = np.full(beams.shape, np.nan)
    if ranges.size < 2:
        return out
    for beam in range(beams.shape[-1]):
        own = ranges * directions[beam, 2]
        order = np.argsort(own)
        own, values = own[order], beams[..., order, beam]
        upper = np.clip(np.searchsorted(own, heights), 1, own.size - 1)
        share = (heights - own[upper - 1]) / (own[upper] - own[upper - 1])
        inside = (share >= -1e-9) & (share <= 1.0 + 1e-9)
        out[..., beam] = np.where(inside, values[..., upper - 1] * (1.0 - share) + values[..., upper] * share, np.nan)
    return out
