"""Langmuir numbers, their projections for misaligned wind and waves, and the enhancement factors that go with each.

Angles are in degrees, counter-clockwise, towards. Enhancement factors belong to the Langmuir number they were fitted with
and are never to be mixed: at the same sea they differ by a factor of two.
"""

from __future__ import annotations

from typing import Any, Literal

import numpy as np

from lespost.constants import VON_KARMAN

SurfaceLayerReference = Literal["none", "base"]

#: Wave height below which four wave heights no longer measure the wave-affected depth [m]; common practice, no source.
SMALLEST_WAVE_HEIGHT = 0.02

#: Friction velocity below which there is no wind for a Langmuir number to be about [m s-1]; common practice, no source.
CALM = 1e-4


def turbulent_langmuir_number(friction_velocity: Any, surface_stokes_drift: Any) -> np.ndarray:
    """La_t = (u* / |u_s(0)|)^(1/2) (McWilliams, Sullivan & Moeng 1997); NaN without waves or in calm air."""
    ustar, drift = np.asarray(friction_velocity, float), np.abs(np.asarray(surface_stokes_drift, float))
    return np.sqrt(_ratio(ustar, drift))


def surface_layer_langmuir_number(friction_velocity: Any, surface_layer_drift: Any, reference_drift: Any = 0.0) -> np.ndarray:
    """La_SL = [u* / (⟨u_s⟩_SL - u_s,ref)]^(1/2) (Harcourt & D'Asaro 2008), ⟨⟩_SL the mean over the upper fifth of the layer.

    reference_drift: 0 (as in Li et al. 2016) or the drift at the layer's base; name which in the output.
    """
    return np.sqrt(_ratio(np.asarray(friction_velocity, float),
                          np.asarray(surface_layer_drift, float) - np.asarray(reference_drift, float)))


def _ratio(ustar: np.ndarray, drift: np.ndarray) -> np.ndarray:
    known = (drift > 0) & (ustar >= CALM)
    return np.where(known, ustar / np.where(known, drift, 1.0), np.nan)


def cell_axis_angle(friction_velocity: Any, surface_stokes_drift: Any, misalignment: Any, layer_depth: Any,
                    wave_height: Any) -> np.ndarray:
    """Angle α of the cell axis from the stress towards the waves [degree] (Van Roekel et al. 2012).

    misalignment: θ, direction of the waves minus that of the stress [degree], validated by its authors to 135°.
    layer_depth, wave_height [m]. The axis is a director: α and α ± 180° are the same line. atan2 keeps the branch where
    the denominator is negative.
    """
    theta = np.radians(np.asarray(misalignment, float))
    reach = np.maximum(np.asarray(layer_depth, float)
                       / (4.0 * np.maximum(np.asarray(wave_height, float), SMALLEST_WAVE_HEIGHT)), 1.0)
    drift = np.asarray(surface_stokes_drift, float)
    known = drift > 0
    wind = np.asarray(friction_velocity, float) / (VON_KARMAN * np.where(known, drift, 1.0)) * np.log(reach)
    angle = np.degrees(np.arctan2(np.sin(theta), wind + np.cos(theta)))
    return np.where(known, angle, np.nan)


def projected(langmuir_number: Any, axis_angle: Any, misalignment: Any) -> np.ndarray:
    """La projected on the cell axis: La (|cos α| / |cos(θ - α)|)^(1/2) (Van Roekel et al. 2012)."""
    alpha, theta = np.radians(np.asarray(axis_angle, float)), np.radians(np.asarray(misalignment, float))
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.asarray(langmuir_number, float) * np.sqrt(np.abs(np.cos(alpha)) / np.abs(np.cos(theta - alpha)))


def enhancement_mcwilliams_sullivan_2000(turbulent_number: Any) -> np.ndarray:
    """(1 + 0.08 La_t^-4)^(1/2) (McWilliams & Sullivan 2000); takes La_t."""
    return np.sqrt(1.0 + 0.08 * np.asarray(turbulent_number, float) ** -4.0)


def enhancement_li_2016(projected_surface_layer_number: Any, axis_angle: Any = 0.0) -> np.ndarray:
    """|cos α| [1 + (1.5 La)^-2 + (5.4 La)^-4]^(1/2) (Van Roekel et al. 2012; Li et al. 2016); takes La_SL,proj."""
    la = np.asarray(projected_surface_layer_number, float)
    return np.abs(np.cos(np.radians(axis_angle))) * np.sqrt(1.0 + (1.5 * la) ** -2.0 + (5.4 * la) ** -4.0)


def enhancement_van_roekel_2012(turbulent_number: Any) -> np.ndarray:
    """[1 + (3.1 La_t)^-2 + (5.4 La_t)^-4]^(1/2) (Van Roekel et al. 2012, from memory); takes La_t."""
    la = np.asarray(turbulent_number, float)
    return np.sqrt(1.0 + (3.1 * la) ** -2.0 + (5.4 * la) ** -4.0)


def vertical_variance_harcourt_dasaro_2008(surface_layer_number: Any) -> np.ndarray:
    """Layer mean of ⟨w²⟩/u*² (Harcourt & D'Asaro 2008; constants seen in print, exponent -4/3 from memory); takes La_SL."""
    la = np.asarray(surface_layer_number, float)
    return np.where(la <= 1.0, 0.398 + 0.480 * la ** (-4.0 / 3.0), 0.640 + 3.50 * np.exp(-2.69 * la))
