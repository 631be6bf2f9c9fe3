"""Beams of a Doppler profiler: unit vectors under heading and tilt, cells along them, what the side lobes spoil.

Velocities along a beam are positive away from the head. Vectors are in the axes of the simulation (x, y, z up). How a cell
weights the water is in weights.py; how beams are combined in transforms.py.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from lespost.errors import DataError
from lespost.instruments.settings import InstrumentSettings

#: Cells that the side lobes reach beyond the plain (1 - cos θ) rule (Lentz et al. 2022).
SIDE_LOBE_CELLS = 1.5
#: Two opposing pairs at right angles: (±sin θ, 0, cos θ), (0, ±sin θ, cos θ).
OPPOSING_PAIRS = (0.0, 180.0, 90.0, 270.0)


@dataclass(frozen=True)
class Beams:
    """The placed beams of an instrument.

    directions: (4, 3) unit vectors. ranges: (cells,) slant ranges of the cell centres [m]. heights: (cells,) their nominal heights
    above the head, negative below it [m]. depths: (cells,) nominal depths [m]. contaminated: (cells,) whether side lobes spoil the
    cell. cell_range, pulse_range: lengths along the beam [m]. spread: largest horizontal distance between two beams [m].
    """

    directions: np.ndarray
    ranges: np.ndarray
    heights: np.ndarray
    depths: np.ndarray
    contaminated: np.ndarray
    cell_range: float
    pulse_range: float
    spread: float


def rotation(heading: float, pitch: float, roll: float, upward: bool = True) -> np.ndarray:
    """(3, 3) matrix from the axes of the instrument to those of the simulation (x to the heading, y to its left, z up).

    Angles in degrees: first pitch (the axis tips towards the heading), then roll (it tips to the left), then heading
    (counter-clockwise). The axis points up for an upward-looking head and down for a downward-looking one.
    """
    head, p, r = np.radians([heading, pitch, roll])
    sign = 1.0 if upward else -1.0
    tip_x = np.array([[np.cos(p), 0, sign * np.sin(p)], [0, 1, 0], [-sign * np.sin(p), 0, np.cos(p)]])
    tip_y = np.array([[1, 0, 0], [0, np.cos(r), sign * np.sin(r)], [0, -sign * np.sin(r), np.cos(r)]])
    turn = np.array([[np.cos(head), -np.sin(head), 0], [np.sin(head), np.cos(head), 0], [0, 0, 1]])
    return np.asarray(turn @ tip_y @ tip_x)


def instrument_directions(beam_angle: float, upward: bool = True, azimuths: Sequence[float] = OPPOSING_PAIRS) -> np.ndarray:
    """(beams, 3) unit vectors in the axes of the instrument, z up; angles in degrees."""
    theta, around = np.radians(beam_angle), np.radians(np.asarray(azimuths, dtype=np.float64))
    sine = np.sin(theta)
    vertical = np.full(around.size, np.cos(theta) if upward else -np.cos(theta))
    return np.stack([sine * np.cos(around), sine * np.sin(around), vertical], axis=1)


def beam_directions(
    beam_angle: float, heading: float = 0.0, pitch: float = 0.0, roll: float = 0.0, upward: bool = True,
    azimuths: Sequence[float] = OPPOSING_PAIRS,
) -> np.ndarray:
    """(beams, 3) unit vectors in the axes of the simulation; angles in degrees.

    Untilted, with heading 0 and looking up: (±sin θ, 0, cos θ), (0, ±sin θ, cos θ).
    """
    return np.asarray(instrument_directions(beam_angle, upward, azimuths) @ rotation(heading, pitch, roll, upward).T)


def axis_tilt(pitch: float, roll: float) -> float:
    """Angle of the axis from the vertical [degree]."""
    return float(np.degrees(np.arccos(np.cos(np.radians(pitch)) * np.cos(np.radians(roll)))))


def side_lobe_distance(distance: float, beam_angle: float, cell_length: float, tilt: float = 0.0) -> float:
    """Distance from the boundary within which side lobes spoil cells [m]: D (1 - cos(θ + tilt)) + 1.5 cells.

    distance: head to boundary [m]; angles in degrees. The plain rule is D (1 - cos θ); the 1.5 cells are those of Lentz et al. 2022.
    """
    return distance * (1.0 - float(np.cos(np.radians(beam_angle + abs(tilt))))) + SIDE_LOBE_CELLS * cell_length


def place_beams(settings: InstrumentSettings, surface: float, bottom: float, width: float) -> Beams:
    """The beams of an instrument in water between `bottom` and `surface` [m, z up], in a periodic domain `width` [m] wide
    (its narrower side).

    Raises DataError if the head is outside the water, no cell fits, or the beams spread so wide that they would sample the
    same water twice (unless repeated_water = "label").
    """
    where = f'instrument "{settings.name}"'
    head = -settings.depth
    if not bottom < head <= surface:
        raise DataError(f"{where}: depth {settings.depth:g} m lies outside the simulated water ({-surface:g} to {-bottom:g} m).")
    upward = settings.looking == "up"
    distance = surface - head if upward else head - bottom
    cosine = float(np.cos(np.radians(settings.beam_angle)))
    pulse = settings.pulse_length or settings.cell_length
    half = 0.5 * (settings.cell_length + pulse)
    first = settings.blank + half
    tilt = axis_tilt(settings.pitch, settings.roll)
    reach = distance - half
    if settings.side_lobes:
        reach = min(reach, distance - side_lobe_distance(distance, settings.beam_angle, settings.cell_length, tilt))
    count = settings.cells or int(np.floor((reach - first) / settings.cell_length + 1e-9)) + 1
    above = first + settings.cell_length * np.arange(max(count, 0))
    # a cell whose centre lies beyond the boundary, in any beam, has no water to look at
    above = above[above * _highest(settings, upward) / cosine < distance]
    if not above.size:
        raise DataError(f"{where}: between its blanking distance and the {'surface' if upward else 'bottom'} ({distance:g} m away, of "
                        f"which {distance - reach:.1f} m are spoilt) no cell of {settings.cell_length:g} m fits; put the head farther "
                        "away, or shorten the blanking distance or the cells.")
    directions = beam_directions(
        settings.beam_angle, settings.heading, settings.pitch, settings.roll, upward, settings.beam_azimuths)
    ends = directions[:, :2] * float(above[-1]) / cosine
    spread = float(np.linalg.norm(ends[:, None] - ends[None], axis=-1).max())
    if spread >= width and settings.repeated_water == "refuse":
        raise DataError(f"{where}: its beams are {spread:.0f} m apart at their ends, the periodic domain is {width:.0f} m wide: they "
                        'would sample the same water twice; use fewer cells, or write repeated_water = "label" to have it anyway, said '
                        "in the results.")
    heights = above if upward else -above
    spoilt = above > reach + 1e-9 if settings.side_lobes else np.zeros(above.size, dtype=bool)
    return Beams(directions, above / cosine, heights, settings.depth - heights, spoilt, settings.cell_length / cosine,
                 pulse / cosine, spread)


def _highest(settings: InstrumentSettings, upward: bool) -> float:
    """Vertical part of the steepest beam, a positive number."""
    directions = beam_directions(
        settings.beam_angle, settings.heading, settings.pitch, settings.roll, upward, settings.beam_azimuths)
    return float(np.abs(directions[:, 2]).max())
