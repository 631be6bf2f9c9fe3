"""How a range cell weights the water along the beam, and a beam the water across it."""

from __future__ import annotations

import numpy as np


def range_weights(cell: float, pulse: float, nodes: int = 4) -> tuple[np.ndarray, np.ndarray]:
    """(offsets [m], weights) along the beam about the cell centre for gate length `cell` and pulse length `pulse`.

    The weight is the convolution of two boxes, a trapezoid of base cell + pulse (a triangle of twice the length where they are
    equal). Gauss-Legendre nodes (`nodes` on each straight part) integrate it times polynomials of degree up to 2 nodes - 2
    exactly. Weights sum to one. Its factor on a wave of wavenumber k along the beam is sinc(k cell/2) sinc(k pulse/2)
    (response.range_response; derived here).
    """
    half, flat = 0.5 * (cell + pulse), 0.5 * abs(cell - pulse)
    points, gauss = np.polynomial.legendre.leggauss(nodes)
    offsets, weights = [], []
    for low, high in ((-half, -flat), (-flat, flat), (flat, half)):
        if high - low <= 1e-12 * half:
            continue
        s = low + 0.5 * (high - low) * (points + 1.0)
        height = np.minimum(1.0, (half - np.abs(s)) / (half - flat))
        offsets.append(s)
        weights.append(0.5 * (high - low) * gauss * height)
    all_offsets, all_weights = np.concatenate(offsets), np.concatenate(weights)
    return all_offsets, all_weights / all_weights.sum()


def footprint_deviation(beam_width: float, distance: np.ndarray | float) -> np.ndarray:
    """Standard deviation [m] of the two-way Gaussian footprint across the beam at range `distance` [m].

    beam_width: one-way half-power full width β [degree]; σ = β / (2 √(2 ln 2) √2) in angle, as both ways weigh in.
    """
    one_way = np.radians(beam_width) / (2.0 * np.sqrt(2.0 * np.log(2.0)))
    return np.asarray(one_way / np.sqrt(2.0) * np.asarray(distance, dtype=np.float64))


def footprint_points(beam_width: float) -> tuple[np.ndarray, np.ndarray]:
    """(places (points, 2) across the beam in standard deviations, weights): a Gaussian footprint, or a single point for width 0.

    The product of three-node Gauss-Hermite rules: exact for polynomials of degree 5 in each direction.
    """
    if beam_width == 0.0:
        return np.zeros((1, 2)), np.ones(1)
    nodes = np.sqrt(3.0) * np.array([-1.0, 0.0, 1.0])
    single = np.array([1.0, 4.0, 1.0]) / 6.0
    first, second = np.meshgrid(nodes, nodes, indexing="ij")
    return np.stack([first.ravel(), second.ravel()], axis=1), np.outer(single, single).ravel()
