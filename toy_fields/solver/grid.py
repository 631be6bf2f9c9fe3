"""Where values live: a box periodic in x and y, uniform in z, with w on the faces between levels.

x, y: every variable at the same nx × ny points (derivatives are spectral). z: u, v and scalars at the nz cell centres,
w at the nz + 1 faces from bottom to surface. Fourier modes are kept below two thirds of the grid's limit and only those
are stored: an array of modes is (levels, ky, kx) with kx >= 0. Transforms stand in `transforms`.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from toy_fields.errors import GridError


@dataclass(frozen=True)
class Grid:
    """nx, ny: even numbers of points (>= 6); nz: number of levels (>= 4); lengths and depth in m."""

    nx: int
    ny: int
    nz: int
    length_x: float
    length_y: float
    depth: float

    def __post_init__(self) -> None:
        for name, n in (("nx", self.nx), ("ny", self.ny)):
            if n % 2:
                raise GridError(f"{name} = {n} is odd: the horizontal transforms need an even number; use {n + 1}.")
            if n < 6:
                raise GridError(f"{name} = {n} leaves no mode after dealiasing: use 6 or more.")
        if self.nz < 4:
            raise GridError(f"nz = {self.nz}: use 4 or more levels.")
        for name, length in (("length_x", self.length_x), ("length_y", self.length_y), ("depth", self.depth)):
            if not (np.isfinite(length) and length > 0):
                raise GridError(f"{name} = {length} m: give a positive length.")

    @property
    def dx(self) -> float:
        """Spacing along x [m]."""
        return self.length_x / self.nx

    @property
    def dy(self) -> float:
        """Spacing along y [m]."""
        return self.length_y / self.ny

    @property
    def dz(self) -> float:
        """Thickness of a level [m]."""
        return self.depth / self.nz

    @cached_property
    def x(self) -> np.ndarray:
        """Points along x [m], (nx,)."""
        return (np.arange(self.nx) + 0.5) * self.dx

    @cached_property
    def y(self) -> np.ndarray:
        """Points along y [m], (ny,)."""
        return (np.arange(self.ny) + 0.5) * self.dy

    @cached_property
    def z(self) -> np.ndarray:
        """Cell centres [m], (nz,), deepest first, negative below the surface."""
        return -self.depth + (np.arange(self.nz) + 0.5) * self.dz

    @cached_property
    def z_face(self) -> np.ndarray:
        """Faces [m], (nz + 1,), from -depth to 0."""
        return -self.depth + np.arange(self.nz + 1) * self.dz

    @property
    def kept_x(self) -> int:
        """Number of kx kept: 0 ... kept_x - 1, all strictly below nx / 3."""
        return (self.nx + 2) // 3

    @property
    def kept_y(self) -> int:
        """Number of ky >= 0 kept; the negative ones are one fewer."""
        return (self.ny + 2) // 3

    @property
    def modes_shape(self) -> tuple[int, int]:
        """Shape (ky, kx) of one level of modes."""
        return 2 * self.kept_y - 1, self.kept_x

    @cached_property
    def kx(self) -> np.ndarray:
        """Wavenumbers along x [rad m-1], (1, kx)."""
        return (2 * np.pi / self.length_x * np.arange(self.kept_x))[None, :]

    @cached_property
    def ky(self) -> np.ndarray:
        """Wavenumbers along y [rad m-1], (ky, 1): 0 ... positive, then negative ones ascending to -1."""
        positive = np.arange(self.kept_y)
        negative = np.arange(-(self.kept_y - 1), 0)
        return (2 * np.pi / self.length_y * np.concatenate([positive, negative]))[:, None]

    @cached_property
    def filter_width(self) -> float:
        """Width of the smallest resolved eddy (dx' dy' dz)^(1/3) [m], dx' and dy' being those of the kept modes."""
        return float((1.5 * self.dx * 1.5 * self.dy * self.dz) ** (1.0 / 3.0))
