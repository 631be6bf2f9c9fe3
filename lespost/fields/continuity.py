"""How well a sample of u, v, w is solenoidal under each arrangement of its axes and positions: pure arrays, no files.

A discretely solenoidal flow has divergence at round-off under the arrangement and differences of the model that made it,
and of the order of its gradients under any other. Each term of the divergence is computed once per variant; every
combination is then scored from the inner products of the terms (one small matrix), not from the fields.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np

Horizontal = Literal["centre", "low_face", "high_face"]
#: Offset of w in index space: w[k] at the centre of cell k, on its low-index side, on its high-index side; or nz + 1 faces.
WOffset = Literal["centre", "low", "high", "faces", "interior"]


@dataclass(frozen=True)
class Score:
    """One arrangement. residual: rms divergence / root of the summed mean squares of its three terms [1].

    roundoff: the residual that the rounding of the numbers alone would leave. z_sign: +1 if height increases with index.
    """

    u_position: Horizontal
    v_position: Horizontal
    w_offset: WOffset
    z_sign: int
    scheme: Literal["spectral", "central", "staggered"]
    residual: float
    roundoff: float
    divergence_rms: float
    scale: float


def significant_bits(values: np.ndarray) -> int:
    """Bits that the numbers really carry: 24 or 53 less the trailing zeros common to all of them.

    Files are often rounded before compression; the round-off of what is stored is then coarser than that of its type.
    """
    contiguous = np.ascontiguousarray(values)
    if contiguous.dtype == np.float32:
        bits, total = contiguous.view(np.uint32), 24
    else:
        bits, total = contiguous.astype(np.float64, copy=False).view(np.uint64), 53
    union = int(np.bitwise_or.reduce(bits, axis=None)) & ((1 << (total - 1)) - 1)
    if union == 0:
        return 1
    trailing = (union & -union).bit_length() - 1
    return total - trailing


def rounding_error(values: np.ndarray) -> float:
    """rms error of `values` through rounding to their significant bits (uniform error of at most half a unit)."""
    # spacing relative to the number lies between 2^-bits*2 and 2^-bits; the error is uniform over one spacing
    relative = 1.5 * 2.0 ** -significant_bits(values) / math.sqrt(3.0)
    return relative * float(np.sqrt(np.mean(np.square(values, dtype=np.float64))))


def spectral_derivative(values: np.ndarray, spacing: float, axis: int) -> np.ndarray:
    """Derivative of a periodic field by its Fourier series, the Nyquist mode left out."""
    n = values.shape[axis]
    wavenumber = 2.0 * np.pi * np.fft.rfftfreq(n, spacing)
    if n % 2 == 0:
        wavenumber[-1] = 0.0
    shape = [1] * values.ndim
    shape[axis] = len(wavenumber)
    transformed = np.fft.rfft(values, axis=axis) * (1j * wavenumber.reshape(shape))
    return np.fft.irfft(transformed, n, axis=axis)


def _difference(values: np.ndarray, axis: int, ahead: int, behind: int, spacing: float) -> np.ndarray:
    difference: np.ndarray = np.roll(values, -ahead, axis) - np.roll(values, behind, axis)
    return difference / ((ahead + behind) * spacing)


def _variants(values: np.ndarray, spacing: float, axis: int) -> dict[str, tuple[np.ndarray, float]]:
    """Every way to differentiate along a periodic axis, with the factor by which it amplifies rounding errors."""
    return {
        "spectral": (spectral_derivative(values, spacing, axis), math.pi / math.sqrt(3.0) / spacing),
        "central": (_difference(values, axis, 1, 1, spacing), 1.0 / math.sqrt(2.0) / spacing),
        "low_face": (_difference(values, axis, 1, 0, spacing), math.sqrt(2.0) / spacing),
        "high_face": (_difference(values, axis, 0, 1, spacing), math.sqrt(2.0) / spacing),
    }


def w_terms(
    w: np.ndarray, first: int, k0: int, cells: int, thickness: np.ndarray, offsets: tuple[WOffset, ...]
) -> dict[WOffset, np.ndarray]:
    """d w / d(height in index direction) in cells k0 .. k0 + cells - 1, for each of `offsets` that the levels allow.

    w: (levels, y, x), the levels number `first` and following of the file. thickness: of all cells, in index order [m].
    """
    k = np.arange(k0, k0 + cells)
    dz = thickness[k][:, None, None]
    last = first + w.shape[0] - 1

    def between(low: np.ndarray, high: np.ndarray, distance: np.ndarray) -> np.ndarray | None:
        if low[0] < first or high[-1] > last:
            return None
        return np.asarray((w[high - first] - w[low - first]) / distance, np.float64)

    out: dict[WOffset, np.ndarray] = {}
    for offset in offsets:
        if offset in ("faces", "low"):
            term = between(k, k + 1, dz)
        elif offset in ("high", "interior"):
            term = between(k - 1, k, dz)
        elif k[0] == 0 or k[-1] + 1 >= len(thickness):
            term = None
        else:
            apart = thickness[k - 1] / 2 + thickness[k] + thickness[k + 1] / 2
            term = between(k - 1, k + 1, apart[:, None, None])
        if term is not None:
            out[offset] = term
    return out


def offsets_of(levels: int, nz: int) -> tuple[WOffset, ...]:
    """Offsets that `levels` levels of w allow above nz cells; empty if none fits."""
    return {nz + 1: ("faces",), nz: ("low", "high", "centre"), nz - 1: ("interior",)}.get(levels, ())  # type: ignore[return-value]


def scores(
    u: np.ndarray, v: np.ndarray, w: Mapping[WOffset, np.ndarray], w_rounding: float, dx: float, dy: float, dz: float
) -> list[Score]:
    """The residual of every arrangement of one assignment of the axes.

    u, v: (z, y, x) in the cells of the sample, x and y ascending and periodic. w: d w/d index of each offset. w_rounding:
    rms rounding error of w. dz: typical thickness [m]. Both vertical directions are scored.
    """
    ux = _variants(np.asarray(u, np.float64), dx, 2)
    vy = _variants(np.asarray(v, np.float64), dy, 1)
    terms: list[np.ndarray] = []
    number: dict[tuple[str, str], int] = {}
    for kind, table in (("u", {k: a for k, (a, _) in ux.items()}), ("v", {k: a for k, (a, _) in vy.items()}), ("w", dict(w))):
        for key, array in table.items():
            number[kind, key] = len(terms)
            terms.append(array.ravel())
    table_of_terms = np.stack(terms)
    matrix = (table_of_terms @ table_of_terms.T) / terms[0].size
    u_rounding, v_rounding = rounding_error(u), rounding_error(v)
    found = []
    pairs: list[tuple[str, str]] = [("spectral", "spectral"), ("central", "central")]
    pairs += [(a, b) for a in ("low_face", "high_face") for b in ("low_face", "high_face")]
    for x_kind, y_kind in pairs:
        i, j = number["u", x_kind], number["v", y_kind]
        for offset in w:
            k = number["w", offset]
            gain_w = (1.0 / math.sqrt(2.0) if offset == "centre" else math.sqrt(2.0)) / dz
            noise = math.hypot(u_rounding * ux[x_kind][1], v_rounding * vy[y_kind][1], w_rounding * gain_w)
            scale = math.sqrt(matrix[i, i] + matrix[j, j] + matrix[k, k])
            for sign in (1, -1):
                square = matrix[i, i] + matrix[j, j] + matrix[k, k]
                square += 2.0 * (matrix[i, j] + sign * (matrix[i, k] + matrix[j, k]))
                rms = math.sqrt(max(square, 0.0))
                residual = rms / scale if scale > 0.0 else math.nan
                staggered = x_kind not in ("spectral", "central")
                found.append(Score(
                    x_kind if staggered else "centre", y_kind if staggered else "centre",  # type: ignore[arg-type]
                    offset, sign, "staggered" if staggered else x_kind,  # type: ignore[arg-type]
                    residual, noise / scale if scale > 0.0 else math.nan, rms, scale,
                ))  # fmt: skip
    return found
