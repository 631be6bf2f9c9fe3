"""Stokes drift of a wave spectrum: of frequency only, with buoys' first moments, or of frequency and direction.

Only the energy and its first directional moment matter for the drift, so that no spreading model is ever needed. The file
formats are in `spectrum_files`, spectra from a formula in `wave_models`, closed-form profiles in `stokes`.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from scipy.special import erfc

from lespost.errors import DataError
from lespost.forcing.dispersion import wavenumber

#: k D beyond which finite depth changes the drift of the tail by less than round-off (2 exp(-2 k D) = 2e-16).
DEEP_FOR_THE_TAIL = 18.4

#: A gap in the direction axis this many times the median spacing means that the axis covers only part of the circle.
PARTIAL_CIRCLE = 3.0


@dataclass(frozen=True)
class Spectrum:
    """Variance density of the sea surface. Directions are towards, in degrees counter-clockwise from the simulation's +x.

    frequency (nf,) [Hz], ascending and positive. density: (nf,) [m2 s], or (nf, nd) [m2 s rad-1] with `directions` (nd,).
    r1 (nf,) [1] and mean_direction (nf,) [degree]: first directional moment of a one-dimensional density; without r1 the waves
    of each frequency all go towards mean_direction, without mean_direction all waves go along +x. bandwidth (nf,) [Hz]: widths
    to integrate with, where the source gives them; else the trapezoid rule. source: where it was read, for messages.
    Raises DataError where the arrays do not make a spectrum.
    """

    frequency: np.ndarray
    density: np.ndarray
    directions: np.ndarray | None = None
    r1: np.ndarray | None = None
    mean_direction: np.ndarray | None = None
    bandwidth: np.ndarray | None = None
    source: str = "spectrum"

    def __post_init__(self) -> None:
        for name in ("frequency", "density", "directions", "r1", "mean_direction", "bandwidth"):
            value = getattr(self, name)
            if value is not None:
                object.__setattr__(self, name, np.asarray(value, dtype=np.float64))
        count = self.frequency.size
        where = self.source
        if self.frequency.ndim != 1 or count < 2:
            raise DataError(f"{where}: a spectrum needs at least two frequencies, found {count}; check the columns or axes.")
        if not (np.all(np.isfinite(self.frequency)) and self.frequency[0] > 0 and np.all(np.diff(self.frequency) > 0)):
            raise DataError(f"{where}: frequencies must be positive and ascending, in Hz; check which column or axis holds them.")
        shape = (count,) if self.directions is None else (count, self.directions.size)
        if self.density.shape != shape:
            raise DataError(f"{where}: the density has shape {self.density.shape} where the axes say {shape}; check the axes.")
        if not np.all(np.isfinite(self.density)):
            raise DataError(f"{where}: the density has missing or infinite values; leave those frequencies out.")
        if np.any(self.density < 0):
            raise DataError(f"{where}: the variance density is negative ({self.density.min():g}); is it a logarithm, or a "
                            "cross-spectrum? Give the energy density in m2/Hz.")
        for name in ("r1", "mean_direction", "bandwidth"):
            value = getattr(self, name)
            if value is not None and value.ndim == 0:
                object.__setattr__(self, name, np.full(count, float(value)))
            elif value is not None and value.shape != (count,):
                raise DataError(f"{where}: {name} has {value.size} values for {count} frequencies; check the companion column.")
        if self.r1 is not None and (np.nanmin(self.r1) < 0 or np.nanmax(self.r1) > 1 + 1e-6):
            raise DataError(f"{where}: r1 reaches from {np.nanmin(self.r1):g} to {np.nanmax(self.r1):g}; it must lie in 0 to 1 "
                            "(some archives store hundredths: divide by 100).")

    @property
    def has_direction(self) -> bool:
        """Whether the waves' direction is known."""
        return self.directions is not None or self.mean_direction is not None

    def energy(self) -> np.ndarray:
        """Density of frequency alone (nf,) [m2 s]."""
        return self.density if self.directions is None else self.density @ direction_weights(self.directions)

    def first_moments(self) -> tuple[np.ndarray, np.ndarray]:
        """Density times the mean cosine and sine of the direction (nf,) [m2 s]: all that the drift takes from direction."""
        if self.directions is not None:
            angle, weights = np.radians(self.directions), direction_weights(self.directions)
            both = (self.density @ (np.cos(angle) * weights), self.density @ (np.sin(angle) * weights))
            # Waves from all sides cancel to round-off, which is no direction.
            negligible = 1e-12 * self.energy()
            return np.where(abs(both[0]) > negligible, both[0], 0.0), np.where(abs(both[1]) > negligible, both[1], 0.0)
        strength = self.density if self.r1 is None else self.density * self.r1
        if self.mean_direction is None:
            return strength, np.zeros_like(strength)
        angle = np.radians(self.mean_direction)
        return strength * np.cos(angle), strength * np.sin(angle)

    def rotated(self, angle: float) -> Spectrum:
        """The same waves turned by `angle` [degree], counter-clockwise."""
        if self.directions is not None:
            return replace(self, directions=self.directions + angle)
        before = np.zeros(self.frequency.size) if self.mean_direction is None else self.mean_direction
        return replace(self, mean_direction=before + angle)

    def towards(self, angle: float) -> Spectrum:
        """The same waves turned as a whole so that their surface drift (deep water, with tail) points towards `angle` [degree].

        Raises DataError where the waves have no drift, because they come from all sides alike.
        """
        u, v = stokes_drift(0.0, self)
        if not np.hypot(u, v) > 0:
            raise DataError(f"{self.source}: the waves come from all sides alike and have no direction to turn towards "
                            f"{angle:g}.")
        return self.rotated(angle - float(np.degrees(np.arctan2(v, u))))

    def integrate(self, values: np.ndarray) -> np.ndarray:
        """Integral over frequency of `values` (..., nf): given bandwidths, else the trapezoid rule."""
        return values @ self.frequency_weights()

    def frequency_weights(self) -> np.ndarray:
        """Weights (nf,) [Hz] of the integral over frequency."""
        if self.bandwidth is not None:
            return self.bandwidth
        gap = np.diff(self.frequency)
        weights = np.zeros(self.frequency.size)
        weights[:-1] += gap / 2
        weights[1:] += gap / 2
        return weights


