"""Geometry of the canonical dataset in one place: spacings, thicknesses, domain lengths, faces and centres.

Everything is read from the coordinates and attributes that `lespost.fields.open` sets; nothing is read from disk.
"""

from __future__ import annotations

import numpy as np
import xarray as xr


def spacing(fields: xr.Dataset) -> tuple[float, float]:
    """(dx, dy) in m: domain length over number of points, so that n * spacing is the period exactly."""
    return float(fields.attrs["Lx"]) / fields.sizes["x"], float(fields.attrs["Ly"]) / fields.sizes["y"]


def domain_lengths(fields: xr.Dataset) -> tuple[float, float]:
    """(Lx, Ly), the horizontal periods in m."""
    return float(fields.attrs["Lx"]), float(fields.attrs["Ly"])


def domain_depth(fields: xr.Dataset) -> float:
    """Distance from the lowest to the highest face, m."""
    faces = fields["z_face"].values
    return float(faces[-1] - faces[0])


def level_thickness(fields: xr.Dataset) -> np.ndarray:
    """Thickness of every cell, m, shape (nz,), deepest first."""
    return np.diff(fields["z_face"].values)


def face_distance(fields: xr.Dataset) -> np.ndarray:
    """Distance between the centres on either side of every face, m, shape (nz + 1,); at the ends twice the half cell."""
    z, faces = fields["z"].values, fields["z_face"].values
    return np.concatenate([[2.0 * (z[0] - faces[0])], np.diff(z), [2.0 * (faces[-1] - z[-1])]])


def on_faces(fields: xr.Dataset, name: str) -> tuple[bool, bool, bool]:
    """Whether variable `name` sits on faces in z, y, x."""
    dims = fields[name].dims
    return "z_face" in dims, "y_face" in dims, "x_face" in dims


def faces_of_levels(first: int, stop: int) -> tuple[int, int]:
    """The faces [first, stop) that bound the cells [first, stop): face k is below cell k, face k + 1 above it."""
    return first, stop + 1


def faces_to_centres(values: np.ndarray, axis: int) -> np.ndarray:
    """Two-point average from n + 1 faces to n centres along `axis`.

    A wave of wavelength L along the axis keeps cos^2(pi * spacing / L) of its variance: half at four spacings.
    """
    n = values.shape[axis]
    low, high = np.take(values, range(n - 1), axis), np.take(values, range(1, n), axis)
    return np.asarray(0.5 * (low + high))


def periodic_faces_to_centres(values: np.ndarray, axis: int) -> np.ndarray:
    """Two-point average from n low-side faces to n centres along a periodic `axis`."""
    return np.asarray(0.5 * (values + np.roll(values, -1, axis)))
