"""Where the platforms of virtual deployments are. A moored head stays; moving platforms will be paths in time.

Deployments are spread over the periodic domain, one at random in each of equal parts, so that together they sample it evenly.
"""

from __future__ import annotations

import numpy as np

from lespost.instruments.settings import DEPLOYMENTS, InstrumentSettings


def moored_positions(settings: InstrumentSettings, lengths: tuple[float, float], rng: np.random.Generator) -> np.ndarray:
    """(deployments, 2) x, y of the heads [m]: one as given, or spread over a domain of `lengths` [m]."""
    if settings.position is not None:
        return np.array([settings.position], dtype=np.float64)
    count = settings.deployments or DEPLOYMENTS
    # rows of parts as square as the number allows; a last row with fewer parts has wider ones
    rows = max(1, round(float(np.sqrt(count * lengths[1] / lengths[0]))))
    rows = min(rows, count)
    in_row = np.full(rows, count // rows) + (np.arange(rows) < count % rows)
    jitter = rng.random((count, 2))
    places = [((column + 0.0) / number, row / rows, 1.0 / number, 1.0 / rows)
              for row, number in enumerate(in_row) for column in range(number)]
    corners = np.array(places)
    return np.asarray((corners[:, :2] + jitter * corners[:, 2:]) * np.array(lengths))
