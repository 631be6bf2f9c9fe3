"""Beams of a Doppler profiler: unit vectors under heading and tilt, cells along them, what the side lobes spoil.

Velocities along a beam are positive away from the head. Vectors are in the axes of the simulation (x, y, z up).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lespost.errors import DataError
from lespost.instruments.settings import InstrumentSettings

#: Cells that the side lobes reach beyond the plain (1 - cos θ) rule (Lentz et al. 2022).
SIDE_LOBE_CELLS = 1.5


@dataclass(frozen=True)
class Beams:
    """directions: (4, 3) unit vectors; ranges: (cells,) slant ranges of the cell centres [m]; heights: (cells,) their nominal
    heights above (below for a downward-looking head: negative) the head [m]; depths: (cells,) nominal depths [m];
    contaminated: (cells,) whether side lobes spoil the cell; cell_range, pulse_range: lengths along the beam [m]."""

    directions: np.ndarray
    ranges: np.ndarray
    heights: np.ndarray
    depths: np.ndarray
    contaminated: np.ndarray
    cell_range: float
    pulse_range: float


def beam_directions(beam_angle: float, heading: float, pitch: float, roll: float, upward: bool) -> np.ndarray:
    """(4, 3) unit vectors; beams 1, 2 lie in the plane of the heading, 3, 4 across it (3 to the left seen from above).

    Angles in degrees. pitch tips the axis towards beam 1, roll towards beam 3. Untilted, with heading 0 and looking up:
    (±sin θ, 0, cos θ), (0, ±sin θ, cos θ).
    """
    theta, head, p, r = np.radians([beam_angle, heading, pitch, roll])
    s, c = np.sin(theta), np.cos(theta)
    level = np.array([[s, 0, c], [-s, 0, c], [0, s, c], [0, -s, c]])
    if not upward:
        level[:, 2] *= -1
    sign = 1.0 if upward else -1.0
    tip_x = np.array([[np.cos(p), 0, sign * np.sin(p)], [0, 1, 0], [-sign * np.sin(p), 0, np.cos(p)]])
    tip_y = np.array([[1, 0, 0], [0, np.cos(r), sign * np.sin(r)], [0, -sign * np.sin(r), np.cos(r)]])
    turn = np.array([[np.cos(head), -np.sin(head), 0], [np.sin(head), np.cos(head), 0], [0, 0, 1]])
    return np.asarray(level @ tip_x.T @ tip_y.T @ turn.T)


def side_lobe_depth(distance: float, beam_angle: float, cell_length: float, tilt: float = 0.0) -> float:
    """Distance from the boundary within which side lobes spoil cells [m]: D (1 - cos(θ + tilt)) + 1.5 cells.

    distance: head to boundary [m]; angles in degrees. The plain rule is D (1 - cos θ); the 1.5 cells are from Lentz et al. 2022.
    """
    return distance * (1.0 - float(np.cos(np.radians(beam_angle + abs(tilt))))) + SIDE_LOBE_CELLS * cell_length


def place_beams(settings: InstrumentSettings, domain_depth: float, width: float) -> Beams:
    """The beams of an instrument in water `domain_depth` [m] deep in a periodic domain `width` [m] wide (the narrower side).

    Raises DataError if the head is below the domain, no cell fits, or the beams spread so wide that they would sample the
    same water twice.
    """
    if settings.depth >= domain_depth:
        raise DataError(f'instrument "{settings.name}": depth {settings.depth:g} m lies below the domain ({domain_depth:g} m).')
    upward = settings.looking == "up"
    distance = settings.depth if upward else domain_depth - settings.depth
    cosine = float(np.cos(np.radians(settings.beam_angle)))
    pulse = settings.pulse_length or settings.cell_length
    first = settings.blank + 0.5 * (settings.cell_length + pulse)
    tilt = float(np.hypot(settings.pitch, settings.roll))
    spoiled = side_lobe_depth(distance, settings.beam_angle, settings.cell_length, tilt)
    reach = distance - spoiled
    count = settings.cells or int(np.floor((reach - first) / settings.cell_length + 1e-9)) + 1
    if count < 1:
        raise DataError(f'instrument "{settings.name}": between its blanking distance and the side lobes of the boundary no cell of '
                        f"{settings.cell_length:g} m fits; put the head farther away or shorten the cells.")
    above = first + settings.cell_length * np.arange(count)
    above = above[above < distance]
    directions = beam_directions(settings.beam_angle, settings.heading, settings.pitch, settings.roll, upward)
    spread = 2.0 * float(above[-1]) / cosine * float(np.sin(np.radians(settings.beam_angle + tilt)))
    if spread >= width:
        raise DataError(f'instrument "{settings.name}": its beams are {spread:.0f} m apart at their ends, the periodic domain is '
                        f"{width:.0f} m wide: they would sample the same water twice; use fewer cells.")
    heights = above if upward else -above
    return Beams(directions, above / cosine, heights, settings.depth - heights, above > reach + 1e-9, settings.cell_length / cosine,
                 pulse / cosine)
