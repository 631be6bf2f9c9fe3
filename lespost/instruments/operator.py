"""The forward operator: water velocity along given directions, averaged over sampling volumes, at any place of a periodic domain.

    platform path × beams × sampling volumes × projection × averaging × noise

An instrument states its sampling volumes as weighted points around its platform (`Volumes`); the operator does the rest for
any number of platforms. Components are sampled at their own (staggered) points; of a snapshot only the levels that the volumes
reach are read. Two ways lead from the grid to a point: polynomials through neighbouring points, and the Fourier modes
(spectral.py). Where platforms are at which time is in platform.py and timing.py, what the instrument adds in noise.py.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal, Protocol

import numpy as np
import xarray as xr

from lespost.fields.geometry import on_faces, spacing
from lespost.instruments.settings import Interpolation
from lespost.kernels.interpolation import ORDERS, sample_levels

#: A streak of pings is followed in steps of at most this many grid cells (polynomials only; see `ping_offsets`).
LOOK_STEP = 0.25


@dataclass(frozen=True)
class Volumes:
    """Sampling volumes as weighted points relative to the platform.

    x, y: (points,) offsets from the platform [m]. z: (points,) heights (z up, 0 surface) [m]. weights: (points,). owner: (points,)
    index of the volume a point belongs to, ascending. directions: (volumes, 3) unit vectors onto which velocity is projected.
    The weights of one volume sum to one.
    """

    x: np.ndarray
    y: np.ndarray
    z: np.ndarray
    weights: np.ndarray
    owner: np.ndarray
    directions: np.ndarray

    @property
    def count(self) -> int:
        """Number of volumes."""
        return int(self.directions.shape[0])


@dataclass(frozen=True)
class Streak:
    """Positions of the pings of one ensemble relative to its middle: `pings` of them, equally spaced, covering x, y [m] in all.

    The spread of the pings themselves is (pings - 1)/pings of x, y, each ping standing for its share.
    """

    x: float = 0.0
    y: float = 0.0
    pings: int = 1

    @property
    def length(self) -> float:
        """Length of the streak [m]."""
        return float(np.hypot(self.x, self.y))


@dataclass(frozen=True)
class Component:
    """How one component is reached: levels (points, 2) counted from `first`, their weights (points, 2); levels first..stop are
    read; origin x, y: position of the first grid point [m]."""

    levels: np.ndarray
    weights: np.ndarray
    first: int
    stop: int
    origin_x: float
    origin_y: float


class Sampler(Protocol):
    """What samples one snapshot after the other."""

    volumes: Volumes

    def read(self, time_index: int) -> Any:
        """What is needed of snapshot `time_index`, to be handed to `velocities`."""

    def velocities(self, slab: Any, x: np.ndarray, y: np.ndarray, streak: Streak) -> np.ndarray:
        """Mean over the streak of the velocity along the direction of each volume [m s-1], shape (platforms, volumes).

        x, y: (platforms,) positions of the platforms in the middle of the streak [m].
        """


def vertical_weights(z: np.ndarray, levels: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """(level indices (points, 2), weights (points, 2)) of linear interpolation to heights `z` [m] on ascending `levels` [m].

    Beyond the outermost level its value holds: half a cell for centres, nothing for faces.
    """
    upper = np.clip(np.searchsorted(levels, z), 1, levels.size - 1)
    share = np.clip((z - levels[upper - 1]) / (levels[upper] - levels[upper - 1]), 0.0, 1.0)
    return np.stack([upper - 1, upper], axis=1).astype(np.int64), np.stack([1.0 - share, share], axis=1)


def components(fields: xr.Dataset, volumes: Volumes) -> dict[str, Component]:
    """How u, v, w of the canonical dataset are reached by the volumes, each on its own points."""
    dx, dy = spacing(fields)
    found = {}
    for name in ("u", "v", "w"):
        z_on_face, y_on_face, x_on_face = on_faces(fields, name)
        levels, weights = vertical_weights(volumes.z, np.asarray(fields["z_face" if z_on_face else "z"].values, np.float64))
        first = int(levels.min())
        # a face lies half a spacing before the centre of the same index
        found[name] = Component(levels - first, weights, first, int(levels.max()) + 1,
                                float(fields["x"].values[0]) - 0.5 * dx * x_on_face,
                                float(fields["y"].values[0]) - 0.5 * dy * y_on_face)
    return found


def ping_offsets(streak: Streak, grid_spacing: float) -> tuple[np.ndarray, np.ndarray]:
    """(x, y) offsets [m] at which a streak is looked at: every ping, or as many looks as leave steps of LOOK_STEP cells.

    The midpoint rule with steps δ misses the mean over a wave k by (kδ)²/24: 0.6 % of a wave of four cells.
    """
    looks = min(streak.pings, max(1, int(np.ceil(streak.length / (LOOK_STEP * grid_spacing)))))
    at = (np.arange(looks) + 0.5) / looks - 0.5
    return at * streak.x, at * streak.y


class PolynomialSampler:
    """Polynomials through neighbouring grid points: two (linear), four (cubic) or six (quintic) in each horizontal direction."""

    def __init__(self, fields: xr.Dataset, volumes: Volumes, interpolation: Literal["linear", "cubic", "quintic"] = "cubic") -> None:
        self.volumes, self._fields, self._order = volumes, fields, ORDERS[interpolation]
        self._dx, self._dy = spacing(fields)
        self._nx, self._ny = fields.sizes["x"], fields.sizes["y"]
        self._components = components(fields, volumes)

    def read(self, time_index: int) -> dict[str, np.ndarray]:
        """The levels of u, v, w that the volumes reach, float arrays (levels, y, x)."""
        return read_levels(self._fields, self._components, time_index)

    def velocities(self, slab: dict[str, np.ndarray], x: np.ndarray, y: np.ndarray, streak: Streak) -> np.ndarray:
        """As in `Sampler`."""
        offset_x, offset_y = ping_offsets(streak, min(self._dx, self._dy))
        at_x = (x[:, None] + offset_x).ravel() / self._dx % self._nx
        at_y = (y[:, None] + offset_y).ravel() / self._dy % self._ny
        v = self.volumes
        total = np.zeros((at_x.size, v.count))
        for axis, (name, c) in enumerate(self._components.items()):
            own = np.zeros_like(total)
            sample_levels(slab[name], (v.x - c.origin_x) / self._dx % self._nx, (v.y - c.origin_y) / self._dy % self._ny, at_x, at_y,
                          c.levels, c.weights, v.weights, v.owner, self._order, own)
            total += own * v.directions[None, :, axis]
        return np.asarray(total.reshape(x.size, offset_x.size, v.count).mean(axis=1))


def read_levels(fields: xr.Dataset, parts: dict[str, Component], time_index: int) -> dict[str, np.ndarray]:
    """The levels that `parts` reach, one array (levels, y, x) for each component."""
    return {name: np.ascontiguousarray(fields[name][time_index, c.first:c.stop].values) for name, c in parts.items()}


def make_sampler(fields: xr.Dataset, volumes: Volumes, interpolation: Interpolation) -> Sampler:
    """The sampler of an interpolation by name."""
    if interpolation == "spectral":
        from lespost.instruments.spectral import SpectralSampler

        return SpectralSampler(fields, volumes)
    return PolynomialSampler(fields, volumes, interpolation)
