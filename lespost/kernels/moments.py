"""Moments of one level at cell centres, and fluxes through one face level: sums over rows and tiles, then nothing else.

Results are sums over the points of the level; the caller divides by their number. Means come from `level_mean` as
(reference, offset) pairs. The order of summation is fixed: down the columns of a band of tiles, then along them; so a
level gives the same bits whoever computes it. `lespost.kernels.block` walks the levels.
"""

from __future__ import annotations

from lespost.kernels.compiler import kernel
from lespost.kernels.rows import CENTRED, Float64, Stored, departures, departures_between
from lespost.kernels.sums import (
    add_higher,
    add_scalar_second,
    add_scalar_third,
    add_second,
    sum_of_products,
    sum_of_products_between,
    sum_of_span,
)

#: Columns of the face sums: vertical velocity variance and fluxes of u, v and the scalar.
FACE = ("ww", "uw", "vw", "wc")


@kernel
def level_moments(
    u: Stored, v: Stored, w_lower: Stored, w_upper: Stored, c: Stored,
    mean_u: Float64, mean_v: Float64, mean_lower: Float64, mean_upper: Float64, mean_c: Float64,
    u_arrangement: int, v_arrangement: int, has_scalar: bool, higher: bool, rows: Float64,
    tiles: Float64, scalar_tiles: Float64, moments: Float64, scalar_moments: Float64,
) -> None:
    """Sums of products of departures from the level mean, all components at cell centres.

    u, v, c: (ny, nx) levels; w_lower, w_upper: the face levels below and above, or twice the same centred level.
    rows: (14, nx) work space. tiles: (tiles_y, tiles_x, 6) in the order of SECOND; scalar_tiles: (tiles_y, tiles_x, 2),
    the first two of SCALAR_SECOND. moments: (14,), SECOND then HIGHER; scalar_moments: (7,), SCALAR_SECOND then
    SCALAR_THIRD. All results are set, not added to; those not asked for stay zero.
    """
    tile_ny = u.shape[0] // tiles.shape[0]
    up, vp, wp, cp, columns, scalar_columns = rows[0], rows[1], rows[2], rows[3], rows[4:10], rows[10:14]
    moments[:] = 0.0
    scalar_moments[:] = 0.0
    mean_w = 0.5 * (mean_lower[1] + mean_upper[1])
    for band in range(tiles.shape[0]):
        rows[4:14] = 0.0
        for j in range(band * tile_ny, (band + 1) * tile_ny):
            departures(u, j, u_arrangement, mean_u[0], mean_u[1], up)
            departures(v, j, v_arrangement, mean_v[0], mean_v[1], vp)
            departures_between(w_lower, w_upper, j, CENTRED, mean_lower[0], mean_upper[0], mean_w, wp)
            add_second(up, vp, wp, columns)
            if higher:
                add_higher(up, vp, wp, moments[6:])
            if has_scalar:
                departures(c, j, CENTRED, mean_c[0], mean_c[1], cp)
                add_scalar_second(up, vp, wp, cp, scalar_columns)
                if higher:
                    add_scalar_third(wp, cp, scalar_moments[4:])
        _sum_tiles(columns, tiles[band], moments)
        _sum_tiles(scalar_columns, scalar_tiles[band], scalar_moments)


@kernel
def _sum_tiles(columns: Float64, tiles: Float64, moments: Float64) -> None:
    """Sum a band's columns tile by tile: into tiles[tile, m] for the moments it has room for, and onto moments[m]."""
    width = columns.shape[1] // tiles.shape[0]
    for m in range(columns.shape[0]):
        for tile in range(tiles.shape[0]):
            total = sum_of_span(columns[m], tile * width, (tile + 1) * width)
            moments[m] += total
            if m < tiles.shape[1]:
                tiles[tile, m] = total


@kernel
def face_moments(
    u_below: Stored, u_above: Stored, v_below: Stored, v_above: Stored, c_below: Stored, c_above: Stored, w: Stored,
    mean_u_below: Float64, mean_u_above: Float64, mean_v_below: Float64, mean_v_above: Float64,
    mean_c_below: Float64, mean_c_above: Float64, mean_w: Float64,
    u_arrangement: int, v_arrangement: int, has_scalar: bool, rows: Float64, out: Float64,
) -> None:
    """Sums of `FACE` on a face level: w where it is, the others as the mean of the cells below and above.

    In the horizontal u and v are brought to the cell centre; since averaging is its own adjoint on a periodic grid, this
    is the advective flux of the staggered grid itself, sum of (u averaged in z) times (w averaged in x). rows: (2, nx).
    """
    wp, other = rows[0], rows[1]
    out[:] = 0.0
    offset_u = 0.5 * (mean_u_below[1] + mean_u_above[1])
    offset_v = 0.5 * (mean_v_below[1] + mean_v_above[1])
    offset_c = 0.5 * (mean_c_below[1] + mean_c_above[1])
    for j in range(w.shape[0]):
        departures(w, j, CENTRED, mean_w[0], mean_w[1], wp)
        out[0] += sum_of_products(wp, wp)
        out[1] += _flux_of_row(wp, u_below, u_above, j, u_arrangement, mean_u_below[0], mean_u_above[0], offset_u, other)
        out[2] += _flux_of_row(wp, v_below, v_above, j, v_arrangement, mean_v_below[0], mean_v_above[0], offset_v, other)
        if has_scalar:
            out[3] += _flux_of_row(wp, c_below, c_above, j, CENTRED, mean_c_below[0], mean_c_above[0], offset_c, other)


@kernel
def _flux_of_row(
    w: Float64, below: Stored, above: Stored, j: int, arrangement: int, reference_below: float, reference_above: float,
    offset: float, row: Float64,
) -> float:
    """Sum of products of w with row j of what is carried, averaged to the face."""
    if arrangement == CENTRED:
        return sum_of_products_between(w, below[j], above[j], reference_below, reference_above, offset)
    departures_between(below, above, j, arrangement, reference_below, reference_above, offset, row)
    return sum_of_products(w, row)


@kernel
def native_variance(values: Stored, mean: Float64, row: Float64) -> float:
    """Sum of squared departures at the component's own points: what centring takes away is the difference."""
    total = 0.0
    for j in range(values.shape[0]):
        departures(values, j, CENTRED, mean[0], mean[1], row)
        total += sum_of_products(row, row)
    return total
