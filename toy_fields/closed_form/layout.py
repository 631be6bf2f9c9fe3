"""Where the values of a closed-form flow lie, and what a derivative becomes there.

Three arrangements, all with uniform spacing and periodic in x and y:
  "collocated"  u, v, w at cell centres; horizontal_scheme "central" (two-cell differences)
  "staggered"   u on x_face, v on y_face, w on z_face: the C-grid; x_face[i] is the low side of cell i
  "spectral"    u, v at cell centres, w on z_face; horizontal derivatives exact

A difference of sin(k x) is its exact derivative with an effective wavenumber in place of k: 2 sin(k dx / 2) / dx between
neighbours, sin(k dx) / dx over two cells. Flows that state their amplitudes through effective wavenumbers are free of
divergence to round-off on the grid, not only in the continuum.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal, Protocol

import numpy as np
import xarray as xr

from toy_fields.errors import ToyRequestError
from toy_fields.solver.grid import Grid

Arrangement = Literal["collocated", "staggered", "spectral"]
ARRANGEMENTS: tuple[Arrangement, ...] = ("collocated", "staggered", "spectral")
_SCHEMES: dict[Arrangement, str] = {"collocated": "central", "staggered": "staggered", "spectral": "spectral"}


class Flow(Protocol):
    """A flow in closed form. Each component broadcasts over x, y, z [m] and takes a time [s]; SI units."""

    def u(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float) -> np.ndarray: ...

    def v(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float) -> np.ndarray: ...

    def w(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float) -> np.ndarray: ...


def effective_wavenumber(
    wavenumber: float, spacing: float, arrangement: Arrangement, axis: Literal["horizontal", "vertical"]
) -> float:
    """What a difference on this arrangement makes of d/dx of a wave: rad m-1, the sign of `wavenumber` kept."""
    if arrangement == "collocated":
        return float(np.sin(wavenumber * spacing) / spacing)
    if arrangement == "spectral" and axis == "horizontal":
        return wavenumber
    return float(2.0 * np.sin(0.5 * wavenumber * spacing) / spacing)


def check_arrangement(arrangement: str) -> Arrangement:
    """`arrangement` if it is one of the three. Raises ToyRequestError."""
    for known in ARRANGEMENTS:
        if arrangement == known:
            return known
    raise ToyRequestError(f'arrangement "{arrangement}" is not known; use {", ".join(ARRANGEMENTS)}.')


def x_face(grid: Grid) -> np.ndarray:
    """Low side of every cell along x [m], (nx,)."""
    return np.arange(grid.nx) * grid.dx


def y_face(grid: Grid) -> np.ndarray:
    """Low side of every cell along y [m], (ny,)."""
    return np.arange(grid.ny) * grid.dy


def dataset(
    flow: Flow, grid: Grid, arrangement: Arrangement = "spectral", times: Sequence[float] = (0.0,),
    dtype: Literal["float32", "float64"] = "float64", **attributes: str | float,
) -> xr.Dataset:
    """The canonical dataset of `flow` at `times` [s]: u, v, w where `arrangement` puts them, forcing in `attributes`."""
    check_arrangement(arrangement)
    staggered = arrangement == "staggered"
    positions = {
        "u": ("z", "y", "x_face" if staggered else "x"),
        "v": ("z", "y_face" if staggered else "y", "x"),
        "w": ("z" if arrangement == "collocated" else "z_face", "y", "x"),
    }
    points = {"x": grid.x, "y": grid.y, "z": grid.z, "z_face": grid.z_face, "x_face": x_face(grid), "y_face": y_face(grid)}
    names = {
        "u": "sea_water_x_velocity", "v": "sea_water_y_velocity", "w": "upward_sea_water_velocity",
    }
    variables = {}
    for name, dims in positions.items():
        z = points[dims[0]][:, None, None]
        y = points[dims[1]][None, :, None]
        x = points[dims[2]][None, None, :]
        shape = (z.size, y.size, x.size)
        values = np.stack([np.broadcast_to(getattr(flow, name)(x, y, z, t), shape) for t in times])
        variables[name] = (("time", *dims), values.astype(dtype), {"units": "m s-1", "standard_name": names[name]})
    used = {dim for dims in positions.values() for dim in dims} | {"x", "y", "z"}
    axes = {"x": "X", "y": "Y", "z": "Z"}
    coordinates: dict[str, tuple[str, np.ndarray, dict[str, str]]] = {
        name: (name, points[name], {"units": "m", "axis": axes[name[0]]}) for name in points if name in used
    }
    for name in ("z", "z_face"):
        if name in coordinates:
            coordinates[name][2].update(positive="up", standard_name="height")
    coordinates["time"] = ("time", np.asarray(times, dtype=np.float64), {"units": "s", "axis": "T"})
    attrs: dict[str, str | float] = {
        "title": f"closed-form flow: {type(flow).__name__}",
        "source": "toy_fields: a flow in closed form",
        "Conventions": "CF-1.11",
        "velocity_kind": "eulerian",
        "horizontal_scheme": _SCHEMES[arrangement],
        "Lx": grid.length_x,
        "Ly": grid.length_y,
        **attributes,
    }
    return xr.Dataset(variables, coords=coordinates, attrs=attrs)


def divergence(fields: xr.Dataset) -> np.ndarray:
    """Discrete divergence [s-1] of u, v, w at cell centres, (time, z, y, x), by the dataset's own scheme.

    For "collocated" fields the top and bottom levels are left out: two-cell differences do not reach them.
    """
    scheme = str(fields.attrs["horizontal_scheme"])
    u, v, w = (fields[name].values.astype(np.float64) for name in "uvw")
    dx = float(fields.attrs["Lx"]) / u.shape[3]
    dy = float(fields.attrs["Ly"]) / v.shape[2]
    dz = float(np.diff(fields["z"].values)[0])
    if scheme == "staggered":
        return (np.roll(u, -1, 3) - u) / dx + (np.roll(v, -1, 2) - v) / dy + np.diff(w, axis=1) / dz
    if scheme == "central":
        horizontal = (np.roll(u, -1, 3) - np.roll(u, 1, 3)) / (2 * dx) + (np.roll(v, -1, 2) - np.roll(v, 1, 2)) / (2 * dy)
        return horizontal[:, 1:-1] + (w[:, 2:] - w[:, :-2]) / (2 * dz)
    kx = 2 * np.pi * np.fft.rfftfreq(u.shape[3], dx)
    ky = 2 * np.pi * np.fft.fftfreq(v.shape[2], dy)[:, None]
    u_x = np.fft.irfft(1j * kx * np.fft.rfft(u, axis=3), u.shape[3], axis=3)
    v_y = np.fft.ifft(1j * ky * np.fft.fft(v, axis=2), axis=2).real
    return u_x + v_y + np.diff(w, axis=1) / dz
