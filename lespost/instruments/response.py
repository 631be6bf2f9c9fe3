"""What averaging and beam geometry do to a wave of given wavenumber: the closed forms behind every virtual sample.

All are amplitude factors on a Fourier mode, derived here from the geometry unless a source is named. Half separation s = h tan θ: the
distance of each beam from the axis at height h above the head; θ: beam angle from the axis [degree]; k: wavenumber in the plane of
the pair of beams [rad m-1].
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from lespost.instruments.settings import InstrumentSettings, Interpolation
from lespost.instruments.weights import footprint_deviation
from lespost.kernels.interpolation import ORDERS, lagrange_weights

Array = np.ndarray | float


def sinc(x: Array) -> np.ndarray:
    """sin(x)/x, one at zero."""
    return np.asarray(np.sinc(np.asarray(x, dtype=np.float64) / np.pi))


def range_response(wavenumber: Array, cell: float, pulse: float) -> np.ndarray:
    """Factor of a range cell on a wave along the beam: sinc(k cell/2) sinc(k pulse/2); cell, pulse: lengths along the beam [m]."""
    k = np.asarray(wavenumber, dtype=np.float64)
    return sinc(0.5 * k * cell) * sinc(0.5 * k * pulse)


def footprint_response(wavenumber: Array, deviation: Array) -> np.ndarray:
    """Factor of a Gaussian footprint of standard deviation `deviation` [m] on a wave across the beam: exp(-k² σ²/2)."""
    return np.asarray(np.exp(-0.5 * (np.asarray(wavenumber) * np.asarray(deviation)) ** 2))


def averaging_response(wavenumber: Array, speed: float, interval: float) -> np.ndarray:
    """Factor of a mean over `interval` [s] on a pattern carried at `speed` [m s-1]: sinc(k U T/2)."""
    return sinc(0.5 * np.asarray(wavenumber) * speed * interval)


def ping_mean_response(half_phase: Array, pings: int) -> np.ndarray:
    """Factor of the mean over equally spaced pings: sin(N x)/(N sin x), x = half the phase from ping to ping (ω Δt/2)."""
    x = np.asarray(half_phase, dtype=np.float64)
    bottom = pings * np.sin(x)
    small = np.abs(np.sin(x)) < 1e-8
    # at a multiple of π all pings meet the wave at the same phase up to sign
    limit = np.cos(pings * x) / np.cos(x)
    return np.asarray(np.where(small, limit, np.sin(pings * x) / np.where(small, 1.0, bottom)))


@dataclass(frozen=True)
class PairResponse:
    """What a pair of beams makes of a mode along its plane, at half separation s.

    u_of_u, w_of_w: what is left of the component itself, in phase; u_of_w, w_of_u: how much of the other component leaks in, a quarter
    wave behind: u = U cos kx is read as U u_of_u cos kx, with a w of U w_of_u sin kx. The instrument looks up; looking down the
    leaks change sign.
    """

    u_of_u: np.ndarray
    u_of_w: np.ndarray
    w_of_u: np.ndarray
    w_of_w: np.ndarray


def pair_response(wavenumber: Array, half_separation: Array, beam_angle: float) -> PairResponse:
    """cos ks, -cot θ sin ks, -tan θ sin ks, cos ks."""
    phase = np.asarray(wavenumber, dtype=np.float64) * np.asarray(half_separation, dtype=np.float64)
    tangent = np.tan(np.radians(beam_angle))
    return PairResponse(np.cos(phase), -np.sin(phase) / tangent, -np.sin(phase) * tangent, np.cos(phase))


def four_beam_vertical_response(wavenumber: Array, half_separation: Array) -> np.ndarray:
    """Factor of the four-beam w on a w-mode along one pair: (1 + cos ks)/2, as the other pair sees it whole."""
    return np.asarray(0.5 * (1.0 + np.cos(np.asarray(wavenumber) * np.asarray(half_separation))))


def error_velocity_response(wavenumber: Array, half_separation: Array, beam_angle: float) -> np.ndarray:
    """Error velocity per unit of a w-mode along one pair: (cos ks - 1) cot θ/√2. It measures how unlike the flow is in the beams."""
    phase = np.asarray(wavenumber) * np.asarray(half_separation)
    return np.asarray((np.cos(phase) - 1.0) / np.tan(np.radians(beam_angle)) / np.sqrt(2.0))


def roll_response(wavenumber: Array, half_separation: Array, beam_angle: float, vertical_ratio: float, near_surface: bool) -> np.ndarray:
    """Cross-roll velocity read by a pair across rolls w = -W cos ly, v = -V sin ly (near the surface, converging over the downwelling)
    or +V sin ly (below), over V; vertical_ratio = W/V. Looking up.

    cos ls - (W/V) cot θ sin ls near the surface, where the leak works against v and can reverse it; cos ls + (W/V) cot θ sin ls below.
    """
    pair = pair_response(wavenumber, half_separation, beam_angle)
    sign = 1.0 if near_surface else -1.0
    return np.asarray(pair.u_of_u + sign * vertical_ratio * pair.u_of_w)


def wave_response(
    wavenumber: Array, half_separation: Array, beam_angle: float, looking: Literal["up", "down"] = "up"
) -> tuple[np.ndarray, np.ndarray]:
    """(horizontal, vertical) factors of a pair on the orbital velocity of a deep-water surface wave running along it.

    sin(θ ± ks)/sin θ and cos(θ ± ks)/cos θ, + looking up, - looking down.
    """
    theta = np.radians(beam_angle)
    phase = np.asarray(wavenumber) * np.asarray(half_separation) * (1.0 if looking == "up" else -1.0)
    return np.asarray(np.sin(theta + phase) / np.sin(theta)), np.asarray(np.cos(theta + phase) / np.cos(theta))


def interpolation_response(cells_per_wavelength: Array, interpolation: Interpolation) -> np.ndarray:
    """Share of variance that horizontal interpolation to random positions keeps of a wave along the grid; its length in cells.

    The mean over positions of |Σ weight exp(ikΔ j)|², by quadrature that is exact for it; linear: (2 + cos kΔ)/3. For a wave askew to
    the grid the shares of both directions multiply.
    """
    phase = 2.0 * np.pi / np.asarray(cells_per_wavelength, dtype=np.float64)
    if interpolation == "spectral":
        return np.ones_like(phase)
    order = ORDERS[interpolation]
    nodes, gauss = np.polynomial.legendre.leggauss(order)  # the square of a polynomial of degree order - 1
    weights = np.zeros((nodes.size, 6))
    for row, node in zip(weights, nodes, strict=True):
        lagrange_weights(0.5 * (node + 1.0), order, row)
    wave = np.exp(1j * np.multiply.outer(phase, np.arange(order)))
    return np.asarray((np.abs(wave @ weights[:, :order].T) ** 2) @ (0.5 * gauss))


@dataclass(frozen=True)
class ProfilerResponse:
    """Factors (heights, wavelengths) of a level four-beam profiler on horizontal waves along one pair of beams: `cell` (range cell and
    footprint), `pair` (spread of the beams, u of u), `leak` (u of w), `averaging` (ensemble mean of a pattern carried at a speed)."""

    wavelengths: np.ndarray
    heights: np.ndarray
    cell: np.ndarray
    pair: np.ndarray
    leak: np.ndarray
    averaging: np.ndarray


def profiler_response(
    settings: InstrumentSettings, wavelengths: np.ndarray, heights: np.ndarray, speed: float = 0.0
) -> ProfilerResponse:
    """The factors of an untilted profiler at `heights` above (or below) its head [m] for horizontal `wavelengths` [m]; speed [m s-1] of the
    pattern along the pair."""
    k = 2.0 * np.pi / np.asarray(wavelengths, dtype=np.float64)[None, :]
    height = np.abs(np.asarray(heights, dtype=np.float64))[:, None]
    theta = np.radians(settings.beam_angle)
    cell = settings.cell_length / np.cos(theta)
    pulse = (settings.pulse_length or settings.cell_length) / np.cos(theta)
    # the wave is horizontal: along the beam it is k sin θ, across it k cos θ (in the plane of the pair)
    along = range_response(k * np.sin(theta), cell, pulse)
    across = footprint_response(k * np.cos(theta), footprint_deviation(settings.beam_width, height / np.cos(theta)))
    pair = pair_response(k, height * np.tan(theta), settings.beam_angle)
    leak = pair.u_of_w if settings.looking == "up" else -pair.u_of_w
    step = speed * settings.averaging_interval / settings.pings
    averaging = np.broadcast_to(ping_mean_response(0.5 * k * step, settings.pings), pair.u_of_u.shape)
    return ProfilerResponse(np.asarray(wavelengths, dtype=np.float64), height.ravel(), along * across, pair.u_of_u, leak, averaging)
