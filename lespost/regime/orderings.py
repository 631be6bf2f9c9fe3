"""From replicates of the three variances to probabilities of the published orderings.

Shear turbulence: along > cross > vertical. Langmuir turbulence: cross and vertical > along. Convection: vertical > along and
cross (Li, Garrett & Skyllingstad 2005). The last two overlap, since both can have the vertical largest: what is left to tell
them apart is whether the horizontal components differ (Langmuir cells favour cross; convection has no axis) and which
production feeds the turbulence.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

#: cross/along above which two horizontal variances count as different; common practice, no source.
UNEQUAL_RATIO = 1.15


@dataclass(frozen=True)
class OrderingProbabilities:
    """Shares of the replicates that show each ordering; what is missing to one showed none of them."""

    shear: float
    convective: float
    langmuir: float

    def best(self) -> tuple[str, float]:
        """The most probable regime and its probability."""
        pairs = {"shear": self.shear, "convective": self.convective, "langmuir": self.langmuir}
        name = max(pairs, key=lambda key: pairs[key])
        return name, pairs[name]


def ordering_probabilities(along: np.ndarray, cross: np.ndarray, vertical: np.ndarray, stokes: float, buoyancy: float
                           ) -> OrderingProbabilities:
    """Probabilities from replicates (n,) of the component variances.

    stokes, buoyancy: layer-integrated productions, NaN where unknown. Without Stokes production (zero or negative) Langmuir
    turbulence is excluded; without buoyancy production convection is. Where both are there or unknown, the ratio of the
    horizontal variances decides, shifted towards the larger production.
    """
    langmuir_possible = not stokes <= 0  # an unknown production excludes nothing
    convection_possible = not buoyancy <= 0
    is_shear = (along > cross) & (cross > vertical)
    raised = (cross > along) & (vertical > along)
    upright = (vertical > along) & (vertical > cross)
    ratio = np.where(along > 0, cross / np.where(along > 0, along, 1.0), np.inf)
    if langmuir_possible and convection_possible:
        limit = UNEQUAL_RATIO
        if np.isfinite(stokes) and np.isfinite(buoyancy):
            # Ten times the production moves the limit by a quarter: the variances stay the main witness.
            limit = 1.0 + (UNEQUAL_RATIO - 1.0) * float(np.clip(1.0 - np.log10(stokes / buoyancy), 0.0, 4.0))
        is_langmuir = raised & ((ratio > limit) | ~upright)
        is_convective = upright & ~is_langmuir
    elif langmuir_possible:
        is_langmuir, is_convective = raised, np.zeros_like(raised)
    elif convection_possible:
        is_langmuir, is_convective = np.zeros_like(raised), upright
    else:
        is_langmuir = is_convective = np.zeros_like(raised)
    return OrderingProbabilities(float(is_shear.mean()), float(is_convective.mean()), float(is_langmuir.mean()))
