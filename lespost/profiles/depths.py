"""Mixed-layer and boundary-layer depths: several definitions, each by name, none of them "the" depth.

All take levels z [m] (ascending, surface last) and return a positive depth, NaN where the profile does not show one. The
definition chosen changes w*, La_SL and h/L_L, so it is recorded with every result.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import xarray as xr

DepthMethod = Literal["auto", "maximum_stratification", "buoyancy_threshold", "heat_flux_minimum", "stress_decay"]

#: Buoyancy step that equals a density step of 0.03 kg m-3 in sea water [m s-2] (de Boyer Montégut et al. 2004).
BUOYANCY_STEP = 2.87e-4
#: Share of the surface stress at which the boundary layer ends; common practice, no source.
STRESS_SHARE = 0.05


def maximum_stratification_depth(z: np.ndarray, scalar: np.ndarray) -> float:
    """Depth of the largest |d scalar / dz|, by a parabola through three points, NaN for a uniform profile or a peak at an end.

    scalar: buoyancy, temperature or density on z.
    """
    middle = 0.5 * (z[1:] + z[:-1])
    slope = np.abs(np.diff(scalar) / np.diff(z))
    peak = int(np.argmax(slope)) if np.isfinite(slope).all() else -1
    if peak <= 0 or peak >= slope.size - 1 or not slope[peak] > 1e-12 * max(1.0, float(np.abs(scalar).max())):
        return float("nan")
    if slope[peak] < 1.2 * float(np.median(slope[:peak])):
        # A uniformly stratified fluid has no peak: what stands out by less is rounding or a wave.
        first = np.flatnonzero(slope >= 0.5 * slope[peak])[-1]
        return float(-middle[first])
    return float(-_vertex(middle[peak - 1 : peak + 2], slope[peak - 1 : peak + 2]))


def _vertex(x: np.ndarray, y: np.ndarray) -> float:
    """Abscissa of the extremum of the parabola through three points."""
    a, b, _ = np.polyfit(x - x[1], y, 2)
    return float(x[1] if a == 0 else x[1] + np.clip(-b / (2 * a), x[0] - x[1], x[2] - x[1]))


def threshold_depth(z: np.ndarray, buoyancy: np.ndarray, step: float = BUOYANCY_STEP, reference: float = 0.0) -> float:
    """Depth where buoyancy has fallen by `step` [m s-2] below that of the surface layer; NaN if it never does.

    reference: thickness [m] of the surface layer whose mean is the reference; 0: the uppermost level.
    """
    top = buoyancy[z >= min(-reference, z[-1])].mean()
    fall = top - buoyancy
    below = np.flatnonzero(fall >= step)
    if not below.size:
        return float("nan")
    k = int(below[-1])
    if k + 1 >= z.size:
        return float("nan")
    share = (step - fall[k + 1]) / (fall[k] - fall[k + 1])
    return float(-(z[k + 1] + share * (z[k] - z[k + 1])))


def flux_minimum_depth(z: np.ndarray, flux: np.ndarray) -> float:
    """Depth of the most negative upward heat or buoyancy flux (entrainment); NaN where it is negative nowhere inside."""
    k = int(np.nanargmin(flux)) if np.isfinite(flux).any() else -1
    if k <= 0 or k >= z.size - 1 or not flux[k] < 0 or not np.isfinite(flux[k - 1 : k + 2]).all():
        return float("nan")
    return float(-_vertex(z[k - 1 : k + 2], flux[k - 1 : k + 2]))


def stress_decay_depth(z: np.ndarray, uw: np.ndarray, vw: np.ndarray, friction_velocity: float, share: float = STRESS_SHARE) -> float:
    """Depth where, going down, the momentum flux first falls below `share` of u*²; NaN if nowhere, or without wind."""
    if not friction_velocity > 0:
        return float("nan")
    size = np.hypot(uw, vw) / friction_velocity**2
    below = np.flatnonzero(~(size >= share))  # unknown counts as ended
    if not below.size or below[-1] >= z.size - 2:
        return float("nan")
    k = int(below[-1]) + 1  # the lowest level that the surface reaches without a gap
    part = (share - size[k - 1]) / (size[k] - size[k - 1]) if np.isfinite(size[k - 1]) else 0.5
    return float(-(z[k - 1] + part * (z[k] - z[k - 1])))


@dataclass(frozen=True)
class LayerDepth:
    """depth [m], NaN if unknown; method that found it, in words."""

    depth: float
    method: str


def layer_depth(mean: xr.Dataset, friction_velocity: float, thermal_expansion: float, gravity: float,
                method: DepthMethod = "auto") -> LayerDepth:
    """The boundary-layer depth of a window (mean: variables on z, no time).

    auto: the stress decay limited by the maximum stratification if both exist, whichever of the two exists, then the flux
    minimum, then the threshold. thermal_expansion [K-1] turns temperature into buoyancy for the threshold.
    """
    z = np.asarray(mean["z"].values, float)
    theta = mean["theta"].values if "theta" in mean else None
    found: dict[str, float] = {}
    if theta is not None:
        found["maximum_stratification"] = maximum_stratification_depth(z, theta)
        found["buoyancy_threshold"] = threshold_depth(z, gravity * thermal_expansion * (theta - theta.mean()))
    flux = next((name for name in ("wtheta_total", "wtheta") if name in mean), None)
    if flux is not None:
        found["heat_flux_minimum"] = flux_minimum_depth(z, mean[flux].values)
    uw, vw = (mean[name if name in mean else name.removesuffix("_total")].values for name in ("uw_total", "vw_total"))
    found["stress_decay"] = stress_decay_depth(z, uw, vw, friction_velocity)
    words = {"maximum_stratification": "depth of maximum stratification", "stress_decay": "momentum flux below 5 % of u*²",
             "heat_flux_minimum": "minimum of the heat flux", "buoyancy_threshold": "buoyancy step of 2.87e-4 m s-2"}
    if method != "auto":
        return LayerDepth(found.get(method, float("nan")), words[method])
    stratified, stressed = found.get("maximum_stratification", float("nan")), found["stress_decay"]
    if np.isfinite(stratified) and np.isfinite(stressed) and stressed < 0.6 * stratified:
        return LayerDepth(stressed, words["stress_decay"] + f", well above the stratification at {stratified:.1f} m")
    for name in ("maximum_stratification", "stress_decay", "heat_flux_minimum", "buoyancy_threshold"):
        if np.isfinite(found.get(name, float("nan"))):
            return LayerDepth(found[name], words[name])
    return LayerDepth(float("nan"), "no definition applies to these profiles")
