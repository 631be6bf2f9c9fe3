"""Canonical datasets in memory for tests: closed-form fields on collocated and staggered grids, and random ones."""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np
import xarray as xr

Function = Callable[[np.ndarray, np.ndarray, np.ndarray], np.ndarray]


def dataset(
    arrays: Mapping[str, np.ndarray], *, staggered: bool, vertical: bool,
    lengths: tuple[float, float, float] = (100.0, 80.0, 50.0), chunk: int | None = None, **attrs: object,
) -> xr.Dataset:
    """arrays[name]: (time, levels, ny, nx). staggered: u, v on low-side faces; vertical: w, nu_sgs on z faces.

    lengths: Lx, Ly, depth in m. chunk: levels per chunk of the pretended store.
    """
    nz, (ny, nx) = arrays["u"].shape[1], arrays["u"].shape[2:]
    length_x, length_y, depth = lengths
    faces = np.linspace(-depth, 0.0, nz + 1)
    variables = {}
    for name, values in arrays.items():
        z = "z_face" if values.shape[1] == nz + 1 else "z"
        y = "y_face" if staggered and name == "v" else "y"
        x = "x_face" if staggered and name == "u" else "x"
        encoding = {} if chunk is None else {"preferred_chunks": {"time": 1, z: chunk, y: ny, x: nx}}
        variables[name] = xr.Variable(("time", z, y, x), values, {"units": "K"} if name == "theta" else {}, encoding)
    assert (arrays["w"].shape[1] == nz + 1) == vertical
    dx, dy = length_x / nx, length_y / ny
    coordinates = {
        "time": 600.0 * np.arange(arrays["u"].shape[0]), "z": 0.5 * (faces[1:] + faces[:-1]), "z_face": faces,
        "x": dx * np.arange(nx), "y": dy * np.arange(ny),
    }  # fmt: skip
    if staggered:
        coordinates |= {"x_face": coordinates["x"] - dx / 2, "y_face": coordinates["y"] - dy / 2}
    scheme = "staggered" if staggered else "central"
    return xr.Dataset(variables, coordinates, {"Lx": length_x, "Ly": length_y, "horizontal_scheme": scheme, **attrs})


def from_functions(
    functions: Mapping[str, Function], shape: tuple[int, int, int], *, staggered: bool, vertical: bool,
    lengths: tuple[float, float, float] = (100.0, 80.0, 50.0), dtype: str = "float64", **attrs: object,
) -> xr.Dataset:
    """One snapshot of functions of (x, y, z) [m], each taken at its own points of the grid. shape: (nz, ny, nx)."""
    nz, ny, nx = shape
    length_x, length_y, depth = lengths
    faces = np.linspace(-depth, 0.0, nz + 1)
    arrays = {}
    for name, function in functions.items():
        z = faces if vertical and name in ("w", "nu_sgs") else 0.5 * (faces[1:] + faces[:-1])
        y = length_y / ny * (np.arange(ny) - (0.5 if staggered and name == "v" else 0.0))
        x = length_x / nx * (np.arange(nx) - (0.5 if staggered and name == "u" else 0.0))
        values = function(x[None, None, :], y[None, :, None], z[:, None, None])
        arrays[name] = np.broadcast_to(values, (len(z), ny, nx)).astype(dtype)[None].copy()
    return dataset(arrays, staggered=staggered, vertical=vertical, lengths=lengths, **attrs)


def random_arrays(
    rng: np.random.Generator, shape: tuple[int, int, int], times: int = 1, *, vertical: bool = True, dtype: str = "float32",
    names: tuple[str, ...] = ("u", "v", "w", "theta"),
) -> dict[str, np.ndarray]:
    """White noise with means and skewness of its own on each level; theta near 288 K; w = 0 at the ends of a staggered grid."""
    nz, ny, nx = shape
    arrays = {}
    for name in names:
        levels = nz + 1 if vertical and name in ("w", "nu_sgs") else nz
        values = rng.standard_normal((times, levels, ny, nx))
        values = 0.02 * (values + 0.3 * values**2) + rng.standard_normal((times, levels, 1, 1))
        if name == "theta":
            values = 288.0 + 0.1 * values
        if name in ("nu_sgs", "tke_sgs"):
            values = np.abs(values)
        if name == "w" and vertical:
            values[:, 0] = values[:, -1] = 0.0
        arrays[name] = values.astype(dtype)
    return arrays


def centred(fields: xr.Dataset, name: str) -> np.ndarray:
    """A field at cell centres in float64, by plain numpy."""
    values = fields[name].values.astype(np.float64)
    if "z_face" in fields[name].dims:
        values = 0.5 * (values[:, 1:] + values[:, :-1])
    if "x_face" in fields[name].dims:
        values = 0.5 * (values + np.roll(values, -1, axis=3))
    if "y_face" in fields[name].dims:
        values = 0.5 * (values + np.roll(values, -1, axis=2))
    return values


def departure(values: np.ndarray) -> np.ndarray:
    """Departure from the mean of each level, in extended precision so that the reference is the better of the two."""
    wide = values.astype(np.longdouble)
    return wide - wide.mean(axis=(-2, -1), keepdims=True)
