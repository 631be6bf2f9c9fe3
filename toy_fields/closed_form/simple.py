"""Field C (the ABC flow), field D (solid rotation, pure strain) and a linear shear.

The ABC flow is periodic in z as well; the others are not periodic in the horizontal, so horizontal wrap-around means
nothing on them: their datasets are for pointwise derivatives away from the edges.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class AbcFlow:
    """u = A sin z + C cos y, v = B sin x + A cos z, w = C sin y + B cos x with x, y, z in units of 1 / wavenumber.

    A Beltrami flow: vorticity = wavenumber times velocity, so the vortex stretching is undone by advection.
    """

    a: float = 1.0
    b: float = 0.7
    c: float = 0.4
    wavenumber: float = 1.0

    def u(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Velocity along x."""
        return self.a * np.sin(self.wavenumber * z) + self.c * np.cos(self.wavenumber * y) + 0.0 * x

    def v(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Velocity along y."""
        return self.b * np.sin(self.wavenumber * x) + self.a * np.cos(self.wavenumber * z) + 0.0 * y

    def w(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Vertical velocity."""
        return self.c * np.sin(self.wavenumber * y) + self.b * np.cos(self.wavenumber * x) + 0.0 * z

    def vorticity(self, x: np.ndarray, y: np.ndarray, z: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """wavenumber times (u, v, w) [s-1]."""
        return (
            self.wavenumber * self.u(x, y, z), self.wavenumber * self.v(x, y, z), self.wavenumber * self.w(x, y, z),
        )

    def kinetic_energy(self) -> float:
        """Volume mean of (u² + v² + w²) / 2 = (A² + B² + C²) / 2 [m2 s-2]."""
        return 0.5 * (self.a**2 + self.b**2 + self.c**2)


@dataclass(frozen=True)
class SolidRotation:
    """u = -Omega (y - y0), v = Omega (x - x0): vorticity 2 Omega, Q = Omega², lambda_2 = -Omega²."""

    rate: float
    x0: float = 0.0
    y0: float = 0.0

    def u(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Velocity along x."""
        return -self.rate * (y - self.y0) + 0.0 * (x + z)

    def v(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Velocity along y."""
        return self.rate * (x - self.x0) + 0.0 * (y + z)

    def w(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Zero."""
        return 0.0 * (x + y + z)

    def vertical_vorticity(self) -> float:
        """2 Omega [s-1]."""
        return 2 * self.rate

    def q(self) -> float:
        """Q = Omega² [s-2]; lambda_2 is minus this."""
        return self.rate**2


@dataclass(frozen=True)
class PureStrain:
    """u = s (x - x0), v = -s (y - y0): no vorticity, Q = -s²."""

    rate: float
    x0: float = 0.0
    y0: float = 0.0

    def u(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Velocity along x."""
        return self.rate * (x - self.x0) + 0.0 * (y + z)

    def v(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Velocity along y."""
        return -self.rate * (y - self.y0) + 0.0 * (x + z)

    def w(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Zero."""
        return 0.0 * (x + y + z)

    def q(self) -> float:
        """Q = -s² [s-2]."""
        return -(self.rate**2)


@dataclass(frozen=True)
class LinearShear:
    """U = S_x z + U0, V = S_y z + V0, w = 0: no variance, no flux at all."""

    shear_x: float
    shear_y: float = 0.0
    u0: float = 0.0
    v0: float = 0.0

    def u(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Velocity along x."""
        return self.shear_x * z + self.u0 + 0.0 * (x + y)

    def v(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Velocity along y."""
        return self.shear_y * z + self.v0 + 0.0 * (x + y)

    def w(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Zero."""
        return 0.0 * (x + y + z)
