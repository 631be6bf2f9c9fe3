"""The forward operator on Fourier modes: exact for periodic fields, whatever the position of a point.

Averaging over a volume is a convolution, hence a factor on each mode: the modes of "velocity along the direction of a volume, as
a function of the platform's position" are formed once a snapshot; a position, and a streak of pings, is then a phase. Polynomials
through neighbouring points (operator.py) are faster on large grids and lose a little variance of short waves.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import scipy.fft
import xarray as xr

from lespost.fields.geometry import domain_lengths
from lespost.instruments.operator import Streak, Volumes, components, read_levels
from lespost.instruments.response import ping_mean_response

#: Complex numbers held at a time while modes are summed to positions (about 64 MB).
LARGEST_BLOCK = 4_000_000


class SpectralSampler:
    """Sums the horizontal modes of a snapshot at the places of the volumes; linear in the vertical."""

    def __init__(self, fields: xr.Dataset, volumes: Volumes) -> None:
        self.volumes, self._fields = volumes, fields
        self._components = components(fields, volumes)
        nx, ny = fields.sizes["x"], fields.sizes["y"]
        length_x, length_y = domain_lengths(fields)
        self._kx = 2.0 * np.pi / length_x * np.arange(nx // 2 + 1)
        rows = np.fft.fftfreq(ny, 1.0 / ny)
        # modes of positive kx stand for their conjugates too
        twice = np.full(nx // 2 + 1, 2.0)
        twice[0] = 1.0
        if nx % 2 == 0:
            twice[-1] = 1.0
        self._even_rows = ny % 2 == 0
        if self._even_rows:  # the shortest wave across has no sign: half of it each way, so that between points it stays real
            rows = np.append(rows, ny // 2)
        self._ky = 2.0 * np.pi / length_y * rows
        self._weights = twice / (nx * ny)

    def read(self, time_index: int) -> np.ndarray:
        """Modes of the velocity along each volume's direction, complex (volumes, ky, kx)."""
        modes = {}
        for name, values in read_levels(self._fields, self._components, time_index).items():
            c = self._components[name]
            m: Any = scipy.fft.rfft2(values.astype(np.float64))
            if self._even_rows:
                half = m.shape[1] // 2
                m = np.concatenate([m, m[:, half:half + 1]], axis=1)
                m[:, half] *= 0.5
                m[:, -1] *= 0.5
            phase = np.exp(-1j * self._ky * c.origin_y)[:, None] * np.exp(-1j * self._kx * c.origin_x)
            modes[name] = m * phase
        v = self.volumes
        out = np.zeros((v.count, self._ky.size, self._kx.size), dtype=np.complex128)
        along_x = np.exp(1j * np.outer(v.x, self._kx)) * self._weights
        along_y = np.exp(1j * np.outer(v.y, self._ky)) * v.weights[:, None]
        for point, owner in enumerate(v.owner):
            along = np.zeros(out.shape[1:], dtype=np.complex128)
            for axis, (name, c) in enumerate(self._components.items()):
                share = v.directions[owner, axis]
                if share != 0.0:
                    (low, high), (one, two) = c.levels[point], c.weights[point]
                    along += (share * one) * modes[name][low] + (share * two) * modes[name][high]
            out[owner] += along_y[point][:, None] * (along_x[point] * along)
        return out

    def velocities(self, slab: np.ndarray, x: np.ndarray, y: np.ndarray, streak: Streak) -> np.ndarray:
        """As in `operator.Sampler`; the mean over the pings is a factor on each mode, so every ping counts."""
        phase = 0.5 * (self._kx * streak.x + self._ky[:, None] * streak.y) / streak.pings
        smooth = ping_mean_response(phase, streak.pings)
        to_x = np.exp(1j * np.outer(self._kx, x))
        to_y = np.exp(1j * np.outer(self._ky, y))
        out = np.empty((x.size, self.volumes.count))
        chunk = max(1, LARGEST_BLOCK // (self._ky.size * max(x.size, self._kx.size)))
        for low in range(0, self.volumes.count, chunk):
            part = slab[low:low + chunk] * smooth
            rows = part.reshape(-1, self._kx.size) @ to_x
            out[:, low:low + chunk] = np.einsum("vkp,kp->pv", rows.reshape(-1, self._ky.size, x.size), to_y).real
        return out
