"""Spectrum of Donelan, Hamilton & Hui (1985): its drift at the surface depends on where it is cut, that at depth does not."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.forcing.spectrum import Spectrum, SpectrumSummary, stokes_drift, summary
from lespost.forcing.wave_models import donelan_hamilton_hui


def sea(largest: float) -> Spectrum:
    frequency = np.linspace(0.1, largest, int(4000 * largest)) / (2 * np.pi)
    return Spectrum(frequency, donelan_hamilton_hui(frequency, 10.0, 1.2, 9.81))


def cut(largest: float) -> SpectrumSummary:
    return summary(sea(largest), tail=False, gravity=9.81)


def test_surface_drift_and_wave_height() -> None:
    # α g²/(ω_p ω⁴) exp[-(ω_p/ω)⁴] γ^Γ (Donelan et al. 1985), U10 = 10 m/s, wave age 1.2, ω from 0.1 to 10 rad/s; derived.
    assert cut(10.0).us0 == pytest.approx(0.3456459, rel=1e-4)
    assert cut(10.0).hs == pytest.approx(2.949506, rel=1e-4)


def test_cut_at_twice_the_frequency() -> None:
    assert cut(20.0).us0 == pytest.approx(0.4359342, rel=1e-4)  # derived
    depths = [float(stokes_drift(-1.0, sea(largest), tail=False, gravity=9.81)[0]) for largest in (10.0, 20.0)]
    assert depths == pytest.approx([0.1163247, 0.1163247], rel=1e-5)  # derived


def test_surface_drift_has_no_limit() -> None:
    """Trap: an f^-4 tail adds 2 α g ln 2/ω_p for each doubling of the last frequency."""
    step = 2 * 0.006 * 1.2**-0.55 * 9.81 * np.log(2) / (9.81 / 12.0)
    assert cut(20.0).us0 - cut(10.0).us0 == pytest.approx(step, rel=1e-3)
    assert cut(40.0).us0 - cut(20.0).us0 == pytest.approx(step, rel=1e-3)
