"""Canonical datasets whose velocities are formulas, and what the pass would say of their means."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
import xarray as xr

Flow = Callable[[np.ndarray, np.ndarray, np.ndarray, float], np.ndarray]


def still(x: np.ndarray, y: np.ndarray, z: np.ndarray, t: float) -> np.ndarray:
    """No motion."""
    return np.zeros(np.broadcast_shapes(x.shape, y.shape, z.shape))


def constant(value: float) -> Flow:
    """The same velocity everywhere."""
    return lambda x, y, z, t: np.full(np.broadcast_shapes(x.shape, y.shape, z.shape), value)


def water(
    u: Flow = still, v: Flow = still, w: Flow = still, *, size: tuple[int, int, int] = (32, 32, 40),
    lengths: tuple[float, float] = (80.0, 80.0), depth: float = 40.0, times: Sequence[float] = (0.0,), staggered: bool = False,
    dtype: type = np.float64, first: float = 0.5,
) -> xr.Dataset:
    """A canonical dataset of nx, ny, nz = size cells; w on z faces; u, v at centres or on their own faces (staggered).

    first: position of the first centre in grid cells.
    """
    nx, ny, nz = size
    dx, dy = lengths[0] / nx, lengths[1] / ny
    x, y = (np.arange(nx) + first) * dx, (np.arange(ny) + first) * dy
    faces = np.linspace(-depth, 0.0, nz + 1)
    z = 0.5 * (faces[1:] + faces[:-1])
    u_dims, v_dims = ("time", "z", "y", "x_face" if staggered else "x"), ("time", "z", "y_face" if staggered else "y", "x")

    def values(flow: Flow, heights: np.ndarray, at_x: np.ndarray, at_y: np.ndarray) -> np.ndarray:
        grid = (at_x[None, None, :], at_y[None, :, None], heights[:, None, None])
        return np.stack([np.broadcast_to(flow(*grid, t), (heights.size, ny, nx)) for t in times]).astype(dtype)

    half = 0.5 if staggered else 0.0
    data = {"u": (u_dims, values(u, z, x - half * dx, y)), "v": (v_dims, values(v, z, x, y - half * dy)),
            "w": (("time", "z_face", "y", "x"), values(w, faces, x, y))}
    coords = {"time": np.asarray(times, float), "z": z, "z_face": faces, "y": y, "x": x}
    if staggered:
        coords |= {"x_face": x - 0.5 * dx, "y_face": y - 0.5 * dy}
    return xr.Dataset(data, coords=coords, attrs={"Lx": lengths[0], "Ly": lengths[1]})


def means(fields: xr.Dataset) -> xr.Dataset:
    """Horizontal means and variances on centres, as the one pass names them, by plain numpy."""
    parts = {}
    for name in ("u", "v", "w"):
        values = np.asarray(fields[name].values, np.float64)
        if name == "w":
            values = 0.5 * (values[:, 1:] + values[:, :-1])
        parts[name] = (("time", "z"), values.mean((2, 3)))
        parts[name + name] = (("time", "z"), values.var((2, 3)))
    return xr.Dataset(parts, coords={"time": fields["time"], "z": fields["z"]})
