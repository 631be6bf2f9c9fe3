"""Convergence lines at a chosen angle: straight, periodic downwelling lines that may move and be skewed.

With phase p = k x + l y - omega t and S(z) = sin(-pi z / depth):
    w = -W [cos p + r cos 2p] S(z),  horizontal velocity along (k, l) from continuity,
    plus a jet J cos p exp(gamma z) along the lines.

Downwelling at p = 0. The wavevector must fit the box: it is given by whole numbers of waves along x and y. Spacing is the
distance between successive downwelling lines. Angles in degrees counter-clockwise from +x.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from toy_fields.closed_form.layout import Arrangement, effective_wavenumber
from toy_fields.errors import ToyRequestError
from toy_fields.solver.grid import Grid


@dataclass(frozen=True)
class ConvergenceLines:
    """waves_x, waves_y: whole waves along the box; vertical_amplitude W [m s-1]; harmonic r; speed of the pattern along
    its wavevector [m s-1]; jet J [m s-1] and its decay [m-1]; lengths and depth of the box [m].

    u_amplitudes, v_amplitudes: of the two harmonics, set by `on_grid`.
    """

    waves_x: int
    waves_y: int
    length_x: float
    length_y: float
    depth: float
    vertical_amplitude: float = 0.03
    harmonic: float = 0.0
    speed: float = 0.0
    jet: float = 0.0
    jet_decay: float = 0.1
    amplitudes_on_grid: tuple[tuple[float, float], tuple[float, float]] | None = None

    def __post_init__(self) -> None:
        if self.waves_x == 0 and self.waves_y == 0:
            raise ToyRequestError("convergence lines: give at least one wave along x or y.")

    @property
    def k(self) -> float:
        """Wavenumber along x [rad m-1]."""
        return 2 * np.pi * self.waves_x / self.length_x

    @property
    def l(self) -> float:  # noqa: E743 - the field's own symbol
        """Wavenumber along y [rad m-1]."""
        return 2 * np.pi * self.waves_y / self.length_y

    @property
    def m(self) -> float:
        """Vertical wavenumber [rad m-1]."""
        return np.pi / self.depth

    @property
    def wavenumber(self) -> float:
        """Modulus of the horizontal wavevector [rad m-1]."""
        return float(np.hypot(self.k, self.l))

    @property
    def spacing(self) -> float:
        """Distance between successive downwelling lines [m]."""
        return 2 * np.pi / self.wavenumber

    @property
    def axis(self) -> float:
        """Direction of the lines [degree, -90 < axis <= 90]."""
        angle = float(np.rad2deg(np.arctan2(self.l, self.k))) + 90.0
        return 90.0 - (90.0 - angle) % 180.0

    @property
    def amplitudes(self) -> tuple[tuple[float, float], tuple[float, float]]:
        """Amplitudes of u and v of either harmonic [m s-1]: ((u1, v1), (u2, v2))."""
        if self.amplitudes_on_grid is not None:
            return self.amplitudes_on_grid
        return self._amplitudes(((self.k, self.l), (2 * self.k, 2 * self.l)), self.m)

    def on_grid(self, grid: Grid, arrangement: Arrangement) -> ConvergenceLines:
        """The same lines with horizontal amplitudes that make them free of divergence on this grid."""
        pairs = tuple(
            (
                effective_wavenumber(n * self.k, grid.dx, arrangement, "horizontal"),
                effective_wavenumber(n * self.l, grid.dy, arrangement, "horizontal"),
            )
            for n in (1, 2)
        )
        vertical = effective_wavenumber(self.m, grid.dz, arrangement, "vertical")
        return replace(self, amplitudes_on_grid=self._amplitudes((pairs[0], pairs[1]), vertical))

    def _amplitudes(
        self, pairs: tuple[tuple[float, float], tuple[float, float]], m: float
    ) -> tuple[tuple[float, float], tuple[float, float]]:
        (k1, l1), (k2, l2) = pairs
        first = self.vertical_amplitude * m / (k1**2 + l1**2)
        second = 0.0
        if self.harmonic != 0.0:
            second = self.harmonic * self.vertical_amplitude * m / (k2**2 + l2**2)
        return (first * k1, first * l1), (second * k2, second * l2)

    def phase(self, x: np.ndarray, y: np.ndarray, time: float) -> np.ndarray:
        """k x + l y - omega t [rad]; 0 on a downwelling line."""
        return self.k * x + self.l * y - self.wavenumber * self.speed * time

    def u(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Velocity along x."""
        return self._horizontal(x, y, z, time, 0) + self._jet(x, y, z, time) * np.cos(np.deg2rad(self.axis))

    def v(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Velocity along y."""
        return self._horizontal(x, y, z, time, 1) + self._jet(x, y, z, time) * np.sin(np.deg2rad(self.axis))

    def w(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Vertical velocity: w = -W [cos p + r cos 2p] sin(-m z)."""
        p = self.phase(x, y, time)
        return self.vertical_amplitude * (np.cos(p) + self.harmonic * np.cos(2 * p)) * np.sin(self.m * z)

    def _horizontal(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float, component: int) -> np.ndarray:
        p = self.phase(x, y, time)
        first, second = self.amplitudes[0][component], self.amplitudes[1][component]
        return -(first * np.sin(p) + second * np.sin(2 * p)) * np.cos(self.m * z)

    def _jet(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float) -> np.ndarray:
        return self.jet * np.cos(self.phase(x, y, time)) * np.exp(self.jet_decay * z)

    def variance_w(self, z: np.ndarray) -> np.ndarray:
        """<w'w'> [m2 s-2]."""
        return 0.5 * self.vertical_amplitude**2 * (1 + self.harmonic**2) * np.sin(self.m * z) ** 2

    def variance_across(self, z: np.ndarray) -> np.ndarray:
        """Variance of the velocity along the wavevector, jet excluded [m2 s-2]."""
        total = sum(a**2 + b**2 for a, b in self.amplitudes)
        return 0.5 * total * np.cos(self.m * z) ** 2

    def variance_along(self, z: np.ndarray) -> np.ndarray:
        """Variance of the velocity along the lines [m2 s-2]."""
        return 0.5 * self.jet**2 * np.exp(2 * self.jet_decay * z)

    def skewness_w(self) -> float:
        """<w'³> / <w'²>^(3/2) [1], the same at every depth: -(3 r / 4) / ((1 + r²) / 2)^(3/2)."""
        r = self.harmonic
        return float(-(0.75 * r) / (0.5 * (1 + r**2)) ** 1.5)
