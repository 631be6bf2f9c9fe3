"""The four-beam Doppler profiler: its sampling volumes, and how its beams become a series.

Everything between (places, times, the water, noise) is common to all instruments: sample.py.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import xarray as xr

from lespost.fields.geometry import domain_lengths
from lespost.instruments.geometry import OPPOSING_PAIRS, Beams, place_beams
from lespost.instruments.noise import PingNoise, beam_noise_of_horizontal
from lespost.instruments.operator import Volumes
from lespost.instruments.response import profiler_response
from lespost.instruments.settings import InstrumentSettings
from lespost.instruments.transforms import error_row, error_velocity, map_to_heights, solution_matrix, to_vectors
from lespost.instruments.weights import footprint_deviation, footprint_points, range_weights
from lespost.series import make_series

BEAMS = 4


def beam_volumes(beams: Beams, settings: InstrumentSettings, surface: float = np.inf, bottom: float = -np.inf) -> Volumes:
    """The sampling volumes of all cells of all beams relative to the head's place in the horizontal; volume number 4 * cell + beam.

    Points beyond the boundaries `bottom` and `surface` [m] are left out and the rest of the cell counts for them.
    """
    offsets, along_weights = range_weights(beams.cell_range, beams.pulse_range)
    places, across_weights = footprint_points(settings.beam_width)
    weights = np.outer(along_weights, across_weights).ravel()
    points, shares, owners = [], [], []
    for cell, distance in enumerate(beams.ranges):
        width = float(footprint_deviation(settings.beam_width, float(distance)))
        for beam, direction in enumerate(beams.directions):
            side = width * places @ np.stack(_across(direction))
            at = ((distance + offsets)[:, None, None] * direction + side[None]).reshape(-1, 3) - [0.0, 0.0, settings.depth]
            inside = (at[:, 2] <= surface) & (at[:, 2] >= bottom)
            points.append(at[inside])
            shares.append(weights[inside] / weights[inside].sum())
            owners.append(np.full(int(inside.sum()), BEAMS * cell + beam, dtype=np.int64))
    at = np.concatenate(points)
    return Volumes(at[:, 0].copy(), at[:, 1].copy(), at[:, 2].copy(), np.concatenate(shares), np.concatenate(owners),
                   np.tile(beams.directions, (beams.ranges.size, 1)))


def _across(direction: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Two unit vectors across a beam and across each other."""
    helper = np.array([0.0, 0.0, 1.0]) if abs(direction[2]) < 0.9 else np.array([1.0, 0.0, 0.0])
    first = np.cross(direction, helper)
    first /= np.linalg.norm(first)
    return first, np.cross(direction, first)


