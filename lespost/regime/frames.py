"""Axes: along and cross are nothing without a reference. Rotation of second moments by algebra, and the axes to choose from.

Angles in degrees, counter-clockwise from +x. The axis of cells is a director: it has no head, and is given within (-90, 90].
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import xarray as xr

from lespost.regime.settings import Frame

#: Coherence of the w field from which its axis is plain to see, and from which it is more than sampling noise; calibrated on
#: the toy fields: plane rolls 1, Langmuir turbulence about 0.5, shear turbulence 0.1 to 0.3, convection below 0.05.
PLAIN_COHERENCE, SMALLEST_COHERENCE = 0.2, 0.05

FRAME_WORD = {"wind": "wind", "stokes": "Stokes drift", "cell": "cell", "shear": "Lagrangian shear"}


@dataclass(frozen=True)
class Axis:
    """angle [degree] of "along"; kind: wind, stokes, cell or shear; coherence of the w field, NaN for other kinds."""

    angle: float
    kind: str
    coherence: float = float("nan")


def rotate(uu: np.ndarray, vv: np.ndarray, uv: np.ndarray, angle: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """(along, cross, their covariance) of horizontal second moments for an axis at `angle` [degree]."""
    c, s = np.cos(np.radians(angle)), np.sin(np.radians(angle))
    along = c * c * uu + s * s * vv + 2 * s * c * uv
    cross = s * s * uu + c * c * vv - 2 * s * c * uv
    return along, cross, (vv - uu) * s * c + uv * (c * c - s * s)


def director(angle: float) -> float:
    """The same line within (-90, 90]."""
    return float(-((-angle + 90.0) % 180.0 - 90.0))


def cell_axis(gx_gx: float, gx_gy: float, gy_gy: float) -> tuple[float, float]:
    """(angle of the cell axis [degree], coherence) from the mean products of the horizontal gradient of w.

    Gradients point across the cells, so the axis is the direction of least gradient. coherence: difference over sum of the
    principal values, 0 (no axis) to 1 (plane rolls).
    """
    total = gx_gx + gy_gy
    if not total > 0:
        return float("nan"), float("nan")
    across = 0.5 * np.degrees(np.arctan2(2 * gx_gy, gx_gx - gy_gy))
    return director(across + 90.0), float(np.hypot(gx_gx - gy_gy, 2 * gx_gy) / total)


def choose_axis(frame: Frame, mean: xr.Dataset, forcing: xr.Dataset, bottom: float, top: float, near_surface: bool) -> Axis:
    """The axis of a band bottom <= z <= top of a window.

    auto: the axis of the w field where it is plain; else, near the surface, the wind, to which the published orderings refer;
    deeper down, where the flow has turned away from the wind, the axis of w if it shows one at all, else the Lagrangian shear.
    A frame asked for by name that does not exist (no waves, no shear) falls back to auto; the kind says what was taken.
    mean: window means on z. forcing: window means (scalars and z profiles).
    """
    inside = (mean["z"].values >= bottom) & (mean["z"].values <= top)
    products = [float(mean[name].values[inside].mean()) if inside.any() else np.nan
                for name in ("dwdx_dwdx", "dwdx_dwdy", "dwdy_dwdy")]
    angle, coherence = cell_axis(*products)
    candidates = {
        "wind": Axis(float(forcing["stress_direction"]), "wind"),
        "stokes": Axis(float(forcing["stokes_direction"]), "stokes"),
        "cell": Axis(angle, "cell", coherence),
        "shear": Axis(lagrangian_shear_direction(mean, forcing, inside), "shear"),
    }
    if frame != "auto" and np.isfinite(candidates[frame].angle):
        return candidates[frame]
    order = ["cell"] if coherence >= PLAIN_COHERENCE else []
    order += ["wind"] if near_surface else ["cell"] if coherence >= SMALLEST_COHERENCE else []
    for kind in (*order, "shear", "wind"):
        if np.isfinite(candidates[kind].angle):
            return candidates[kind]
    return Axis(0.0, "wind")


def lagrangian_shear_direction(mean: xr.Dataset, forcing: xr.Dataset, inside: np.ndarray) -> float:
    """Direction [degree] of the mean of d(U + U_s)/dz over the levels `inside`; NaN for fewer than two levels or no shear.

    The Stokes drift counts as zero where it is unknown.
    """
    levels = np.flatnonzero(inside)
    if levels.size < 2:
        return float("nan")
    low, high = levels[0], levels[-1]
    change = []
    for component in ("u", "v"):
        values = mean[component].values
        drift = np.nan_to_num(forcing[f"stokes_{component}"].values)
        whole = values if mean.attrs.get("velocity_kind") == "lagrangian" else values + drift
        change.append(float(whole[high] - whole[low]))
    if not np.hypot(change[0], change[1]) > 0:
        return float("nan")
    return float(np.degrees(np.arctan2(change[1], change[0])))
