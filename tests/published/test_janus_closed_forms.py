"""Closed forms of a four-beam profiler. Every expected number is derived in closed form (geometry, Fourier integrals) unless its line
names a source; the code under test reaches them through volumes, weights and transforms, not through the formula.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad

from lespost.instruments import moments, noise, response
from lespost.instruments.doppler_profiler import DopplerProfiler, beam_volumes
from lespost.instruments.geometry import beam_directions, place_beams, rotation, side_lobe_distance
from lespost.instruments.operator import Streak, Volumes, make_sampler
from lespost.instruments.settings import InstrumentSettings
from lespost.instruments.transforms import (
    error_row,
    error_velocity,
    instrument_matrix,
    instrument_to_simulation,
    solution_matrix,
    three_beam_vectors,
    to_vectors,
)
from lespost.instruments.weights import footprint_deviation, footprint_points, range_weights
from tests.unit.instruments.water import Flow, water

UNIFORM = np.array([0.3, -0.2, 0.05])


def thin(height: float, **changes: object) -> InstrumentSettings:
    """A level noise-free profiler with one vanishingly thin cell at `height` above a head 30 m deep, in 31 m of water."""
    cell = 1e-4
    asked = {"name": "p", "depth": 30.0, "cell_length": cell, "blank": height - cell, "cells": 1, "noise": 0.0, "quantisation": 0.0,
             "side_lobes": False, "position": (3.3, 0.0), "interpolation": "spectral", **changes}
    return InstrumentSettings.model_validate(asked)


def read(settings: InstrumentSettings, u: Flow, v: Flow, w: Flow, lengths: tuple[float, float] = (40.0, 40.0)) -> np.ndarray:
    """u, v, w, error velocity of the first cell at the settings' position in a flow without vertical structure."""
    fields = water(u, v, w, lengths=lengths, depth=31.0)
    instrument = DopplerProfiler.place(settings, fields)
    sampler = make_sampler(fields, instrument.volumes, settings.interpolation)
    assert settings.position is not None
    beams = sampler.velocities(sampler.read(0), np.array([settings.position[0]]), np.array([settings.position[1]]), Streak())[0, :4]
    directions = instrument.beams.directions
    return np.append(to_vectors(beams, directions), error_velocity(beams, directions))


def cosine_x(amplitude: float, wavelength: float) -> Flow:
    return lambda x, y, z, t: amplitude * np.cos(2 * np.pi * x / wavelength) + 0.0 * y + 0.0 * z


def zero(x: np.ndarray, y: np.ndarray, z: np.ndarray, t: float) -> np.ndarray:
    return 0.0 * (x + y + z)


@pytest.mark.parametrize(("heading", "pitch", "roll"), [(0, 0, 0), (137, 6, -4), (-20, 12, 9)])
@pytest.mark.parametrize("upward", [True, False])
def test_uniform_flow_is_exact_whatever_the_attitude(heading: float, pitch: float, roll: float, upward: bool) -> None:
    directions = beam_directions(20.0, heading, pitch, roll, upward)
    beams = directions @ UNIFORM
    np.testing.assert_allclose(to_vectors(beams, directions), UNIFORM, atol=1e-14)
    assert error_velocity(beams, directions) == pytest.approx(0.0, abs=1e-14)
    for missing in range(4):
        np.testing.assert_allclose(three_beam_vectors(beams, directions, missing), UNIFORM, atol=1e-13)
    # beam -> instrument -> simulation is the same as the least squares with the true directions
    own = instrument_matrix(20.0, upward) @ beams
    np.testing.assert_allclose(instrument_to_simulation(own[:3], heading, pitch, roll, upward), UNIFORM, atol=1e-13)
    np.testing.assert_allclose(rotation(heading, pitch, roll, upward) @ rotation(heading, pitch, roll, upward).T, np.eye(3), atol=1e-14)


def test_the_transformation_matrix_of_20_degrees() -> None:
    # b = 1/(4 cos θ), a = 1/(2 sin θ), d = a/√2, as they stand in the header of a real record (0.26604, 1.46190, 1.03372)
    matrix = instrument_matrix(20.0)
    np.testing.assert_allclose(matrix[0], 1.461902 * np.array([1, -1, 0, 0]), atol=1e-6)
    np.testing.assert_allclose(matrix[1], 1.461902 * np.array([0, 0, 1, -1]), atol=1e-6)
    np.testing.assert_allclose(matrix[2], np.full(4, 0.2660444), atol=1e-6)
    np.testing.assert_allclose(matrix[3], 1.0337210 * np.array([1, 1, -1, -1]), atol=1e-6)


