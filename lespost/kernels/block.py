"""The fused pass: one walk up the levels of a block that feeds every statistic while a level is still in the cache.

Called once per block with the interpreter lock released; measured against one kernel per statistic this reads main memory
once instead of four times. Bare arrays only: what the columns mean stands beside the kernels that fill them.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from lespost.kernels.compiler import kernel
from lespost.kernels.gradients import divergence_sums, structure_sums
from lespost.kernels.moments import face_moments, level_moments, native_variance
from lespost.kernels.rows import Float64, Pieces, Stored, count_levels, level, level_mean

Index = NDArray[np.int64]


@kernel
def means_and_ranges(values: Stored, work: Float64, mean: Float64, span: Float64) -> None:
    """mean: set to (reference, offset); span: set to (smallest, largest, number of values not finite).

    The extremes are those of the finite values, NaN where there is none. work: (3 or more, nx).
    """
    reference, offset, low, high = level_mean(values, work)
    missing = 0
    if not np.isfinite(offset):  # seldom: a level that holds NaN or infinity is gone through once more, with care
        low, high = np.inf, -np.inf
        for j in range(values.shape[0]):
            for i in range(values.shape[1]):
                value = np.float64(values[j, i])
                if np.isfinite(value):
                    low = min(low, value)
                    high = max(high, value)
                else:
                    missing += 1
        offset = np.nan
        if low > high:
            low = high = np.nan
    mean[0], mean[1] = reference, offset
    span[0], span[1], span[2] = low, high, missing


@kernel
def block_pass(
    u: Pieces, v: Pieces, w: Pieces, c: Pieces, has_scalar: bool, higher: bool, u_arrangement: int, v_arrangement: int,
    centre: Index, w_of_centre: Index, across: Index, height: Float64, dx: float, dy: float,
    face: Index, below: Index, above: Index,
    mean_u: Float64, mean_v: Float64, mean_w: Float64, mean_c: Float64,
    span_u: Float64, span_v: Float64, span_w: Float64, span_c: Float64,
    moments: Float64, scalar_moments: Float64, tiles: Float64, scalar_tiles: Float64,
    structure: Float64, divergence: Float64, native: Float64, faces: Float64,
) -> None:
    """Fill the results for the centres and faces of one block.

    u, v, c: levels (ny, nx) with halo; w: its levels with halo (pass u for c where has_scalar is false).
    centre: (n,) positions in u, v, c of the levels wanted; w_of_centre: (n, 2) positions in w of the two levels whose mean
    is w at the centre; across, height: (n, 2) and (n,), the two levels of w whose difference over `height` is its vertical
    gradient. face, below, above: (m,) position in w of a face, in u of the cells below and above it.
    mean_X: (levels, 2) and span_X: (levels, 3) for all levels handed in; the others (n, ...) or (m, 4), as their kernels say.
    native: (n, 2) sums of squares of u and v at their own points, filled only where they are staggered.
    """
    nx = u[1].shape[2]
    rows = np.empty((14, nx))
    wide = np.empty((3, nx + 2))
    done_centres = 0
    done_w = 0
    done_faces = 0
    for n in range(len(centre) + 1):
        # Means first, up to the highest level that this centre and the faces below it need.
        last = n == len(centre)
        top_centre = count_levels(u) if last else centre[n] + 1
        top_w = count_levels(w) if last else max(w_of_centre[n, 0], w_of_centre[n, 1]) + 1
        while done_centres < top_centre:
            k = done_centres
            means_and_ranges(level(u, k), rows, mean_u[k], span_u[k])
            means_and_ranges(level(v, k), rows, mean_v[k], span_v[k])
            if has_scalar:
                means_and_ranges(level(c, k), rows, mean_c[k], span_c[k])
            done_centres += 1
        while done_w < top_w:
            means_and_ranges(level(w, done_w), rows, mean_w[done_w], span_w[done_w])
            done_w += 1
        if not last:
            k, low, high = centre[n], w_of_centre[n, 0], w_of_centre[n, 1]
            u_k, v_k, w_low, w_high = level(u, k), level(v, k), level(w, low), level(w, high)
            level_moments(
                u_k, v_k, w_low, w_high, level(c, k), mean_u[k], mean_v[k], mean_w[low], mean_w[high], mean_c[k],
                u_arrangement, v_arrangement, has_scalar, higher, rows,
                tiles[n], scalar_tiles[n], moments[n], scalar_moments[n],
            )
            structure_sums(w_low, w_high, dx, dy, wide, structure[n])
            divergence_sums(
                u_k, v_k, level(w, across[n, 0]), level(w, across[n, 1]), u_arrangement, v_arrangement, dx, dy, height[n],
                wide[0], divergence[n],
            )
            if u_arrangement != 0:
                native[n, 0] = native_variance(u_k, mean_u[k], rows[0])
            if v_arrangement != 0:
                native[n, 1] = native_variance(v_k, mean_v[k], rows[0])
        while done_faces < len(face) and above[done_faces] < done_centres and face[done_faces] < done_w:
            f, lo, hi = face[done_faces], below[done_faces], above[done_faces]
            face_moments(
                level(u, lo), level(u, hi), level(v, lo), level(v, hi), level(c, lo), level(c, hi), level(w, f),
                mean_u[lo], mean_u[hi], mean_v[lo], mean_v[hi], mean_c[lo], mean_c[hi], mean_w[f],
                u_arrangement, v_arrangement, has_scalar, rows, faces[done_faces],
            )
            done_faces += 1


@kernel
def scalar_pass(
    u: Pieces, v: Pieces, w: Pieces, c: Pieces, higher: bool, u_arrangement: int, v_arrangement: int,
    centre: Index, w_of_centre: Index, face: Index, below: Index, above: Index,
    mean_u: Float64, mean_v: Float64, mean_w: Float64, mean_c: Float64, span_c: Float64,
    scalar_moments: Float64, scalar_tiles: Float64, faces: Float64,
) -> None:
    """As `block_pass` for one more scalar, with the means of the velocity known."""
    nx = u[1].shape[2]
    rows = np.empty((14, nx))
    tiles = np.empty((scalar_tiles.shape[1], scalar_tiles.shape[2], 6))
    moments = np.empty(14)
    for k in range(count_levels(c)):
        means_and_ranges(level(c, k), rows, mean_c[k], span_c[k])
    for n in range(len(centre)):
        k, low, high = centre[n], w_of_centre[n, 0], w_of_centre[n, 1]
        level_moments(
            level(u, k), level(v, k), level(w, low), level(w, high), level(c, k),
            mean_u[k], mean_v[k], mean_w[low], mean_w[high], mean_c[k],
            u_arrangement, v_arrangement, True, higher, rows, tiles, scalar_tiles[n], moments, scalar_moments[n],
        )
    for m in range(len(face)):
        f, lo, hi = face[m], below[m], above[m]
        face_moments(
            level(u, lo), level(u, hi), level(v, lo), level(v, hi), level(c, lo), level(c, hi), level(w, f),
            mean_u[lo], mean_u[hi], mean_v[lo], mean_v[hi], mean_c[lo], mean_c[hi], mean_w[f],
            u_arrangement, v_arrangement, True, rows, faces[m],
        )
