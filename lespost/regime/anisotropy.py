"""Anisotropy of the Reynolds stress: invariants and barycentric coordinates, for any array of tensors."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import xarray as xr


@dataclass(frozen=True)
class Anisotropy:
    """Anisotropy of tensors of any leading shape; NaN where there is no turbulence.

    eigenvalues: (..., 3) of b_ij = R_ij / R_kk - δ_ij / 3, largest first, summing to zero; eigenvectors: (..., 3, 3), columns in
    the same order. one_component, two_component, isotropic: barycentric weights C1, C2, C3, summing to one (Banerjee et al.
    2007). eta, xi: Lumley invariants.
    """

    eigenvalues: np.ndarray
    eigenvectors: np.ndarray
    one_component: np.ndarray
    two_component: np.ndarray
    isotropic: np.ndarray
    eta: np.ndarray
    xi: np.ndarray

    @property
    def coordinates(self) -> tuple[np.ndarray, np.ndarray]:
        """Plane coordinates with one-component at (1, 0), two-component at (0, 0), isotropic at (1/2, √3/2)."""
        return self.one_component + self.isotropic / 2, np.sqrt(3) / 2 * self.isotropic


def tensor(uu: np.ndarray, vv: np.ndarray, ww: np.ndarray, uv: np.ndarray, uw: np.ndarray, vw: np.ndarray) -> np.ndarray:
    """The symmetric tensors (..., 3, 3) of six component arrays."""
    rows = [np.stack(row, axis=-1) for row in ((uu, uv, uw), (uv, vv, vw), (uw, vw, ww))]
    return np.stack(rows, axis=-2)


def anisotropy(stress: np.ndarray) -> Anisotropy:
    """The anisotropy of Reynolds-stress tensors (..., 3, 3) [m2 s-2]."""
    trace = np.trace(stress, axis1=-2, axis2=-1)[..., None, None]
    with np.errstate(invalid="ignore", divide="ignore"):
        b = np.where(trace > 0, stress / np.where(trace > 0, trace, 1.0) - np.eye(3) / 3, np.nan)
    known = np.asarray(np.isfinite(b).all(axis=(-2, -1)))
    values, vectors = np.linalg.eigh(np.where(known[..., None, None], b, 0.0))
    values, vectors = values[..., ::-1], vectors[..., ::-1]
    values = np.where(known[..., None], values, np.nan)
    first, second, third = np.moveaxis(values, -1, 0)
    return Anisotropy(
        values, np.where(known[..., None, None], vectors, np.nan), first - second, 2 * (second - third), 3 * third + 1,
        np.sqrt((first**2 + first * second + second**2) / 3), np.cbrt(-first * second * (first + second) / 2),
    )


#: Variables of `anisotropy_profiles`: name, long_name.
PROFILES = (
    ("anisotropy_one_component", "one_component", "barycentric weight of one-component turbulence, C1"),
    ("anisotropy_two_component", "two_component", "barycentric weight of two-component turbulence, C2"),
    ("anisotropy_isotropic", "isotropic", "barycentric weight of isotropic turbulence, C3"),
    ("anisotropy_eta", "eta", "Lumley invariant eta"),
    ("anisotropy_xi", "xi", "Lumley invariant xi"),
)


def anisotropy_profiles(moments: xr.Dataset) -> xr.Dataset:
    """Barycentric weights and Lumley invariants of the Reynolds stress in `moments`, on the dims of its uu.

    Resolved plus subgrid stress where all of it is known, else the resolved one: a mixture need not be a stress of any flow
    (its weights can leave 0 to 1).
    """
    names = ("uu", "vv", "ww", "uv", "uw", "vw")
    total = all(f"{name}_total" in moments for name in ("uu", "vv", "ww", "uw", "vw"))
    parts = [moments[f"{name}_total" if total and f"{name}_total" in moments else name].values for name in names]
    found = anisotropy(tensor(*parts))
    dims = moments["uu"].dims
    data = {name: (dims, getattr(found, part), {"units": "1", "long_name": text}) for name, part, text in PROFILES}
    return xr.Dataset(data, coords={str(dim): moments[dim] for dim in dims if dim in moments.coords})
