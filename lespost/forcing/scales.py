"""The scales and dimensionless numbers of a forcing, each with its convention; pure numbers in, one frozen object out.

What a number needs and does not get makes it NaN, never zero: no waves, no Langmuir number; no cooling, no convective
velocity.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import asdict, dataclass

import numpy as np

from lespost.constants import VON_KARMAN
from lespost.errors import RequestError
from lespost.forcing.langmuir import (
    CALM,
    SurfaceLayerReference,
    cell_axis_angle,
    projected,
    surface_layer_langmuir_number,
    turbulent_langmuir_number,
)
from lespost.forcing.regimes import (
    COUNTING_SHARE,
    ForcingRegime,
    dissipation_from_scales,
    forcing_regime,
)

#: What each number means, where more than one meaning is in use.
CONVENTIONS = {
    "ustar": "friction velocity in the water [m s-1]",
    "b0": "surface buoyancy flux, upward [m2 s-3]; positive destabilises",
    "wstar": "(b0 h)^(1/3) [m s-1]; undefined unless b0 > 0",
    "us0": "modulus of the surface Stokes drift [m s-1]",
    "la_t": "(ustar / us0)^(1/2) (McWilliams, Sullivan & Moeng 1997)",
    "la_sl": "(ustar / (mean drift over the upper fifth of h - reference))^(1/2) (Harcourt & D'Asaro 2008); "
             "reference drift: {reference}",
    "la_proj": "la_t projected on the cell axis (Van Roekel et al. 2012)",
    "alpha_deg": "cell axis from the stress towards the waves [degree] (Van Roekel et al. 2012)",
    "hoenikker": "4 b0 delta / (us0 ustar^2), delta = transport / us0 (Li & Garrett 1995); undefined for b0 < 0",
    "h_over_l_langmuir": "b0 h / (ustar^2 us0) (Belcher et al. 2012), without the von Karman constant",
    "obukhov": "-ustar^3 / (0.40 b0) [m]; negative is unstable",
    "dissipation": "terms of epsilon h / ustar^3 (Belcher et al. 2012)",
    "forcing_regime": "the only dissipation term with a share of at least 0.25; else mixed; undetermined where waves that count go "
                      "against the wind",
}


@dataclass(frozen=True)
class Scales:
    """Scales of one forcing; units and conventions in `CONVENTIONS`. NaN where a number is undefined or unknown."""

    ustar: float
    b0: float
    wstar: float
    us0: float
    la_t: float
    la_sl: float
    la_proj: float
    alpha_deg: float
    hoenikker: float
    h_over_l_langmuir: float
    obukhov: float
    dissipation_shear: float
    dissipation_langmuir: float
    dissipation_convective: float
    forcing_regime: ForcingRegime

    def to_dict(self) -> dict[str, float | str]:
        """The numbers by name."""
        return asdict(self)


def scales(
    *,
    friction_velocity: float = np.nan,
    buoyancy_flux: float = np.nan,
    surface_stokes_drift: float = np.nan,
    stokes_depth: float = np.nan,
    surface_layer_drift: float | Callable[[float], float] = np.nan,
    base_drift: float = np.nan,
    layer_depth: float = np.nan,
    misalignment: float = 0.0,
    wave_height: float = np.nan,
    la_sl_reference: SurfaceLayerReference = "none",
) -> Scales:
    """All scales from the forcing.

    friction_velocity [m s-1]; buoyancy_flux, upward [m2 s-3]; surface_stokes_drift, its modulus [m s-1]; stokes_depth:
    transport over surface drift [m] (1/(2k) for one wave); surface_layer_drift: modulus of the mean drift over the upper
    fifth of the layer [m s-1], or a function of that depth; base_drift: drift at -layer_depth; misalignment: waves minus
    stress direction [degree]; wave_height [m], needed for the cell axis where wind and waves are misaligned.
    Raises RequestError for impossible values.
    """
    for name, value in (("friction velocity", friction_velocity), ("surface Stokes drift", surface_stokes_drift),
                        ("Stokes depth", stokes_depth), ("wave height", wave_height)):
        if value < 0:
            raise RequestError(f"{name} = {value:g} is negative; give its magnitude (directions are separate).")
    if layer_depth <= 0:
        raise RequestError(f"layer depth = {layer_depth:g} m; give a positive depth.")
    ustar, b0, us0, h = friction_velocity, buoyancy_flux, surface_stokes_drift, layer_depth
    layer_drift = surface_layer_drift(0.2 * h) if callable(surface_layer_drift) else surface_layer_drift
    reference = base_drift if la_sl_reference == "base" else 0.0
    aligned = misalignment % 360.0 == 0.0
    alpha = 0.0 if aligned and us0 > 0 else float(cell_axis_angle(ustar, us0, misalignment, h, wave_height))
    la_t = float(turbulent_langmuir_number(ustar, us0))
    parts = dissipation_from_scales(ustar, us0, b0, h)
    waves_and_wind = us0 > 0 and ustar >= CALM
    return Scales(
        ustar=ustar, b0=b0, wstar=float((b0 * h) ** (1 / 3)) if b0 > 0 else np.nan, us0=us0, la_t=la_t,
        la_sl=float(surface_layer_langmuir_number(ustar, layer_drift, reference)),
        la_proj=float(projected(la_t, alpha, misalignment)), alpha_deg=alpha,
        hoenikker=4 * b0 * stokes_depth / (us0 * ustar**2) if waves_and_wind and b0 >= 0 else np.nan,
        h_over_l_langmuir=b0 * h / (ustar**2 * us0) if waves_and_wind else np.nan,
        obukhov=-(ustar**3) / (VON_KARMAN * b0) if b0 != 0 else np.nan,
        dissipation_shear=parts[0], dissipation_langmuir=parts[1], dissipation_convective=parts[2],
        forcing_regime=_regime(parts, ustar, b0, misalignment),
    )


def _regime(parts: tuple[float, float, float], ustar: float, b0: float, misalignment: float) -> ForcingRegime:
    """The regime of the dissipation estimate where the estimate holds.

    In calm air only cooling is left to stir. Waves against the wind take energy from the turbulence or give less than the
    moduli say, so that an estimate in which they count says nothing.
    """
    if ustar < CALM:
        return "convective" if b0 > 0 else "undetermined"
    opposed = np.cos(np.radians(misalignment)) < -1e-12
    if opposed and parts[1] >= COUNTING_SHARE * sum(parts):
        return "undetermined"
    return forcing_regime(*parts)


def conventions(la_sl_reference: SurfaceLayerReference = "none") -> dict[str, str]:
    """`CONVENTIONS` with the chosen reference drift named."""
    word = {"none": "zero (Li et al. 2016)", "base": "drift at the layer's base"}[la_sl_reference]
    return {name: text.format(reference=word) for name, text in CONVENTIONS.items()}
