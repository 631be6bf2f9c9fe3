"""Tables with known truth: scattered forcing, and a storm whose waves and wind rise together."""

from __future__ import annotations

import numpy as np

from lespost.scaling.table import ScaleTable

STEP = 1800.0


def red_noise(rng: np.random.Generator, rows: int, memory: float) -> np.ndarray:
    """Unit-variance series (rows,) of lag-one correlation `memory`."""
    white = rng.standard_normal(rows)
    out = np.empty(rows)
    out[0] = white[0]
    for i in range(1, rows):
        out[i] = memory * out[i - 1] + np.sqrt(1 - memory**2) * white[i]
    return out


def scattered(rng: np.random.Generator, rows: int = 60, us0: float = 0.0, ustar: float = 0.0, constant: float = 1.0, scatter: float = 0.15,
              memory: float = 0.0, error: float = 0.0, spread: float = 0.5) -> ScaleTable:
    """V = constant u_s0^us0 u*^ustar with u* and u_s0 spread independently; log-normal scatter; `error` of measurement in each column."""
    wind = 0.006 * np.exp(spread * red_noise(rng, rows, memory))
    waves = 0.06 * np.exp(spread * red_noise(rng, rows, memory))
    velocity = constant * waves**us0 * wind**ustar * np.exp(scatter * red_noise(rng, rows, memory))
    columns = {"velocity": velocity, "ustar": wind, "us0": waves}
    errors = {}
    if error > 0:
        columns = {name: values * np.exp(error * rng.standard_normal(rows)) for name, values in columns.items()}
        errors = {name: error * values for name, values in columns.items()}
    return ScaleTable(columns, errors, np.arange(rows) * STEP)


def storm(rng: np.random.Generator, rows: int = 40, hidden: float = 0.003, waves: float = 0.0012, scatter: float = 0.18,
          wave_scatter: float = 0.05) -> ScaleTable:
    """A storm of steadily rising wind in which V = u*²/`hidden` and u_s0 = u*²/`waves`: one hidden velocity behind each."""
    wind = 0.004 * np.exp(np.linspace(0.0, 1.2, rows) + 0.03 * rng.standard_normal(rows))
    drift = wind**2 / waves * np.exp(wave_scatter * rng.standard_normal(rows))
    velocity = wind**2 / hidden * np.exp(scatter * rng.standard_normal(rows))
    depth = 40 * np.exp(0.03 * rng.standard_normal(rows))
    columns = {"velocity": velocity, "ustar": wind, "us0": drift, "h": depth, "coriolis_parameter": np.full(rows, 1e-4)}
    errors = {"us0": wave_scatter * drift, "ustar": 0.02 * wind}
    return ScaleTable(columns, errors, np.arange(rows) * STEP)