def direction_weights(directions: np.ndarray) -> np.ndarray:
    """Weights (nd,) [rad] of an integral over a periodic axis of `directions` [degree] in any order.

    Half the gaps to both neighbours round the circle; where the axis covers only part of the circle, the trapezoid rule.
    Raises DataError for repeated directions.
    """
    wrapped = np.asarray(directions, float) % 360.0
    order = np.argsort(wrapped, kind="stable")
    gaps = np.diff(np.append(wrapped[order], wrapped[order][0] + 360.0))
    if directions.size > 1 and gaps.min() < 1e-6:
        raise DataError("the direction axis names a direction twice (0 and 360 degrees are the same); drop one of them.")
    if directions.size > 2 and gaps.max() > PARTIAL_CIRCLE * np.median(gaps):
        gaps[np.argmax(gaps)] = 0.0
    weights = np.empty(directions.size)
    weights[order] = 0.5 * (gaps + np.roll(gaps, 1))
    return np.radians(weights)


def stokes_drift(z: Any, spectrum: Spectrum, water_depth: float | None = None, tail: bool = True, gravity: float = 9.81
                 ) -> tuple[np.ndarray, np.ndarray]:
    """(u, v) [m s-1] at heights `z` [m, zero or negative, any shape].

    ∫∫ E ω k (cos θ, sin θ) cosh 2k(z+D) / sinh² kD dθ df, tending to (16π³/g) ∫ f³ E exp(8π²f²z/g) df in deep water (Kenyon 1969;
    Webb & Fox-Kemper 2011). tail: add an f^-5 tail beyond the last frequency, in closed form (Breivik et al. 2014), with the
    direction of the last frequency. Raises DataError for heights above the surface or below the bottom.
    """
    heights = np.asarray(z, dtype=np.float64)
    if np.any(heights > 0) or (water_depth is not None and np.any(heights < -water_depth * (1 + 1e-12))):
        raise DataError(f"heights from {heights.min():g} to {heights.max():g} m: Stokes drift is defined from the bottom "
                        "to z = 0.")
    kernel = _kernel(heights, spectrum.frequency, water_depth, gravity) * spectrum.frequency_weights()
    parts = []
    beyond = tail_drift(heights, float(spectrum.frequency[-1]), water_depth, gravity) if tail else 0.0
    for moment in spectrum.first_moments():
        parts.append(kernel @ moment + beyond * moment[-1])
    return parts[0], parts[1]


