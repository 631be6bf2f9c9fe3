"""How a range cell weights the water along the beam, and across it."""

from __future__ import annotations

import numpy as np


def range_weights(cell: float, pulse: float, points: int = 9) -> tuple[np.ndarray, np.ndarray]:
    """(offsets [m], weights) along the beam about the cell centre for gate length `cell` and pulse length `pulse`.

    The weight is the convolution of two boxes, a trapezoid of base cell + pulse (a triangle of twice the length where they are
    equal); Gauss-Legendre nodes on its three straight parts integrate polynomials up to degree 2 points - 2 exactly.
    Weights sum to one.
    """
    half, flat = 0.5 * (cell + pulse), 0.5 * abs(cell - pulse)
    nodes, gauss = np.polynomial.legendre.leggauss(max(2, points // 3 + 1))
    offsets, weights = [], []
    for low, high in ((-half, -flat), (-flat, flat), (flat, half)):
        if high - low <= 1e-12 * half:
            continue
        s = low + 0.5 * (high - low) * (nodes + 1)
        height = np.minimum(1.0, (half - np.abs(s)) / max(half - flat, 1e-300))
        offsets.append(s)
        weights.append(0.5 * (high - low) * gauss * height)
    all_offsets, all_weights = np.concatenate(offsets), np.concatenate(weights)
    return all_offsets, all_weights / all_weights.sum()


def footprint(beam_width: float, distance: np.ndarray) -> np.ndarray:
    """Standard deviation [m] of the two-way Gaussian footprint across the beam at `distance` [m].

    beam_width: one-way half-power full width [degree]; σ = β / (2 √(2 ln 2) √2) in angle.
    """
    return np.asarray(np.radians(beam_width) / (2 * np.sqrt(2 * np.log(2)) * np.sqrt(2)) * np.asarray(distance, float))
