"""The forward operator: water velocity along given directions, averaged over sampling volumes, at any place and time.

platform position × beams × sampling volumes × projection. Fields are sampled at their own (staggered) points; only the
levels that the volumes reach are read, one snapshot at a time. Averaging over pings, noise and the like come after
(noise.py); time between snapshots before (timing.py).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import xarray as xr

from lespost.fields.geometry import on_faces, spacing
from lespost.kernels.interpolation import sample_levels


@dataclass(frozen=True)
class Volumes:
    """Sampling volumes as weighted points relative to the platform.

    x, y: (points,) offsets from the platform [m]; z: (points,) heights (z up, 0 surface) [m]; weights: (points,); owner: (points,)
    index of the volume a point belongs to; directions: (volumes, 3) unit vectors onto which velocity is projected.
    The weights of one volume sum to one.
    """

    x: np.ndarray
    y: np.ndarray
    z: np.ndarray
    weights: np.ndarray
    owner: np.ndarray
    directions: np.ndarray


@dataclass(frozen=True)
class Slab:
    """The levels of one snapshot that the volumes reach: arrays by component, and the level each array starts at."""

    arrays: dict[str, np.ndarray]
    first: dict[str, int]


def vertical_weights(z: np.ndarray, levels: np.ndarray, boundary_zero: bool) -> tuple[np.ndarray, np.ndarray]:
    """(level indices (n, 2), weights (n, 2)) of linear interpolation to heights `z` [m] on ascending `levels` [m].

    Outside the levels the nearest value holds; for w on faces (boundary_zero) the end faces are the boundaries themselves.
    """
    upper = np.clip(np.searchsorted(levels, z), 1, levels.size - 1)
    share = np.clip((z - levels[upper - 1]) / (levels[upper] - levels[upper - 1]), 0.0, 1.0)
    return np.stack([upper - 1, upper], axis=1).astype(np.int64), np.stack([1.0 - share, share], axis=1)


class Sampler:
    """Samples snapshots of a canonical dataset with fixed volumes; vertical weights are made once.

    interpolation: "cubic" or "linear" in the horizontal; linear in the vertical.
    """

    def __init__(self, fields: xr.Dataset, volumes: Volumes, interpolation: str = "cubic") -> None:
        self.fields, self.volumes, self.cubic = fields, volumes, interpolation == "cubic"
        self.dx, self.dy = spacing(fields)
        self._levels: dict[str, tuple[np.ndarray, np.ndarray, int, int]] = {}
        self._origin: dict[str, tuple[float, float]] = {}
        for name in ("u", "v", "w"):
            on_z, on_y, on_x = on_faces(fields, name)
            heights = fields["z_face" if on_z else "z"].values
            index, weight = vertical_weights(volumes.z, heights, on_z)
            first, last = int(index.min()), int(index.max()) + 1
            self._levels[name] = (index - first, weight, first, last)
            # faces lie half a spacing before the centre of the same index
            self._origin[name] = (float(fields["x"][0]) / self.dx - 0.5 * on_x, float(fields["y"][0]) / self.dy - 0.5 * on_y)

    def read(self, time_index: int) -> Slab:
        """The levels of snapshot `time_index` that the volumes reach."""
        arrays, first = {}, {}
        for name, (_, _, low, high) in self._levels.items():
            arrays[name] = np.ascontiguousarray(self.fields[name][time_index, low:high].values)
            first[name] = low
        return Slab(arrays, first)

    def velocities(self, slab: Slab, x: np.ndarray, y: np.ndarray, shift_x: np.ndarray | float = 0.0,
                   shift_y: np.ndarray | float = 0.0) -> np.ndarray:
        """Velocity along the direction of each volume [m s-1], shape (platforms, volumes).

        x, y: (platforms,) positions [m]. shift_x, shift_y: further displacement [m], scalar, (platforms,) or
        (platforms, points), by which a moving pattern is looked at.
        """
        v = self.volumes
        count = x.size
        total = np.zeros((count, v.directions.shape[0]))
        for axis, name in enumerate(("u", "v", "w")):
            index, weight, _, _ = self._levels[name]
            ox, oy = self._origin[name]
            out = np.zeros_like(total)
            sx = np.broadcast_to(np.asarray(_columns(x + 0.0)) + _columns(shift_x), (count, v.x.size)) / self.dx
            sy = np.broadcast_to(np.asarray(_columns(y + 0.0)) + _columns(shift_y), (count, v.y.size)) / self.dy
            sample_levels(slab.arrays[name], v.x / self.dx - ox, v.y / self.dy - oy, np.ascontiguousarray(sx),
                          np.ascontiguousarray(sy), index, weight, v.weights, v.owner, self.cubic, out)
            total += out * v.directions[None, :, axis]
        return total


def _columns(values: np.ndarray | float) -> np.ndarray | float:
    """(platforms,) as a column, others as they are."""
    array = np.asarray(values, float)
    return array[:, None] if array.ndim == 1 else array