def along(weights: tuple[np.ndarray, np.ndarray], k: float) -> float:
    """Factor of a set of range weights on a wave along the beam, in phase with the cell centre."""
    return float(weights[1] @ np.cos(k * weights[0]))


def test_range_weights_of_a_wave() -> None:
    k = 2 * np.pi / 8.0
    assert along(range_weights(2.0, 2.0), k) == pytest.approx(0.810569, abs=1e-6)  # [sin(kL/2)/(kL/2)]²
    assert along(range_weights(2.0, 3.0), k) == pytest.approx(0.706040, abs=1e-6)
    for cell, pulse in ((2.0, 2.0), (2.0, 3.0), (4.0, 1.0)):
        assert along(range_weights(cell, pulse), k) == pytest.approx(float(response.range_response(k, cell, pulse)), rel=2e-5)


def test_range_weights_on_polynomials_and_an_exponential() -> None:
    s, weight = range_weights(1.5, 1.5)
    assert weight.sum() == pytest.approx(1.0, abs=1e-14)
    assert weight @ s == pytest.approx(0.0, abs=1e-14)
    assert weight @ s**2 == pytest.approx(1.5**2 / 6, abs=1e-13)
    assert weight @ np.exp(s / 5.0) == pytest.approx((np.sinh(0.15) / 0.15) ** 2, abs=1e-9)


def test_adjacent_cells_share_a_quarter_of_their_weight() -> None:
    length = 1.3

    def weight(s: float) -> float:
        """The triangle as the convolution of two boxes says it: the overlap of pulse and gate."""
        return max(0.0, min(s + length / 2, length / 2) - max(s - length / 2, -length / 2)) / length**2

    shared = quad(lambda s: weight(s) * weight(s - length), 0, length, points=[length / 2])[0]
    alone = quad(lambda s: weight(s) ** 2, -length, length, points=[0.0])[0]
    assert shared / alone == pytest.approx(0.25, abs=1e-9)
    # and the points under test follow this weight: moments up to the sixth, each by quadrature
    s, ours = range_weights(length, length)
    for power in (2, 4, 6):
        assert ours @ s**power == pytest.approx(2 * quad(lambda r, n=power: weight(r) * r**n, 0, length)[0], rel=1e-12)


def test_a_pair_of_beams_on_a_wave_of_u() -> None:
    k, s = 2 * np.pi / 40.0, 15.0 * np.tan(np.radians(20.0))
    got = read(thin(15.0), cosine_x(1.0, 40.0), zero, zero)
    # the vertical extent of the thin cell and the slant of its beam are below 1e-9
    assert got[0] / np.cos(k * 3.3) == pytest.approx(0.654266, abs=1e-6)
    # w is the mean of both pairs, of which only one sees the wave: half of -tan θ sin ks sin kx
    assert got[2] == pytest.approx(-0.5 * np.tan(np.radians(20.0)) * np.sin(k * s) * np.sin(k * 3.3), abs=1e-8)
    pair = response.pair_response(k, s, 20.0)
    assert got[0] == pytest.approx(float(pair.u_of_u) * np.cos(k * 3.3), abs=1e-8)
    assert got[2] == pytest.approx(0.5 * float(pair.w_of_u) * np.sin(k * 3.3), abs=1e-8)


def test_a_pair_of_beams_on_a_wave_of_w() -> None:
    k, s = 2 * np.pi / 40.0, 15.0 * np.tan(np.radians(20.0))
    u, v, w, error = read(thin(15.0), zero, zero, cosine_x(1.0, 40.0))
    cos_kx, sin_kx = np.cos(k * 3.3), np.sin(k * 3.3)
    assert u == pytest.approx(-np.sin(k * s) / np.tan(np.radians(20.0)) * sin_kx, abs=1e-8)
    assert v == pytest.approx(0.0, abs=1e-9)
    assert w == pytest.approx(0.5 * (1 + np.cos(k * s)) * cos_kx, abs=1e-8)
    assert error == pytest.approx((np.cos(k * s) - 1) / np.tan(np.radians(20.0)) / np.sqrt(2) * cos_kx, abs=1e-8)
    assert u == pytest.approx(float(response.pair_response(k, s, 20.0).u_of_w) * sin_kx, abs=1e-8)
    assert w == pytest.approx(float(response.four_beam_vertical_response(k, s)) * cos_kx, abs=1e-8)
    assert error == pytest.approx(float(response.error_velocity_response(k, s, 20.0)) * cos_kx, abs=1e-8)


