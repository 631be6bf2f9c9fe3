"""The forcing's own word on the regime: the dissipation estimate of Belcher et al. (2012), term by term.

The estimate is a sum of a shear, a Langmuir and a convective part; their shares say which forcing dominates. The shares are
defined for destabilising or zero buoyancy flux.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

ForcingRegime = Literal["shear", "langmuir", "convective", "mixed", "undetermined"]

#: Share of the estimate at which Belcher et al. (2012) draw the lines of their diagram.
DOMINANT_SHARE = 0.9
#: A production counts where it makes at least this share; common practice, no source.
COUNTING_SHARE = 0.25


@dataclass(frozen=True)
class DissipationShares:
    """Parts of ε h / u*³ [1] by kind; `share` gives them as fractions of their sum."""

    shear: np.ndarray
    langmuir: np.ndarray
    convective: np.ndarray

    @property
    def total(self) -> np.ndarray:
        """ε h / u*³ [1]."""
        return self.shear + self.langmuir + self.convective

    def share(self) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """(shear, langmuir, convective) shares, summing to one."""
        return self.shear / self.total, self.langmuir / self.total, self.convective / self.total


def dissipation_terms(turbulent_langmuir_number: Any, h_over_langmuir_length: Any) -> DissipationShares:
    """2 (1 - exp(-La/2)) + 0.22 La^-2 + 0.3 La^-2 h/L_L (Belcher et al. 2012).

    h_over_langmuir_length: h / L_L = B0 h / (u*² u_s0) [1]; negative (stable) values count as zero.
    """
    la = np.asarray(turbulent_langmuir_number, float)
    ratio = np.maximum(np.asarray(h_over_langmuir_length, float), 0.0)
    with np.errstate(divide="ignore"):
        return DissipationShares(2.0 * (1.0 - np.exp(-la / 2.0)), 0.22 * la**-2.0 + 0.0 * ratio, 0.3 * la**-2.0 * ratio)


def dissipation_from_scales(friction_velocity: float, surface_stokes_drift: float, buoyancy_flux: float, layer_depth: float
                            ) -> tuple[float, float, float]:
    """(shear, Langmuir, convective) terms of ε h / u*³ [1] from the scales themselves (Belcher et al. 2012).

    The same estimate as `dissipation_terms`, in a form that also holds without waves: the shear term is then 2. A stable
    buoyancy flux counts as zero. NaN where a scale is unknown or there is no wind to scale with.
    """
    ustar, drift = friction_velocity, surface_stokes_drift
    if np.isnan(ustar) or not ustar > 0:
        return np.nan, np.nan, np.nan
    shear = np.nan if np.isnan(drift) else 2.0 if drift <= 0 else float(2.0 * -np.expm1(-0.5 * np.sqrt(ustar / drift)))
    convective = 0.0 if buoyancy_flux <= 0 else 0.3 * buoyancy_flux * layer_depth / ustar**3
    return float(shear), float(0.22 * drift / ustar), float(convective)


def forcing_regime(shear: float, langmuir: float, convective: float) -> ForcingRegime:
    """The regime that the parts of the dissipation estimate point to.

    One part alone counting (share of at least a quarter) names the regime; several counting parts are "mixed"; an unknown
    part makes it "undetermined", since it might outweigh the others.
    """
    parts = {"shear": shear, "langmuir": langmuir, "convective": convective}
    if any(np.isnan(part) for part in parts.values()) or not sum(parts.values()) > 0:
        return "undetermined"
    total = sum(parts.values())
    counting = [name for name, part in parts.items() if part / total >= COUNTING_SHARE]
    return counting[0] if len(counting) == 1 else "mixed"  # type: ignore[return-value]


def dividing_line(kind: Literal["shear", "langmuir", "convective"], h_over_langmuir_length: np.ndarray,
                  share: float = DOMINANT_SHARE) -> np.ndarray:
    """La_t at which `kind` makes `share` of the estimate, for each h / L_L; NaN where it never does.

    Solved from the published formula by bisection; the shares vary monotonically with La_t at fixed h / L_L.
    """
    ratios = np.asarray(h_over_langmuir_length, float)
    out = np.full(ratios.shape, np.nan)
    position = ("shear", "langmuir", "convective").index(kind)
    for index, ratio in np.ndenumerate(ratios):
        low, high = np.log(1e-3), np.log(1e3)

        def excess(log_la: float, ratio: float = float(ratio)) -> float:
            return float(dissipation_terms(np.exp(log_la), ratio).share()[position]) - share

        first, last = excess(low), excess(high)
        if first * last > 0:
            continue
        for _ in range(80):
            middle = 0.5 * (low + high)
            if excess(middle) * first > 0:
                low = middle
            else:
                high = middle
        out[index] = np.exp(0.5 * (low + high))
    return out
