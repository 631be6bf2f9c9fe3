"""A plain four-beam Doppler profiler that looks upward into a running solver.

It is written independently of `lespost.instruments` on purpose: the invented record should not share a mistake with the
virtual instrument it is compared with. Velocities are taken from the Fourier modes at the beams' own horizontal
positions, so nothing is lost to horizontal interpolation; along the beam a triangle of twice the cell length weights the
velocities, which are linear between levels.

Geometry (heights above the head; beams 1, 2 in the x-z plane, 3, 4 in the y-z plane, positive away from the head):
    b1 = u sin(angle) + w cos(angle), b2 = -u sin(angle) + w cos(angle), b3, b4 likewise with v.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from toy_fields.errors import ToyRequestError
from toy_fields.solver.grid import Grid
from toy_fields.solver.state import State

#: Points per cell length at which the range weight is evaluated.
_SUBPOINTS = 8


@dataclass(frozen=True)
class Profiler:
    """head_depth [m], beam_angle from the vertical [degree], cell_length (vertical) [m], blanking distance (vertical)
    [m], position x, y of the head [m]."""

    head_depth: float = 25.0
    beam_angle: float = 20.0
    cell_length: float = 1.0
    blanking: float = 1.0
    x: float = 80.0
    y: float = 80.0

    @property
    def depths(self) -> np.ndarray:
        """Depths of the cell centres [m], shallowest first, all below the surface."""
        count = int((self.head_depth - self.blanking - self.cell_length) / self.cell_length + 1e-9)
        return self.head_depth - self.blanking - self.cell_length * np.arange(count, 0, -1)

    @property
    def contaminated_depth(self) -> float:
        """Cells shallower than this [m] hear the surface through the side lobes: D (1 - cos(angle)) + 1.5 cells
        (Lentz et al. 2022)."""
        return self.head_depth * (1.0 - float(np.cos(np.deg2rad(self.beam_angle)))) + 1.5 * self.cell_length

    @property
    def directions(self) -> np.ndarray:
        """Unit vectors of the four beams, (4, 3)."""
        angle = np.deg2rad(self.beam_angle)
        s, c = np.sin(angle), np.cos(angle)
        return np.array([[s, 0.0, c], [-s, 0.0, c], [0.0, s, c], [0.0, -s, c]])

    def velocities(self, beams: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
        """u, v, w and error velocity from beam velocities (4, ...); the error velocity has the noise of u."""
        angle = np.deg2rad(self.beam_angle)
        s, c = np.sin(angle), np.cos(angle)
        u = (beams[0] - beams[1]) / (2 * s)
        v = (beams[2] - beams[3]) / (2 * s)
        w = np.sum(beams, axis=0) / (4 * c)
        error = (beams[0] + beams[1] - beams[2] - beams[3]) / (2 * np.sqrt(2.0) * s)
        return u, v, w, error


@dataclass
class BeamSampler:
    """Reads beam velocities of `profiler` out of the modes of a state on `grid`."""

    grid: Grid
    profiler: Profiler
    _phases: list[np.ndarray] = field(init=False)
    _phases_face: list[np.ndarray] = field(init=False)
    _range_weights: np.ndarray = field(init=False)

    def __post_init__(self) -> None:
        if self.profiler.head_depth >= self.grid.depth:
            raise ToyRequestError(
                f"profiler at {self.profiler.head_depth} m in a box {self.grid.depth} m deep: put it higher."
            )
        self._phases = [self._phase(direction, self.grid.z) for direction in self.profiler.directions]
        self._phases_face = [self._phase(direction, self.grid.z_face) for direction in self.profiler.directions]
        self._range_weights = self._weights()

    def beams(self, state: State) -> np.ndarray:
        """Beam velocities (4, depth) [m s-1], positive away from the head, depths as `Profiler.depths`."""
        result = np.empty((4, len(self.profiler.depths)))
        for n, direction in enumerate(self.profiler.directions):
            along = np.zeros(self.grid.nz)
            for component, values in ((direction[0], state.u), (direction[1], state.v)):
                if component != 0.0:
                    along += component * np.einsum("kji,kji->k", self._phases[n], values).real
            w_face = np.einsum("kji,kji->k", self._phases_face[n], state.w).real
            along += direction[2] * 0.5 * (w_face[1:] + w_face[:-1])
            result[n] = self._range_weights @ along
        return result

    def _phase(self, direction: np.ndarray, z: np.ndarray) -> np.ndarray:
        """exp(i k x) of a beam at each level; modes of kx > 0 count twice, for their conjugates."""
        reach = (z + self.profiler.head_depth) / direction[2]
        x = self.profiler.x + reach * direction[0]
        y = self.profiler.y + reach * direction[1]
        # Modes refer to the first grid point, which lies half a spacing inside the box.
        angle = (
            self.grid.kx[None] * (x - self.grid.x[0])[:, None, None]
            + self.grid.ky[None] * (y - self.grid.y[0])[:, None, None]
        )
        phase = np.exp(1j * angle)
        phase[:, :, 1:] *= 2.0
        return phase

    def _weights(self) -> np.ndarray:
        """(depth, level): triangular range weight times linear interpolation between levels."""
        offsets = (np.arange(-_SUBPOINTS, _SUBPOINTS + 1)) / _SUBPOINTS
        triangle = 1.0 - np.abs(offsets)
        triangle /= triangle.sum()
        weights = np.zeros((len(self.profiler.depths), self.grid.nz))
        for n, depth in enumerate(self.profiler.depths):
            for offset, share in zip(offsets, triangle, strict=True):
                z = min(-depth + offset * self.profiler.cell_length, 0.0)
                position = np.clip((z - self.grid.z[0]) / self.grid.dz, 0.0, self.grid.nz - 1.0)
                low = min(int(position), self.grid.nz - 2)
                weights[n, low] += share * (low + 1 - position)
                weights[n, low + 1] += share * (position - low)
        return weights