def test_looking_down_turns_the_leak_of_w() -> None:
    k, s = 2 * np.pi / 40.0, 15.0 * np.tan(np.radians(20.0))
    down = thin(15.0, depth=10.0, looking="down")
    u, _, w, _ = read(down, zero, zero, cosine_x(1.0, 40.0))
    assert u == pytest.approx(np.sin(k * s) / np.tan(np.radians(20.0)) * np.sin(k * 3.3), abs=1e-8)
    assert w == pytest.approx(0.5 * (1 + np.cos(k * s)) * np.cos(k * 3.3), abs=1e-8)


@pytest.mark.parametrize(("near_surface", "expected"), [(True, -1.1741), (False, 2.6206)])
def test_rolls_across_a_pair(near_surface: bool, expected: float) -> None:
    """Rolls 60 m apart seen 20 m above the head: reversed near the surface, 2.6 times too strong below."""
    wave = 2 * np.pi / 60.0
    sign = -1.0 if near_surface else 1.0
    got = read(thin(20.0, position=(0.0, 11.0)), zero, lambda x, y, z, t: sign * np.sin(wave * y) + 0.0 * x + 0.0 * z,
               lambda x, y, z, t: -np.cos(wave * y) + 0.0 * x + 0.0 * z, lengths=(60.0, 60.0))
    ratio = got[1] / (sign * np.sin(wave * 11.0))
    assert ratio == pytest.approx(expected, abs=5e-5)
    s = 20.0 * np.tan(np.radians(20.0))
    assert float(response.roll_response(wave, s, 20.0, 1.0, near_surface)) == pytest.approx(ratio, abs=1e-7)


def test_a_gaussian_footprint_on_a_wave() -> None:
    k = 2 * np.pi / 4.0
    assert float(response.footprint_response(k, 0.6)) == pytest.approx(0.641381, abs=1e-6)
    # nine points are exact for polynomials of degree 5, so to 1 % for waves longer than six standard deviations
    places, weights = footprint_points(3.0)
    assert weights @ np.cos(k * 0.6 * places[:, 0]) == pytest.approx(0.641381, abs=6e-3)
    assert weights @ np.cos(k * 0.2 * places[:, 0]) == pytest.approx(np.exp(-((k * 0.2) ** 2) / 2), abs=2e-5)
    # two-way width by quadrature: the product of two one-way patterns that halve at 2 degrees off the axis (full width 4)
    way = quad(lambda a: a**2 * 0.5 ** (2 * (a / 2.0) ** 2), -20, 20)[0] / quad(lambda a: 0.5 ** (2 * (a / 2.0) ** 2), -20, 20)[0]
    assert float(footprint_deviation(4.0, 10.0)) == pytest.approx(10.0 * np.radians(np.sqrt(way)), rel=1e-9)


def covariance() -> np.ndarray:
    root = np.random.default_rng(4).normal(size=(3, 3))
    return root @ root.T


def test_second_moments_through_beams_are_exact() -> None:
    tensor = covariance()
    directions = beam_directions(20.0)
    variances = np.einsum("bi,ij,bj->b", directions, tensor, directions)
    # Stacey, Monismith & Burau 1999; Lu & Lueck 1999
    assert moments.variance_method(variances[0], variances[1], 20.0) == pytest.approx(tensor[0, 2], abs=1e-12)
    assert moments.variance_method(variances[2], variances[3], 20.0) == pytest.approx(tensor[1, 2], abs=1e-12)
    energy = moments.five_beam_kinetic_energy(variances, tensor[2, 2], 20.0)
    assert energy == pytest.approx(0.5 * np.trace(tensor), abs=1e-12)


@pytest.mark.parametrize("tilt", [5.0, -8.0])
def test_tilt_mixes_the_variances_into_the_stress(tilt: float) -> None:
    tensor = covariance()
    directions = beam_directions(20.0, pitch=tilt)
    variances = np.einsum("bi,ij,bj->b", directions, tensor, directions)
    read_as = moments.variance_method(variances[0], variances[1], 20.0)
    assert read_as == pytest.approx(moments.tilted_stress(tensor[0, 2], tensor[0, 0], tensor[2, 2], tilt), abs=1e-12)