@dataclass(frozen=True)
class DopplerProfiler:
    """A profiler placed in the water: beams, the volumes they sample, noise of a ping."""

    settings: InstrumentSettings
    beams: Beams
    volumes: Volumes
    noise: PingNoise
    repeated: bool

    @classmethod
    def place(cls, settings: InstrumentSettings, fields: xr.Dataset) -> DopplerProfiler:
        """The instrument of `settings` in the domain of `fields`. Raises DataError where it does not fit (geometry.place_beams)."""
        bottom, surface = float(fields["z_face"].values[0]), float(fields["z_face"].values[-1])
        width = min(domain_lengths(fields))
        beams = place_beams(settings, surface, bottom, width)
        deviation = settings.noise if settings.noise_of == "beam" else beam_noise_of_horizontal(settings.noise, settings.beam_angle)
        noise = PingNoise(deviation, settings.pings, settings.ambiguity_velocity, settings.quantisation)
        return cls(settings, beams, beam_volumes(beams, settings, surface, bottom), noise, beams.spread >= width)

    @property
    def depths(self) -> np.ndarray:
        """Depths of the cells as the instrument takes them [m], in the order of its ranges."""
        return self.beams.depths

    def series(self, recorded: np.ndarray, centres: np.ndarray) -> xr.Dataset:
        """The canonical series of ensemble means `recorded` (deployments, ensembles, volumes) at `centres` [s], shallowest cell first.

        u, v, w, error_velocity in the axes of the simulation; beam_1 .. beam_4 as they came, before bin mapping.
        """
        s, directions = self.settings, self.beams.directions
        raw = recorded.reshape(*recorded.shape[:2], self.beams.ranges.size, BEAMS)
        tilted = s.pitch != 0.0 or s.roll != 0.0
        beams = map_to_heights(raw, self.beams.ranges, directions, self.beams.heights) if s.bin_mapping and tilted else raw
        vectors = to_vectors(beams, directions)
        order = np.argsort(self.depths)
        variables = {"u": vectors[..., 0], "v": vectors[..., 1], "w": vectors[..., 2],
                     "error_velocity": error_velocity(beams, directions)}
        variables = {name: np.ascontiguousarray(values[..., order]) for name, values in variables.items()}
        spoilt = self.beams.contaminated[order]
        flags = {name: np.where(np.isfinite(values), np.where(spoilt, 4, 1), 9).astype(np.int8) for name, values in variables.items()}
        deviations = self._component_noise()
        out = make_series(
            variables, centres, self.depths[order], instrument=s.name, flags=flags, averaging_interval=s.averaging_interval,
            noise_standard_deviation=deviations["u"],
            provenance="virtual four-beam Doppler profiler in a large-eddy simulation",
        )
        for beam in range(BEAMS):
            out[f"beam_{beam + 1}"] = (out["u"].dims, np.ascontiguousarray(raw[:, :, order, beam]),
                                       {"units": "m s-1", "long_name": f"velocity along beam {beam + 1}",
                                        "standard_name": "radial_sea_water_velocity_away_from_instrument"})
        out.attrs.update({f"{name}_noise_standard_deviation": value for name, value in deviations.items()})
        out.attrs.update({
            "beam_noise_standard_deviation": self.noise.ensemble_deviation, "pings_per_ensemble": s.pings, "beam_angle": s.beam_angle,
            "head_depth": s.depth, "looking": s.looking, "heading": s.heading, "pitch": s.pitch, "roll": s.roll,
            "opposing_pairs": int(tuple(a % 360.0 for a in s.beam_azimuths) == OPPOSING_PAIRS), "beam_spread": self.beams.spread,
            "beam_sign": "positive away from the head",
        })
        if self.repeated:
            out.attrs["samples_itself"] = (f"the beams spread {self.beams.spread:.0f} m, as wide as the periodic domain or wider: "
                                           "they meet the same water twice")
        return out

    def response(self, wavelengths: np.ndarray, speed: float) -> dict[str, xr.DataArray]:
        """Amplitude factors (wavelength, depth) of the level instrument on horizontal waves in the plane of a pair of beams, shallowest
        cell first; speed: of the pattern that carries them past [m s-1]. See response.profiler_response."""
        depths = np.sort(self.depths)
        factors = profiler_response(self.settings, wavelengths, self.settings.depth - depths, speed)
        coords = {"depth": depths, "wavelength": ("wavelength", wavelengths, {"units": "m", "long_name": "horizontal wavelength"})}
        says = {
            "cell": "factor of the range cell and the footprint",
            "pair": "factor of the spread of the beams on the velocity component in their plane",
            "leak": "share of vertical velocity read as horizontal velocity, a quarter wave behind",
            "averaging": "factor of the ensemble mean of a pattern carried in the plane of the beams",
        }
        return {f"response_{name}": xr.DataArray(getattr(factors, name).T, coords, ("wavelength", "depth"),
                                                 attrs={"units": "1", "long_name": text}) for name, text in says.items()}

    def _component_noise(self) -> dict[str, float]:
        """Noise of an ensemble in each component [m s-1]: that of the beams through the least-squares solution."""
        rows = np.concatenate([solution_matrix(self.beams.directions), error_row(self.beams.directions)[None]])
        sizes = self.noise.ensemble_deviation * np.sqrt((rows**2).sum(axis=1))
        return dict(zip(("u", "v", "w", "error_velocity"), map(float, sizes), strict=True))
