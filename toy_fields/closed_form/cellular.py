"""Field B: a three-dimensional cellular flow; with two of its amplitudes zero it is a single Fourier mode.

    u = A sin kx cos ly cos mz,  v = B cos kx sin ly cos mz,  w = C cos kx cos ly sin mz,  A k + B l + C m = 0

Means below are over the horizontal and over whole wavelengths in z. All formulas derived in closed form.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from toy_fields.closed_form.layout import Arrangement, effective_wavenumber
from toy_fields.errors import ToyRequestError
from toy_fields.solver.grid import Grid


@dataclass(frozen=True)
class Cellular:
    """Amplitudes A, B [m s-1] and wavenumbers k, l, m [rad m-1]; C follows from continuity unless a grid changes it."""

    a: float = 0.02
    b: float = 0.03
    k: float = 2 * np.pi / 100.0
    l: float = 2 * np.pi / 80.0  # noqa: E741 - the field's own symbol
    m: float = np.pi / 50.0
    c_on_grid: float | None = None

    def __post_init__(self) -> None:
        if self.m == 0:
            raise ToyRequestError("cellular flow: the vertical wavenumber must not be zero.")

    @property
    def c(self) -> float:
        """Amplitude of w [m s-1]."""
        if self.c_on_grid is not None:
            return self.c_on_grid
        return -(self.a * self.k + self.b * self.l) / self.m

    def on_grid(self, grid: Grid, arrangement: Arrangement) -> Cellular:
        """The same flow with the amplitude of w that makes it free of divergence on this grid."""
        k = effective_wavenumber(self.k, grid.dx, arrangement, "horizontal")
        across = effective_wavenumber(self.l, grid.dy, arrangement, "horizontal")
        m = effective_wavenumber(self.m, grid.dz, arrangement, "vertical")
        return replace(self, c_on_grid=-(self.a * k + self.b * across) / m)

    def u(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Velocity along x."""
        return self.a * np.sin(self.k * x) * np.cos(self.l * y) * np.cos(self.m * z)

    def v(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Velocity along y."""
        return self.b * np.cos(self.k * x) * np.sin(self.l * y) * np.cos(self.m * z)

    def w(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Vertical velocity."""
        return self.c * np.cos(self.k * x) * np.cos(self.l * y) * np.sin(self.m * z)

    def variance_u(self, z: np.ndarray) -> np.ndarray:
        """<u'u'> [m2 s-2]."""
        return 0.25 * self.a**2 * np.cos(self.m * z) ** 2 * (1 + (self.l == 0)) * (self.k != 0)

    def variance_v(self, z: np.ndarray) -> np.ndarray:
        """<v'v'> [m2 s-2]."""
        return 0.25 * self.b**2 * np.cos(self.m * z) ** 2 * (1 + (self.k == 0)) * (self.l != 0)

    def variance_w(self, z: np.ndarray) -> np.ndarray:
        """<w'w'> [m2 s-2]."""
        return 0.25 * self.c**2 * np.sin(self.m * z) ** 2 * (1 + (self.l == 0)) * (1 + (self.k == 0))

    def vorticity(self, x: np.ndarray, y: np.ndarray, z: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """(omega_x, omega_y, omega_z) [s-1] of the continuum flow."""
        k, l, m = self.k, self.l, self.m  # noqa: E741
        return (
            (self.b * m - self.c * l) * np.cos(k * x) * np.sin(l * y) * np.sin(m * z),
            (self.c * k - self.a * m) * np.sin(k * x) * np.cos(l * y) * np.sin(m * z),
            (self.a * l - self.b * k) * np.sin(k * x) * np.sin(l * y) * np.cos(m * z),
        )

    def enstrophy_components(self) -> tuple[float, float, float]:
        """Volume means of omega_x², omega_y², omega_z² [s-2] (none of k, l, m zero)."""
        k, l, m = self.k, self.l, self.m  # noqa: E741
        return (
            (self.b * m - self.c * l) ** 2 / 8, (self.c * k - self.a * m) ** 2 / 8, (self.a * l - self.b * k) ** 2 / 8,
        )

    def kinetic_energy(self) -> float:
        """Volume mean of (u² + v² + w²) / 2 [m2 s-2] (none of k, l, m zero)."""
        return (self.a**2 + self.b**2 + self.c**2) / 16

    def dissipation_over_viscosity(self) -> float:
        """Volume mean of 2 S_ij S_ij = (k² + l² + m²) (A² + B² + C²) / 8 [s-2] (none of k, l, m zero)."""
        return (self.k**2 + self.l**2 + self.m**2) * (self.a**2 + self.b**2 + self.c**2) / 8

    def stretching_and_tilting(
        self, x: np.ndarray, y: np.ndarray, z: np.ndarray
    ) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """(omega . grad) u [s-2]; its product with omega vanishes in the volume mean."""
        k, l, m, a, b, c = self.k, self.l, self.m, self.a, self.b, self.c  # noqa: E741
        x2, y2, z2 = np.sin(2 * k * x), np.sin(2 * l * y), np.sin(2 * m * z)
        return (
            0.25 * a * k * (b * m - c * l) * y2 * z2,
            0.25 * b * l * (c * k - a * m) * x2 * z2,
            0.25 * c * m * (a * l - b * k) * x2 * y2,
        )

    def stokes_tilting(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, stokes_gradient: np.ndarray) -> np.ndarray:
        """omega_z dus/dz, the x component [s-2]."""
        return self.vorticity(x, y, z)[2] * stokes_gradient