def test_noise_of_the_components() -> None:
    """σ_b 0.08 m/s: u and error velocity 0.16540, w 0.04257; stress from 200 samples 7.06e-4; all by simulation as well."""
    rng = np.random.default_rng(11)
    beams = rng.normal(0.0, 0.08, (400_000, 4))
    directions = beam_directions(20.0)
    vectors = to_vectors(beams, directions)
    assert vectors[:, 0].std() == pytest.approx(0.16540, rel=0.005)
    assert vectors[:, 2].std() == pytest.approx(0.04257, rel=0.005)
    assert error_velocity(beams, directions).std() == pytest.approx(0.16540, rel=0.005)
    row_sizes = np.sqrt((np.vstack([solution_matrix(directions), error_row(directions)]) ** 2).sum(axis=1))
    np.testing.assert_allclose(0.08 * row_sizes, [0.16540, 0.16540, 0.04257, 0.16540], atol=6e-6)
    assert moments.stress_deviation(0.08, 20.0, 200) == pytest.approx(7.06e-4, abs=1e-6)
    variances = beams.reshape(2000, 200, 4).var(axis=1, ddof=1)
    assert moments.variance_method(variances[:, 0], variances[:, 1], 20.0).std() == pytest.approx(7.06e-4, rel=0.06)
    assert noise.beam_noise_of_horizontal(0.16540, 20.0) == pytest.approx(0.08, rel=1e-4)


def test_noise_falls_with_the_square_root_of_the_pings() -> None:
    rng = np.random.default_rng(5)
    for pings in (4, 25):
        ping_noise = noise.PingNoise(0.1, pings)
        assert ping_noise.of_mean(np.zeros(100_000), rng).std() == pytest.approx(0.1 / np.sqrt(pings), rel=0.01)
        assert ping_noise.of_pings(np.zeros((pings, 40_000)), rng).std() == pytest.approx(0.1 / np.sqrt(pings), rel=0.015)


def test_ambiguity() -> None:
    assert noise.ambiguity_velocity(1500.0, 300e3, 0.7142857e-3) == pytest.approx(1.75, abs=1e-6)
    np.testing.assert_allclose(noise.wrap(np.array([2.1, -1.8, 1.0, 5.25]), 1.75), [-1.4, 1.7, 1.0, -1.75], atol=1e-12)
    assert noise.velocity_range_product(1500.0, 1e6) == pytest.approx(0.28125, abs=1e-12)


def test_pulse_pair_noise_against_a_simulation() -> None:
    """Correlation 0.7, 64 looks, V_a 1.75 m/s: 0.0502 m/s (Miller & Rochwarger 1972; Zrnić 1977, from memory)."""
    assert noise.pulse_pair_deviation(1.75, 0.7, 64) == pytest.approx(0.0502, abs=5e-5)
    rng = np.random.default_rng(8)
    one, other = (rng.normal(size=(20_000, 64, 2)) @ [1, 1j] for _ in range(2))
    two = 0.7 * one + np.sqrt(1 - 0.49) * other
    velocities = 1.75 / np.pi * np.angle((np.conj(one) * two).sum(axis=1))
    assert velocities.std() == pytest.approx(0.0502, rel=0.03)


def test_spread_of_velocity_inside_a_cell() -> None:
    rng = np.random.default_rng(2)
    spread, lag, k = 0.3, 7e-4, 2 * np.pi * 300e3 / 1500.0
    coherence = abs(np.exp(2j * k * lag * rng.normal(0.0, spread, 2_000_000)).mean())
    assert noise.pulse_correlation(300e3, 1500.0, lag, spread) == pytest.approx(coherence, abs=2e-3)
    s, weight = range_weights(2.0, 2.0)
    assert noise.shear_spread(0.05, 2.0) == pytest.approx(float(np.sqrt(weight @ (0.05 * s) ** 2)), rel=1e-12)


def test_averages_of_an_advected_wave() -> None:
    k = 2 * np.pi / 30.0
    assert float(response.averaging_response(k, 0.2, 60.0)) == pytest.approx(0.756827, abs=1e-6)
    assert float(response.ping_mean_response(0.5 * k * 0.2 * 3.0, 20)) == pytest.approx(0.757325, abs=1e-6)
    offsets = 0.2 * 3.0 * (np.arange(20) - 9.5)
    assert float(np.cos(k * offsets).mean()) == pytest.approx(0.757325, abs=1e-6)
    # pings a whole wavelength apart all see the same
    assert float(response.ping_mean_response(np.pi, 7)) == pytest.approx(1.0, abs=1e-12)


