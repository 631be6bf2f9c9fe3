"""Sums of products of departures: the innermost loops, run on several numbers at once by the processor.

Second moments are summed down the columns (`columns[m, i]` grows by the products at column i of each row), so that a band
of rows can be cut into tiles afterwards at no cost; higher moments are summed along the row. All products are made in
float64. `lespost.kernels.rows` fills the rows; `lespost.kernels.moments` walks levels and tiles.
"""

from __future__ import annotations

from lespost.kernels.compiler import kernel, reordering_kernel
from lespost.kernels.rows import Float64, Stored

#: Second moments of velocity, in the order of `add_second`; also the ones kept for every tile.
SECOND = ("uu", "vv", "ww", "uv", "uw", "vw")
#: Third and fourth moments of velocity, in the order of `add_higher`.
HIGHER = ("uuu", "vvv", "www", "uuw", "vvw", "uuuu", "vvvv", "wwww")
#: Second moments with a scalar c, in the order of `add_scalar_second`; the first two are kept for every tile.
SCALAR_SECOND = ("cc", "wc", "uc", "vc")
#: Third moments with a scalar c, in the order of `add_scalar_third`.
SCALAR_THIRD = ("ccc", "ccw", "wwc")


@kernel
def add_second(u: Float64, v: Float64, w: Float64, columns: Float64) -> None:
    """Add the products of `SECOND` at each point of a row to columns[0:6, i]."""
    uu, vv, ww, uv, uw, vw = columns[0], columns[1], columns[2], columns[3], columns[4], columns[5]
    for i in range(len(u)):
        a, b, c = u[i], v[i], w[i]
        uu[i] += a * a
        vv[i] += b * b
        ww[i] += c * c
        uv[i] += a * b
        uw[i] += a * c
        vw[i] += b * c


@kernel
def add_scalar_second(u: Float64, v: Float64, w: Float64, c: Float64, columns: Float64) -> None:
    """Add the products of `SCALAR_SECOND` at each point of a row to columns[0:4, i]."""
    cc, wc, uc, vc = columns[0], columns[1], columns[2], columns[3]
    for i in range(len(u)):
        d = c[i]
        cc[i] += d * d
        wc[i] += w[i] * d
        uc[i] += u[i] * d
        vc[i] += v[i] * d


@reordering_kernel
def add_higher(u: Float64, v: Float64, w: Float64, out: Float64) -> None:
    """Add the sums of `HIGHER` over a row to out[0:8]."""
    uuu = vvv = www = uuw = vvw = uuuu = vvvv = wwww = 0.0
    for i in range(len(u)):
        a, b, c = u[i], v[i], w[i]
        aa, bb, cc = a * a, b * b, c * c
        uuu += aa * a
        vvv += bb * b
        www += cc * c
        uuw += aa * c
        vvw += bb * c
        uuuu += aa * aa
        vvvv += bb * bb
        wwww += cc * cc
    out[0] += uuu
    out[1] += vvv
    out[2] += www
    out[3] += uuw
    out[4] += vvw
    out[5] += uuuu
    out[6] += vvvv
    out[7] += wwww


@reordering_kernel
def add_scalar_third(w: Float64, c: Float64, out: Float64) -> None:
    """Add the sums of `SCALAR_THIRD` over a row to out[0:3]."""
    ccc = ccw = wwc = 0.0
    for i in range(len(w)):
        d, e = c[i], w[i]
        ccc += d * d * d
        ccw += d * d * e
        wwc += e * e * d
    out[0] += ccc
    out[1] += ccw
    out[2] += wwc


@reordering_kernel
def sum_of_products(a: Float64, b: Float64) -> float:
    """Sum of products over a row."""
    total = 0.0
    for i in range(len(a)):
        total += a[i] * b[i]
    return total


@reordering_kernel
def sum_of_products_between(
    a: Float64, lower: Stored, upper: Stored, reference_lower: float, reference_upper: float, offset: float
) -> float:
    """Sum of products of `a` with the departures of the mean of two levels' rows, without storing these.

    `a` must add up to zero over its level: then a reordered offset, off by a rounding, cannot be felt in the sum.
    """
    total = 0.0
    for i in range(len(a)):
        total += a[i] * (0.5 * ((lower[i] - reference_lower) + (upper[i] - reference_upper)) - offset)
    return total


@reordering_kernel
def sum_of_span(a: Float64, start: int, stop: int) -> float:
    """Sum over start <= i < stop."""
    total = 0.0
    for i in range(start, stop):
        total += a[i]
    return total
