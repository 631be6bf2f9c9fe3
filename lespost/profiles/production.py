"""Production and turbulent transport of resolved turbulent kinetic energy in the wave-averaged equations.

Shear -(⟨u'w'⟩ dU/dz + ⟨v'w'⟩ dV/dz) with U the Eulerian mean, Stokes the same with the Stokes drift, buoyancy ⟨w'b'⟩,
transport -½ d⟨w'u'ᵢu'ᵢ⟩/dz. Fluxes at faces times differences of cell means: by parts this gives back exactly what the mean
flow loses. Total (resolved + subgrid) fluxes are used where the files tell the subgrid part.
"""

from __future__ import annotations

import numpy as np
import xarray as xr

from lespost.profiles.sgs import faces_to_cells

#: long_name of each term; all in m2 s-3.
TERMS = {
    "tke_shear": "shear production of turbulent kinetic energy",
    "tke_stokes": "Stokes production of turbulent kinetic energy",
    "tke_buoyancy": "buoyancy production of turbulent kinetic energy",
    "tke_transport": "turbulent transport of resolved turbulent kinetic energy",
}


def close_surface(profiles: xr.Dataset, forcing: xr.Dataset) -> xr.Dataset:
    """`profiles` with the surface fluxes that the forcing declares as the subgrid flux at the surface face.

    A model imposes the flux there, its subgrid part carries all of it (w = 0). Totals and cell values beside the surface follow.
    Only where the pass knows subgrid fluxes, and where the forcing is known.
    """
    out = profiles.copy()
    angle = np.radians(forcing["stress_direction"].values)
    squared = forcing["friction_velocity"].values ** 2
    surface = {"uw": -squared * np.cos(angle), "vw": -squared * np.sin(angle), "wtheta": forcing["surface_temperature_flux"].values}
    if abs(float(profiles["z_face"][-1])) > 1e-6 * abs(float(profiles["z_face"][0])):
        return out  # the domain ends below the surface
    for name, flux in surface.items():
        if f"{name}_sgs_face" not in out or not np.isfinite(flux).all():
            continue
        faces = out[f"{name}_sgs_face"].values.copy()
        faces[:, -1] = flux
        out[f"{name}_sgs_face"] = out[f"{name}_sgs_face"].copy(data=faces)
        total = out[f"{name}_face"].values + faces
        out[f"{name}_total_face"] = out[f"{name}_total_face"].copy(data=total)
        out[f"{name}_sgs"] = out[f"{name}_sgs"].copy(data=faces_to_cells(faces))
        out[f"{name}_total"] = out[f"{name}_total"].copy(data=out[name].values + out[f"{name}_sgs"].values)
        out[f"{name}_sgs_face"].attrs["surface"] = "declared surface flux"
    return out


def add_production(profiles: xr.Dataset, forcing: xr.Dataset) -> xr.Dataset:
    """`profiles` with tke_shear, tke_stokes, tke_buoyancy, tke_transport [m2 s-3] on (time, z).

    A term whose ingredients are unknown is NaN. velocity_kind "lagrangian" in the attrs: the mean is reduced by the Stokes
    drift first, so that nothing of the Stokes production hides in the shear production.
    """
    out = profiles.copy()
    z, faces = profiles["z"].values, profiles["z_face"].values
    mean = {"u": profiles["u"].values.copy(), "v": profiles["v"].values.copy()}
    drift = {"u": forcing["stokes_u"].values, "v": forcing["stokes_v"].values}
    if profiles.attrs.get("velocity_kind") == "lagrangian":
        mean = {name: mean[name] - drift[name] for name in mean}
    terms = {
        "tke_shear": _production(profiles, mean, z),
        "tke_stokes": _production(profiles, drift, z),
        "tke_buoyancy": _buoyancy(profiles, forcing),
        "tke_transport": _transport(profiles, z, faces),
    }
    for name, values in terms.items():
        out[name] = (("time", "z"), values, {"units": "m2 s-3", "long_name": TERMS[name], "cell_methods": "area: mean"})
    return out


def _flux(profiles: xr.Dataset, name: str) -> tuple[np.ndarray, bool]:
    """(total flux if known else resolved, whether it is at faces)."""
    for candidate in (f"{name}_total_face", f"{name}_face"):
        if candidate in profiles:
            return profiles[candidate].values, True
    return profiles[f"{name}_total" if f"{name}_total" in profiles else name].values, False


def _production(profiles: xr.Dataset, mean: dict[str, np.ndarray], z: np.ndarray) -> np.ndarray:
    total: np.ndarray | float = 0.0
    for component, values in mean.items():
        flux, on_faces = _flux(profiles, f"{component}w")
        if on_faces:
            at_faces = np.full(flux.shape, np.nan)
            at_faces[:, 1:-1] = -flux[:, 1:-1] * np.diff(values, axis=1) / np.diff(z)
            total = total + faces_to_cells(at_faces)
        else:
            total = total - flux * np.gradient(values, z, axis=1)
    return np.asarray(total)


def _buoyancy(profiles: xr.Dataset, forcing: xr.Dataset) -> np.ndarray:
    gravity, expansion = float(forcing["gravity"]), float(forcing["thermal_expansion"])
    shape = profiles["u"].shape
    if "wtheta" not in profiles:
        return np.full(shape, np.nan)
    flux, on_faces = _flux(profiles, "wtheta")
    heat = faces_to_cells(flux) if on_faces else flux
    out = gravity * expansion * heat
    if "wsalinity" in profiles:
        salt, salt_on_faces = _flux(profiles, "wsalinity")
        out = out - gravity * float(forcing["haline_contraction"]) * (faces_to_cells(salt) if salt_on_faces else salt)
    return np.asarray(out)


def _transport(profiles: xr.Dataset, z: np.ndarray, faces: np.ndarray) -> np.ndarray:
    if not {"uuw", "vvw", "www"} <= set(profiles.data_vars):
        return np.full(profiles["u"].shape, np.nan)
    carried = 0.5 * (profiles["uuw"].values + profiles["vvw"].values + profiles["www"].values)
    at_faces = np.zeros((carried.shape[0], faces.size))  # no turbulence is carried through the boundaries
    at_faces[:, 1:-1] = 0.5 * (carried[:, 1:] + carried[:, :-1])
    return -np.diff(at_faces, axis=1) / np.diff(faces)


def layer_shares(mean: xr.Dataset, bottom: float, top: float) -> dict[str, float]:
    """Integrals over bottom <= z <= top of the production terms of a window [m3 s-3]; NaN where a term is unknown."""
    z, faces = mean["z"].values, mean["z_face"].values
    inside = (z >= bottom) & (z <= top)
    thickness = np.diff(faces)[inside]
    return {name: float((mean[f"tke_{name}"].values[inside] * thickness).sum()) for name in ("shear", "stokes", "buoyancy")}