def test_side_lobes() -> None:
    # 1 - cos θ at 20 degrees: 6.03 % of the distance
    assert side_lobe_distance(100.0, 20.0, 0.0) == pytest.approx(6.03, abs=0.005)
    assert side_lobe_distance(40.0, 20.0, 0.0) == pytest.approx(2.412, abs=5e-4)
    assert side_lobe_distance(40.0, 20.0, 1.0) == pytest.approx(3.912, abs=5e-4)  # 1.5 cells more: Lentz et al. 2022
    assert side_lobe_distance(40.0, 20.0, 0.0, tilt=5.0) == pytest.approx(3.748, abs=5e-4)


def volume_means(volumes: Volumes, component: np.ndarray) -> np.ndarray:
    """Beam velocities of the volumes from velocities (points, 3) at their own points."""
    projected = (component * volumes.directions[volumes.owner]).sum(axis=1) * volumes.weights
    return np.bincount(volumes.owner, projected, minlength=volumes.count)


@pytest.mark.parametrize(("looking", "horizontal", "vertical"), [("up", 2.3730, 0.6217), ("down", -0.7199, 1.0314)])
def test_a_deep_water_wave_through_a_pair(looking: str, horizontal: float, vertical: float) -> None:
    """Period 7 s, cell 20 m from the head, 20 degrees: what is in phase with the orbital velocity at the cell, over it.

    Looking down the horizontal part comes out reversed: the beams are more than the angle θ of a wave apart.
    """
    omega = 2 * np.pi / 7.0
    k = omega**2 / 9.81
    settings = thin(20.0, depth=30.0 if looking == "up" else 10.0, looking=looking)
    beams = place_beams(settings, 0.0, -60.0, 1e6)
    volumes = beam_volumes(beams, settings)
    amplitude = omega * np.exp(-k * beams.depths[0])
    u = w = 0.0
    for time in np.arange(64) / 64 * 7.0:
        phase = k * volumes.x - omega * time
        orbit = omega * np.exp(k * volumes.z)[:, None] * np.stack([np.cos(phase), 0 * phase, np.sin(phase)], axis=1)
        b = volume_means(volumes, orbit)
        sign = 1.0 if looking == "up" else -1.0
        u += (b[0] - b[1]) / (2 * np.sin(np.radians(20))) * np.cos(-omega * time) / 32 / amplitude
        w += sign * (b[0] + b[1]) / (2 * np.cos(np.radians(20))) * np.sin(-omega * time) / 32 / amplitude
    assert u == pytest.approx(horizontal, abs=1e-4)
    assert w == pytest.approx(vertical, abs=1e-4)
    formula = response.wave_response(k, 20 * np.tan(np.radians(20)), 20.0, "up" if looking == "up" else "down")
    np.testing.assert_allclose(formula, [u, w], atol=1e-7)


@pytest.mark.parametrize("cells", [4.0, 6.0, 8.0])
@pytest.mark.parametrize("interpolation", ["linear", "cubic", "quintic", "spectral"])
def test_variance_kept_by_interpolation(cells: float, interpolation: str) -> None:
    """Linear: (2 + cos kΔ)/3, 0.90 at 8 cells and 0.67 at 4; the others against positions drawn evenly over the cell."""
    if interpolation == "linear":
        expected = (2 + np.cos(2 * np.pi / cells)) / 3
        assert float(response.interpolation_response(cells, "linear")) == pytest.approx(expected, abs=1e-12)
    length = 48.0
    fields = water(u=cosine_x(1.0, cells), size=(48, 4, 4), lengths=(length, 4.0))
    one = Volumes(np.zeros(1), np.zeros(1), np.full(1, -20.0), np.ones(1), np.zeros(1, np.int64), np.array([[1.0, 0.0, 0.0]]))
    sampler = make_sampler(fields, one, interpolation)  # type: ignore[arg-type]
    x = (np.arange(480) + 0.5) / 480 * length
    kept = 2 * (sampler.velocities(sampler.read(0), x, np.full(480, 0.5), Streak()) ** 2).mean()
    assert kept == pytest.approx(float(response.interpolation_response(cells, interpolation)), abs=2e-3)  # type: ignore[arg-type]
