"""Rows of departures from the level's mean, on cell centres: what every sum of `lespost.kernels` is made of.

A level's mean is kept as (reference, offset): the first value of the level and the mean distance from it. Distances of
float32 numbers are exact in float64, so a temperature of 288 K costs no digit. These functions are compiled as written,
since a compiler allowed to reorder could add offset and reference and lose that.

Grid: level[j, i], periodic along both axes. A velocity component on low-side faces is brought to the centre by the mean
of its two neighbours: u[j, i] and u[j, i + 1], v[j, i] and v[j + 1, i], w[k, j, i] and w[k + 1, j, i].
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from lespost.kernels.compiler import kernel

#: Values as stored: float32 or float64.
Stored = NDArray[np.floating]
#: Work space and results.
Float64 = NDArray[np.float64]
#: Levels of one field in two pieces, the lower ones first: halo levels kept from the slab below, and what was read after
#: them. Either may be empty. Joining them would copy the whole field.
Pieces = tuple[Stored, Stored]

#: Arrangement of a component within a level.
CENTRED = 0
ALONG_X = 1
ALONG_Y = 2


@kernel
def level(pieces: Pieces, k: int) -> Stored:
    """Level k of a field in two pieces, counted from the first level of the lower piece."""
    halo = len(pieces[0])
    return pieces[0][k] if k < halo else pieces[1][k - halo]


@kernel
def count_levels(pieces: Pieces) -> int:
    """Number of levels of a field in two pieces."""
    return len(pieces[0]) + len(pieces[1])


@kernel
def level_mean(values: Stored, work: Float64) -> tuple[float, float, float, float]:
    """(reference, offset, smallest, largest) of `values` (ny, nx), whose mean is reference + offset.

    work: (3 or more, nx) work space; sums and extremes run down the columns first, several columns at once.
    The offset is NaN or infinite where a value is; the extremes hold only where it is finite.
    """
    ny, nx = values.shape
    reference = np.float64(values[0, 0])
    columns, lows, highs = work[0], work[1], work[2]
    for i in range(nx):
        columns[i] = 0.0
        lows[i] = np.inf
        highs[i] = -np.inf
    for j in range(0, ny - 1, 2):  # two rows at a time: the columns are loaded and stored half as often
        row, other = values[j], values[j + 1]
        for i in range(nx):
            a, b = np.float64(row[i]), np.float64(other[i])
            columns[i] += (a - reference) + (b - reference)
            low = a if a < b else b
            high = a if a > b else b
            lows[i] = low if low < lows[i] else lows[i]
            highs[i] = high if high > highs[i] else highs[i]
    if ny % 2 == 1:
        row = values[ny - 1]
        for i in range(nx):
            a = np.float64(row[i])
            columns[i] += a - reference
            lows[i] = a if a < lows[i] else lows[i]
            highs[i] = a if a > highs[i] else highs[i]
    total = 0.0
    smallest, largest = np.inf, -np.inf
    for i in range(nx):
        total += columns[i]
        smallest = min(smallest, lows[i])
        largest = max(largest, highs[i])
    return reference, total / (nx * ny), smallest, largest


@kernel
def departures(values: Stored, j: int, arrangement: int, reference: float, offset: float, out: Float64) -> None:
    """Row j of a component's departures from its level mean, at cell centres, into out[0:nx]."""
    ny, nx = values.shape
    row = values[j]
    if arrangement == ALONG_X:
        for i in range(nx - 1):
            out[i] = 0.5 * ((row[i] - reference) + (row[i + 1] - reference)) - offset
        out[nx - 1] = 0.5 * ((row[nx - 1] - reference) + (row[0] - reference)) - offset
    elif arrangement == ALONG_Y:
        other = values[j + 1] if j + 1 < ny else values[0]
        for i in range(nx):
            out[i] = 0.5 * ((row[i] - reference) + (other[i] - reference)) - offset
    else:
        for i in range(nx):
            out[i] = (row[i] - reference) - offset


@kernel
def departures_between(
    lower: Stored, upper: Stored, j: int, arrangement: int, reference_lower: float, reference_upper: float, offset: float,
    out: Float64,
) -> None:
    """Row j of the departures of the mean of two levels (w brought to cell centres, u to faces), into out[0:nx].

    offset: mean distance of the averaged level from the averaged references.
    """
    ny, nx = lower.shape
    a, b = lower[j], upper[j]
    if arrangement == ALONG_X:
        for i in range(nx - 1):
            out[i] = 0.25 * (
                ((a[i] - reference_lower) + (a[i + 1] - reference_lower))
                + ((b[i] - reference_upper) + (b[i + 1] - reference_upper))
            ) - offset
        out[nx - 1] = 0.25 * (
            ((a[nx - 1] - reference_lower) + (a[0] - reference_lower))
            + ((b[nx - 1] - reference_upper) + (b[0] - reference_upper))
        ) - offset
    elif arrangement == ALONG_Y:
        c = lower[j + 1] if j + 1 < ny else lower[0]
        d = upper[j + 1] if j + 1 < ny else upper[0]
        for i in range(nx):
            out[i] = 0.25 * (
                ((a[i] - reference_lower) + (c[i] - reference_lower))
                + ((b[i] - reference_upper) + (d[i] - reference_upper))
            ) - offset
    else:
        for i in range(nx):
            out[i] = 0.5 * ((a[i] - reference_lower) + (b[i] - reference_upper)) - offset


@kernel
def wrapped(values: Stored, j: int, out: Float64) -> None:
    """Row j of a level into out[1:nx+1], with its periodic neighbours in out[0] and out[nx+1]."""
    nx = values.shape[1]
    row = values[j]
    for i in range(nx):
        out[i + 1] = row[i]
    out[0] = row[nx - 1]
    out[nx + 1] = row[0]


@kernel
def wrapped_between(lower: Stored, upper: Stored, j: int, out: Float64) -> None:
    """Row j of the mean of two levels into out[1:nx+1], with its periodic neighbours in out[0] and out[nx+1]."""
    nx = lower.shape[1]
    below, above = lower[j], upper[j]
    for i in range(nx):
        out[i + 1] = 0.5 * (np.float64(below[i]) + np.float64(above[i]))
    out[0] = out[nx]
    out[nx + 1] = out[1]
