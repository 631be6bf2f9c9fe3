"""What published laws expect of a layer with these scales: vertical velocity, dissipation, entrainment.

A first yardstick for a run or a record; published laws differ among themselves by about 15 %. The scales are made in `scales`,
the laws themselves are in `langmuir`, `regimes` and `velocity_scales`.
"""

from __future__ import annotations

from dataclasses import asdict, dataclass

import numpy as np

from lespost.forcing.langmuir import vertical_variance_harcourt_dasaro_2008
from lespost.forcing.scales import Scales
from lespost.forcing.velocity_scales import (
    entrainment_li_fox_kemper_2017,
    vertical_variance_convection,
)

#: Which law each level comes from.
LAWS = {
    "w_rms_langmuir": "layer mean, from la_sl (Harcourt & D'Asaro 2008)",
    "w_rms_convective": "layer mean, from wstar (Lenschow, Wyngaard & Pennell 1980)",
    "dissipation": "layer scale, from the dissipation terms (Belcher et al. 2012)",
    "entrainment_flux": "upward buoyancy flux at the base of the layer, from la_sl and wstar (Li & Fox-Kemper 2017)",
}

UNITS = {"w_rms_langmuir": "m s-1", "w_rms_convective": "m s-1", "dissipation": "m2 s-3", "entrainment_flux": "m2 s-3"}


@dataclass(frozen=True)
class ExpectedLevels:
    """w_rms_langmuir, w_rms_convective: rms vertical velocity [m s-1] of either turbulence alone; dissipation [m2 s-3];
    entrainment_flux: upward buoyancy flux at the base [m2 s-3], negative. NaN where a scale it needs is unknown."""

    w_rms_langmuir: float
    w_rms_convective: float
    dissipation: float
    entrainment_flux: float

    def to_dict(self) -> dict[str, float]:
        """The levels by name."""
        return asdict(self)


def expected_levels(scale: Scales, layer_depth: float) -> ExpectedLevels:
    """Levels expected of a layer `layer_depth` [m] deep with these scales; laws in `LAWS`."""
    ustar = scale.ustar if scale.ustar > 0 else np.nan
    la_sl = np.inf if scale.us0 == 0 else scale.la_sl  # no waves: the laws' own limit
    convective = scale.wstar if scale.b0 > 0 else 0.0 if scale.b0 <= 0 else np.nan
    depth = np.linspace(0.0, 1.0, 2001)
    share = float(np.trapezoid(vertical_variance_convection(depth), depth))
    terms = scale.dissipation_shear + scale.dissipation_langmuir + scale.dissipation_convective
    return ExpectedLevels(
        w_rms_langmuir=float(ustar * np.sqrt(vertical_variance_harcourt_dasaro_2008(la_sl))),
        w_rms_convective=float(scale.wstar * np.sqrt(share)),
        dissipation=float(terms * ustar**3 / layer_depth),
        entrainment_flux=float(-entrainment_li_fox_kemper_2017(ustar, la_sl, convective) / layer_depth),
    )
