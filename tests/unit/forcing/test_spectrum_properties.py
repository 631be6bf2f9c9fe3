"""What must hold for every spectrum: turning it turns the drift, units of variance scale it, depth only weakens it."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lespost.errors import DataError
from lespost.forcing.spectrum import Spectrum, direction_weights, stokes_drift, summary

FREQUENCY = np.array([0.05, 0.08, 0.1, 0.13, 0.2, 0.3, 0.45])
Z = np.array([0.0, -0.5, -4.0, -20.0])


@st.composite
def spectra(draw: st.DrawFn) -> Spectrum:
    """Spectra of each kind with some energy at every frequency."""
    seed = draw(st.integers(0, 2**32 - 1))
    rng = np.random.default_rng(seed)
    kind = draw(st.sampled_from(["plain", "direction", "moments", "full"]))
    if kind == "full":
        return Spectrum(FREQUENCY, rng.uniform(0.1, 3.0, (7, 24)), directions=np.arange(24) * 15.0)
    energy = rng.uniform(0.1, 3.0, 7)
    return Spectrum(FREQUENCY, energy, r1=rng.uniform(0.2, 1.0, 7) if kind == "moments" else None,
                    mean_direction=None if kind == "plain" else rng.uniform(-60, 60, 7))


@settings(max_examples=40)
@given(spectra(), st.floats(-360, 360))
def test_turning_turns_the_drift_and_leaves_its_modulus(spectrum: Spectrum, angle: float) -> None:
    before, after = stokes_drift(Z, spectrum), stokes_drift(Z, spectrum.rotated(angle))
    expected = (before[0] + 1j * before[1]) * np.exp(1j * np.radians(angle))
    assert after[0] + 1j * after[1] == pytest.approx(expected, rel=1e-9, abs=1e-15)
    one, other = summary(spectrum), summary(spectrum.rotated(angle))
    for name in ("us0", "transport", "hs", "fp", "tail_fraction"):
        assert getattr(other, name) == pytest.approx(getattr(one, name), rel=1e-9)


@settings(max_examples=40)
@given(spectra(), st.floats(-180, 180))
def test_towards_points_the_surface_drift(spectrum: Spectrum, angle: float) -> None:
    found = summary(spectrum.towards(angle))
    assert np.exp(1j * np.radians(found.direction)) == pytest.approx(np.exp(1j * np.radians(angle)), abs=1e-9)


@settings(max_examples=40)
@given(spectra(), st.floats(1e-3, 1e3))
def test_drift_is_linear_in_the_energy_and_height_its_root(spectrum: Spectrum, factor: float) -> None:
    scaled = Spectrum(spectrum.frequency, spectrum.density * factor, spectrum.directions, spectrum.r1, spectrum.mean_direction)
    one, other = summary(spectrum), summary(scaled)
    assert other.us0 == pytest.approx(factor * one.us0, rel=1e-10)
    assert other.hs == pytest.approx(np.sqrt(factor) * one.hs, rel=1e-10)
    assert other.decay_scale == pytest.approx(one.decay_scale, rel=1e-10)


@settings(max_examples=30)
@given(spectra())
def test_very_deep_water_is_deep_water_and_does_not_overflow(spectrum: Spectrum) -> None:
    deep, finite = stokes_drift(Z, spectrum), stokes_drift(Z, spectrum, 5000.0)
    assert np.array(finite) == pytest.approx(np.array(deep), rel=1e-9)
    assert summary(spectrum, 5000.0).transport == pytest.approx(summary(spectrum).transport, rel=1e-9)


def test_direction_weights_sum_to_the_circle_or_the_part_covered() -> None:
    assert direction_weights(np.array([0.0, 90.0, 180.0, 270.0])).sum() == pytest.approx(2 * np.pi)
    uneven = np.array([350.0, 10.0, 100.0, 200.0, 300.0])
    assert direction_weights(uneven).sum() == pytest.approx(2 * np.pi)
    assert direction_weights(uneven)[1] == pytest.approx(np.radians((20 + 90) / 2))
    assert direction_weights(np.arange(-60.0, 61.0, 10.0)).sum() == pytest.approx(np.radians(120.0))
    with pytest.raises(DataError, match="twice"):
        direction_weights(np.array([0.0, 90.0, 180.0, 270.0, 360.0]))


def test_band_widths_replace_the_trapezoid_rule() -> None:
    widths = np.array([0.02, 0.03, 0.025, 0.05, 0.08, 0.12, 0.2])
    found = summary(Spectrum(FREQUENCY, np.ones(7), bandwidth=widths))
    assert found.hs == pytest.approx(4 * np.sqrt(widths.sum()))


def test_heights_outside_the_water_are_refused() -> None:
    spectrum = Spectrum(FREQUENCY, np.ones(7))
    for z, depth in ((0.1, None), (-11.0, 10.0)):
        with pytest.raises(DataError, match="bottom to z = 0"):
            stokes_drift(z, spectrum, depth)


def test_no_energy_is_an_error_not_a_calm() -> None:
    with pytest.raises(DataError, match="no energy"):
        summary(Spectrum(FREQUENCY, np.zeros(7)))