def _kernel(heights: np.ndarray, frequency: np.ndarray, water_depth: float | None, gravity: float) -> np.ndarray:
    """Drift per unit of variance (*z.shape, nf): ωk cosh 2k(z+D) / sinh² kD in a form that cannot overflow."""
    omega = 2 * np.pi * frequency
    k = wavenumber(omega, water_depth, gravity)
    z = heights[..., None]
    if water_depth is None:
        return 2 * omega * k * np.exp(2 * k * z)
    return 2 * omega * k * (np.exp(2 * k * z) + np.exp(-2 * k * (z + 2 * water_depth))) / np.expm1(-2 * k * water_depth) ** 2


def tail_drift(z: Any, cut_off: float, water_depth: float | None = None, gravity: float = 9.81) -> np.ndarray:
    """Drift [m s-1 per m2 s of density at `cut_off` Hz] of an f^-5 tail beyond the cut-off, at heights z [m].

    Closed form in deep water (Breivik et al. 2014): (16π³/g) f_c^5 [exp(-μf_c²)/f_c - √(πμ) erfc(f_c √μ)], μ = -8π²z/g. Where the
    tail feels the bottom, Gauss-Legendre quadrature in f_c/f, in which the surface integrand is constant.
    """
    heights = np.asarray(z, dtype=np.float64)
    if water_depth is not None and float(wavenumber(2 * np.pi * cut_off, water_depth, gravity)) * water_depth < DEEP_FOR_THE_TAIL:
        nodes, weights = np.polynomial.legendre.leggauss(96)
        ratio = 0.5 * (nodes + 1)
        kernel = _kernel(heights, cut_off / ratio, water_depth, gravity)
        return kernel @ (ratio**3 * cut_off * 0.5 * weights)
    mu = -8 * np.pi**2 * heights / gravity
    inner = np.exp(-mu * cut_off**2) / cut_off - np.sqrt(np.pi * mu) * erfc(cut_off * np.sqrt(mu))
    return 16 * np.pi**3 / gravity * cut_off**5 * inner


@dataclass(frozen=True)
class SpectrumSummary:
    """Bulk numbers of a spectrum: us0 [m s-1] and transport [m2 s-1] (moduli, tail included where asked for), decay_scale =
    transport / us0 [m], hs [m] and fp [Hz] (given frequencies only), tail_fraction: share of us0 that the tail beyond the last
    frequency adds [1], direction of the surface drift [degree, towards; NaN where the spectrum has none]."""

    us0: float
    transport: float
    decay_scale: float
    hs: float
    fp: float
    tail_fraction: float
    direction: float


def summary(spectrum: Spectrum, water_depth: float | None = None, tail: bool = True, gravity: float = 9.81) -> SpectrumSummary:
    """Surface drift, transport, depth scale, wave height and peak of a spectrum.

    Transport: ∫∫ E ω coth kD (cos θ, sin θ) dθ df, plus (2π/3) f_c² E(f_c) for the tail (deep water). Raises DataError where the
    spectrum holds no energy.
    """
    energy = spectrum.energy()
    if not energy.max() > 0:
        raise DataError(f"{spectrum.source}: the spectrum holds no energy; check the column or variable and its missing values.")
    u, v = (float(part) for part in stokes_drift(0.0, spectrum, water_depth, tail, gravity))
    us0 = float(np.hypot(u, v))
    omega = 2 * np.pi * spectrum.frequency
    per_variance = omega if water_depth is None else omega / np.tanh(wavenumber(omega, water_depth, gravity) * water_depth)
    cut_off = float(spectrum.frequency[-1])
    moments = spectrum.first_moments()
    beyond = 2 * np.pi / 3 * cut_off**2 if tail else 0.0
    transport = float(np.hypot(*(float(spectrum.integrate(per_variance * moment)) + beyond * moment[-1] for moment in moments)))
    extra = float(tail_drift(0.0, cut_off, water_depth, gravity)) if tail else 0.0
    along = extra * (u * moments[0][-1] + v * moments[1][-1]) / us0**2 if us0 > 0 else np.nan
    return SpectrumSummary(
        us0=us0, transport=transport, decay_scale=transport / us0 if us0 > 0 else np.nan,
        hs=4 * float(np.sqrt(spectrum.integrate(energy))), fp=float(spectrum.frequency[np.argmax(energy)]),
        tail_fraction=float(along),
        direction=float(np.degrees(np.arctan2(v, u))) if spectrum.has_direction and us0 > 0 else np.nan,
    )
