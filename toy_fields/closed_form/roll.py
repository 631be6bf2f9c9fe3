"""Field A: a Langmuir-like roll along x with a jet over its downwelling, in a uniform shear.

    u = J cos(l y) exp(gamma z) + S z,  v = -(W m / l) sin(l y) cos(m z),  w = W cos(l y) sin(m z)
    l = 2 pi / wavelength, m = pi / depth, -depth <= z <= 0

Downwelling (w < 0) at y = 0 for W > 0. All formulas derived in closed form. Angles, signs: x along the wind, z up; fluxes
upward and kinematic. On a grid the amplitude of v is W m~ / l~ with effective wavenumbers (`on_grid`).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from toy_fields.closed_form.layout import Arrangement, effective_wavenumber
from toy_fields.solver.grid import Grid


@dataclass(frozen=True)
class Roll:
    """W vertical amplitude [m s-1], depth H [m], wavelength [m], J jet [m s-1], gamma [m-1], S shear [s-1].

    v_amplitude [m s-1] is W m / l unless a grid changes it.
    """

    vertical_amplitude: float = 0.05
    depth: float = 50.0
    wavelength: float = 100.0
    jet: float = 0.03
    jet_decay: float = 0.1
    shear: float = 0.0
    v_amplitude_on_grid: float | None = None

    @property
    def l(self) -> float:  # noqa: E743 - the field's own symbol
        """Crosswind wavenumber [rad m-1]."""
        return 2 * np.pi / self.wavelength

    @property
    def m(self) -> float:
        """Vertical wavenumber [rad m-1]."""
        return np.pi / self.depth

    @property
    def v_amplitude(self) -> float:
        """Amplitude of v [m s-1]."""
        if self.v_amplitude_on_grid is not None:
            return self.v_amplitude_on_grid
        return self.vertical_amplitude * self.m / self.l

    def on_grid(self, grid: Grid, arrangement: Arrangement) -> Roll:
        """The same roll with the amplitude of v that makes it free of divergence on this grid."""
        across = effective_wavenumber(self.l, grid.dy, arrangement, "horizontal")
        vertical = effective_wavenumber(self.m, grid.dz, arrangement, "vertical")
        return replace(self, v_amplitude_on_grid=self.vertical_amplitude * vertical / across)

    def u(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Along-roll velocity."""
        return self.jet * np.cos(self.l * y) * np.exp(self.jet_decay * z) + self.shear * z

    def v(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Cross-roll velocity: converging on y = 0 at the surface."""
        return -self.v_amplitude * np.sin(self.l * y) * np.cos(self.m * z)

    def w(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float = 0.0) -> np.ndarray:
        """Vertical velocity."""
        return self.vertical_amplitude * np.cos(self.l * y) * np.sin(self.m * z)

    def variance_u(self, z: np.ndarray) -> np.ndarray:
        """<u'u'> [m2 s-2]."""
        return 0.5 * self.jet**2 * np.exp(2 * self.jet_decay * z)

    def variance_v(self, z: np.ndarray) -> np.ndarray:
        """<v'v'> [m2 s-2]."""
        return 0.5 * self.v_amplitude**2 * np.cos(self.m * z) ** 2

    def variance_w(self, z: np.ndarray) -> np.ndarray:
        """<w'w'> [m2 s-2]."""
        return 0.5 * self.vertical_amplitude**2 * np.sin(self.m * z) ** 2

    def flux_uw(self, z: np.ndarray) -> np.ndarray:
        """<u'w'> [m2 s-2]."""
        return 0.5 * self.jet * self.vertical_amplitude * np.exp(self.jet_decay * z) * np.sin(self.m * z)

    def buoyancy_flux(self, z: np.ndarray, buoyancy_amplitude: float) -> np.ndarray:
        """<w'b'> [m2 s-3] for b' = B cos(l y) exp(gamma z)."""
        return 0.5 * self.vertical_amplitude * buoyancy_amplitude * np.exp(self.jet_decay * z) * np.sin(self.m * z)

    def shear_production(self, z: np.ndarray) -> np.ndarray:
        """-<u'w'> dU/dz [m2 s-3]."""
        return -self.flux_uw(z) * self.shear

    def stokes_production(self, z: np.ndarray, surface_stokes_drift: float, stokes_wavenumber: float) -> np.ndarray:
        """-<u'w'> dus/dz [m2 s-3] for us = us0 exp(2 k z)."""
        gradient = 2 * stokes_wavenumber * surface_stokes_drift * np.exp(2 * stokes_wavenumber * z)
        return -self.flux_uw(z) * gradient

    def column_stokes_production(self, surface_stokes_drift: float, stokes_wavenumber: float) -> float:
        """Integral of the Stokes production over the column [m3 s-3]: J W k us0 m (1 + exp(-a H)) / (a² + m²)."""
        a = self.jet_decay + 2 * stokes_wavenumber
        ratio = self.m * (1 + np.exp(-a * self.depth)) / (a**2 + self.m**2)
        return float(self.jet * self.vertical_amplitude * stokes_wavenumber * surface_stokes_drift * ratio)

    def vorticity(self, y: np.ndarray, z: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """(omega_x, omega_y, omega_z) [s-1] of the continuum flow."""
        l, m, decay = self.l, self.m, np.exp(self.jet_decay * z)  # noqa: E741
        return (
            -self.vertical_amplitude * (l**2 + m**2) / l * np.sin(l * y) * np.sin(m * z),
            self.jet * self.jet_decay * decay * np.cos(l * y) + self.shear,
            self.jet * l * decay * np.sin(l * y),
        )

    def stretching_and_tilting(self, y: np.ndarray, z: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """(omega . grad) u [s-2]; the x component vanishes identically."""
        l, m, decay = self.l, self.m, np.exp(self.jet_decay * z)  # noqa: E741
        sin_y, cos_y, sin_z, cos_z = np.sin(l * y), np.cos(l * y), np.sin(m * z), np.cos(m * z)
        omega_y = self.jet * self.jet_decay * decay * cos_y + self.shear
        amplitude = self.vertical_amplitude
        return (
            np.zeros(np.broadcast_shapes(np.shape(y), np.shape(z))),
            amplitude * m * (self.jet * m * decay * sin_y**2 * sin_z - omega_y * cos_y * cos_z),
            amplitude * l * sin_y * (self.jet * m * decay * cos_y * cos_z - omega_y * sin_z),
        )

    def stokes_tilting(
        self, y: np.ndarray, z: np.ndarray, surface_stokes_drift: float, stokes_wavenumber: float
    ) -> np.ndarray:
        """omega_z dus/dz, the x component (the only one) [s-2]."""
        gradient = 2 * stokes_wavenumber * surface_stokes_drift * np.exp(2 * stokes_wavenumber * z)
        return self.vorticity(y, z)[2] * gradient

    def stokes_enstrophy_production(
        self, z: np.ndarray, surface_stokes_drift: float, stokes_wavenumber: float
    ) -> np.ndarray:
        """<omega_x omega_z> dus/dz [s-3]; positive for downwelling jets."""
        exponent = np.exp((self.jet_decay + 2 * stokes_wavenumber) * z)
        amplitude = self.jet * surface_stokes_drift * self.vertical_amplitude * stokes_wavenumber
        return -amplitude * (self.l**2 + self.m**2) * exponent * np.sin(self.m * z)

    def centre_q(self) -> float:
        """Q at the vortex centre (y = wavelength / 4, z = -depth / 2) [s-2]; lambda_2 is minus this without a jet."""
        return self.vertical_amplitude**2 * self.m**2
