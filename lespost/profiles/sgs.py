"""Subgrid parts of fluxes and variances, from the eddy viscosity or the subgrid energy that the files hold.

With nu_sgs: tau_13 = -nu (du/dz + dw/dx), tau_23 = -nu (dv/dz + dw/dy), flux of a scalar c = -(nu / Pr) dc/dz, kinematic,
positive upward, formed where w is (on faces where it is staggered). With tke_sgs = e: (2/3) e in each velocity variance.
On the lowest and highest face a model imposes the flux instead of forming it from a viscosity: it cannot be known from the
fields and stays empty there; the cells next to them carry the value of their inner face.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from lespost.kernels.subgrid import subgrid_pass
from lespost.profiles.blocks import Block
from lespost.profiles.layout import Layout
from lespost.profiles.names import scalar_names

#: Share of the subgrid energy in the variance of each component: isotropic subgrid motion.
SHARE_OF_ENERGY = 2.0 / 3.0


def subgrid_statistics(block: Block) -> dict[str, np.ndarray]:
    """Mean subgrid fluxes of a block: `_sgs_face` (m,) where w is on faces, else `_sgs` (n,); subgrid energy `tke_sgs` (n,)."""
    out: dict[str, np.ndarray] = {}
    if "nu_sgs" in block.arrays:
        out |= _from_viscosity(block)
    if "tke_sgs" in block.arrays:
        out |= _from_energy(block)
    return out


def _two_levels(block: Block, name: str, faces: np.ndarray) -> np.ndarray:
    """(m, 2) positions in a field of the levels whose mean sits on `faces`."""
    if name in block.layout.on_z_faces:
        return np.stack([faces, faces], axis=1) - block.first[name]
    return np.stack([faces - 1, faces], axis=1) - block.first[name]


def _from_viscosity(block: Block) -> dict[str, np.ndarray]:
    layout = block.layout
    points = layout.ny * layout.nx
    if layout.w_on_faces:
        owned = np.arange(block.z0, block.z1 + (block.z1 == layout.nz))
        place = owned[(owned > 0) & (owned < layout.nz)]  # faces with a cell on either side
        low, high = place - 1, place
        nu_of, w_of, suffix = _two_levels(block, "nu_sgs", place), _two_levels(block, "w", place), "_sgs_face"
    else:
        owned = place = np.arange(block.z0, block.z1)
        low, high = np.maximum(place - 1, 0), np.minimum(place + 1, layout.nz - 1)
        w_of, suffix = np.stack([place, place], axis=1) - block.first["w"], "_sgs"
        nu_of = np.stack([place, place + ("nu_sgs" in layout.on_z_faces)], axis=1) - block.first["nu_sgs"]
    height = np.ascontiguousarray(layout.z[high] - layout.z[low])
    out: dict[str, np.ndarray] = {}
    # A scalar's flux needs the Prandtl number: without one it is left out rather than guessed.
    scalars = layout.scalars if layout.prandtl_number is not None else ()
    for position in range(max(1, len(scalars))):
        name = scalars[position] if scalars else None
        sums = np.zeros((len(place), 3))
        if len(place):
            subgrid_pass(
                block.arrays["nu_sgs"], block.arrays["u"], block.arrays["v"], block.arrays["w"],
                block.arrays["u" if name is None else name], name is not None, layout.u_arrangement, layout.v_arrangement,
                nu_of, w_of, low - block.first["u"], high - block.first["u"], height, layout.dx, layout.dy, sums,
            )
        inside = np.isin(owned, place)

        def spread(values: np.ndarray, inside: np.ndarray = inside) -> np.ndarray:
            full = np.full(len(inside), np.nan)
            full[inside] = values / points
            return full

        if position == 0:
            out["uw" + suffix], out["vw" + suffix] = spread(sums[:, 0]), spread(sums[:, 1])
        if name is not None and layout.prandtl_number is not None:
            out[f"{scalar_names(name).moment('wc')}{suffix}"] = spread(sums[:, 2] / layout.prandtl_number)
    return out


def _from_energy(block: Block) -> dict[str, np.ndarray]:
    layout = block.layout
    energy = np.concatenate([piece.mean(axis=(1, 2), dtype=np.float64) for piece in block.arrays["tke_sgs"]])
    if "tke_sgs" not in layout.on_z_faces:
        low = block.z0 - block.first["tke_sgs"]
        return {"tke_sgs": energy[low : low + block.z1 - block.z0]}
    energy = energy[: block.z1 - block.z0 + 1]  # a slab may hold levels of the next one
    out = {"tke_sgs": 0.5 * (energy[:-1] + energy[1:])}
    if layout.w_on_faces:
        out["tke_sgs_face"] = energy if block.z1 == layout.nz else energy[:-1]
    return out


def faces_to_cells(faces: np.ndarray) -> np.ndarray:
    """(..., nz + 1) to (..., nz): the mean of a cell's two faces; the known one where the other is empty."""
    low, high = faces[..., :-1], faces[..., 1:]
    mean = 0.5 * (low + high)
    mean = np.where(np.isnan(low), high, mean)
    return np.where(np.isnan(high), low, mean)


def with_totals(data: Mapping[str, np.ndarray], layout: Layout) -> dict[str, np.ndarray]:
    """`data` (time, z) with subgrid parts at cell centres and totals: X_total = X + X_sgs, X_total_face likewise."""
    out = dict(data)
    for name in [name for name in data if name.endswith("_sgs_face") and name != "tke_sgs_face"]:
        out[name.removesuffix("_face")] = faces_to_cells(data[name])
    if "tke_sgs" in data:
        for pair in ("uu", "vv", "ww"):
            out[f"{pair}_sgs"] = SHARE_OF_ENERGY * data["tke_sgs"]
    if "tke_sgs_face" in data:
        out["ww_sgs_face"] = SHARE_OF_ENERGY * data["tke_sgs_face"]
    for name in [name for name in out if name.endswith("_sgs") and name != "tke_sgs"]:
        resolved = name.removesuffix("_sgs")
        out[f"{resolved}_total"] = out[resolved] + out[name]
        if f"{name}_face" in out and f"{resolved}_face" in out:
            out[f"{resolved}_total_face"] = out[f"{resolved}_face"] + out[f"{name}_face"]
    return out
