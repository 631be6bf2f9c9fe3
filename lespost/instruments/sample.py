"""A virtual deployment: the four-beam Doppler profiler on the forward operator, as a canonical series.

Ensembles are averaged as the instrument would: pings at their own times, noise on each, then vectors. Many deployments at once
give the sampling distribution of what a real one records once.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr

from lespost.fields.geometry import domain_depth, domain_lengths
from lespost.instruments.geometry import Beams, place_beams
from lespost.instruments.noise import noise_of_components, quantise, wrap
from lespost.instruments.operator import Sampler, Volumes
from lespost.instruments.settings import InstrumentSettings
from lespost.instruments.timing import TimePlan, plan_time
from lespost.instruments.transforms import error_velocity, map_to_heights, to_vectors
from lespost.instruments.weights import footprint, range_weights
from lespost.series import make_series

#: Field samples in an ensemble: more would repeat each other, since within an ensemble the pattern moves less than this many
#: half grid cells in practice; noise is that of all pings.
MOST_LOOKS = 12


def beam_volumes(beams: Beams, settings: InstrumentSettings, surface: float = 0.0, bottom: float = -np.inf) -> Volumes:
    """The sampling volumes of all cells of all beams, volume number cell * 4 + beam, relative to the head's position.

    Points are kept between `bottom` and `surface` [m]: what a cell would see of the boundary is left out and the rest reweighted.
    """
    offsets, weights = range_weights(beams.cell_range, beams.pulse_range)
    cross = np.array([[0.0, 0.0]])
    cross_weights = np.ones(1)
    if settings.beam_width > 0:
        # four points at √2 σ reproduce the second moments of the footprint
        cross = np.sqrt(2.0) * np.array([[1, 0], [-1, 0], [0, 1], [0, -1]])
        cross_weights = np.full(4, 0.25)
    parts: list[tuple[np.ndarray, ...]] = []
    directions = []
    for cell, distance in enumerate(beams.ranges):
        for beam, direction in enumerate(beams.directions):
            first, second = _across(direction)
            along = (distance + offsets)[:, None, None] * direction
            width = float(footprint(settings.beam_width, np.asarray(distance)))
            side = width * (cross[:, :1] * first + cross[:, 1:] * second)
            points = (along + side[None]).reshape(-1, 3)
            weight = np.outer(weights, cross_weights).ravel()
            heights = points[:, 2] - settings.depth
            good = (heights <= surface) & (heights >= bottom)
            weight = np.where(good, weight, 0.0)
            parts.append((points[:, 0], points[:, 1], np.clip(heights, bottom, surface), weight / max(weight.sum(), 1e-300),
                          np.full(weight.size, cell * 4 + beam)))
            directions.append(direction)
    x, y, z, w, owner = (np.concatenate(column) for column in zip(*parts, strict=True))
    return Volumes(x, y, z, w, owner.astype(np.int64), np.array(directions))


def _across(direction: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Two unit vectors across a beam."""
    first = np.cross(direction, [0.0, 0.0, 1.0])
    first = first / np.linalg.norm(first) if np.linalg.norm(first) > 0 else np.array([1.0, 0.0, 0.0])
    return first, np.cross(direction, first)


def positions(settings: InstrumentSettings, lengths: tuple[float, float], rng: np.random.Generator) -> np.ndarray:
    """(deployments, 2) x, y of the heads [m]: one as given, or one at random in each of equal parts of the domain."""
    if settings.position is not None:
        return np.array([settings.position], float)
    count = settings.deployments
    rows = int(np.ceil(np.sqrt(count)))
    columns = -(-count // rows)
    cells = [(i, j) for j in range(rows) for i in range(columns)][:count]
    jitter = rng.random((count, 2))
    return np.array([[(i + a) / columns * lengths[0], (j + b) / rows * lengths[1]]
                     for (i, j), (a, b) in zip(cells, jitter, strict=True)])


def ensemble_times(time: np.ndarray, plan: TimePlan, averaging: float) -> tuple[np.ndarray, np.ndarray]:
    """(centres of the ensembles [s], index of the snapshot each belongs to).

    frozen: as many whole ensembles as fit the time a snapshot stands for, about its time. interpolated: from the first to the
    last snapshot without a break; the index is that of the earlier neighbour.
    """
    if plan.mode == "interpolated":
        count = max(1, int(np.floor((time[-1] - time[0]) / averaging + 1e-9)))
        centres = time[0] + averaging * (np.arange(count) + 0.5)
        return centres, np.clip(np.searchsorted(time, centres, side="right") - 1, 0, time.size - 2)
    each = max(1, int(np.floor(plan.interval / averaging + 1e-9)))
    offsets = averaging * (np.arange(each) + 0.5 - each / 2)
    return (time[:, None] + offsets).ravel(), np.repeat(np.arange(time.size), each)


def sample(
    fields: xr.Dataset, profiles: xr.Dataset, settings: InstrumentSettings, windows: Sequence[Any], rng: np.random.Generator
) -> xr.Dataset:
    """The series (deployment, time, depth) that the instrument would have recorded in the canonical dataset `fields`.

    u, v, w, error_velocity in m s-1 in the simulation's axes; beam_1 to beam_4 positive away from the head. profiles: of the same
    run (means carry a frozen pattern). windows: the run's (unused by a moored instrument, which records all the time).
    Raises DataError where the geometry or the time mode cannot be honest (geometry.py, timing.py).
    """
    lengths = domain_lengths(fields)
    beams = place_beams(settings, domain_depth(fields), min(lengths))
    sampler = Sampler(fields, beam_volumes(beams, settings, float(fields["z_face"][-1]), float(fields["z_face"][0])),
                      settings.interpolation)
    plan = plan_time(settings.time_mode, fields, profiles, beams.depths, settings.averaging_interval, settings.name)
    time = np.asarray(fields["time"].values, float)
    centres, owner = ensemble_times(time, plan, settings.averaging_interval)
    places = positions(settings, lengths, rng)
    pings = max(1, int(settings.averaging_interval / settings.ping_interval + 1e-9))
    looks = min(pings, MOST_LOOKS) if settings.ambiguity_velocity is None else pings
    cells = beams.ranges.size
    recorded = np.empty((places.shape[0], centres.size, cells, 4))
    slabs: dict[int, Any] = {}
    for snapshot in range(int(owner.max()) + 1):
        wanted = np.flatnonzero(owner == snapshot)
        needed = (snapshot, snapshot + 1) if plan.mode == "interpolated" else (snapshot,)
        slabs = {index: slabs.get(index) or sampler.read(index) for index in needed}
        drift = _advection(profiles, snapshot, sampler.volumes.z, settings)
        for ensemble in wanted:
            moments = centres[ensemble] + settings.averaging_interval * ((np.arange(looks) + 0.5) / looks - 0.5)
            recorded[:, ensemble] = _ensemble(sampler, slabs, snapshot, time, moments, places, drift, plan, settings, pings, cells, rng)
    if settings.bin_mapping and (settings.pitch or settings.roll):
        recorded = map_to_heights(recorded, beams.ranges, beams.directions, beams.heights)
    return _series(recorded, beams, centres, places, plan, settings, pings)


def _ensemble(sampler: Sampler, slabs: dict[int, Any], snapshot: int, time: np.ndarray, moments: np.ndarray, places: np.ndarray,
              drift: tuple[np.ndarray, np.ndarray], plan: TimePlan, settings: InstrumentSettings, pings: int, cells: int,
              rng: np.random.Generator) -> np.ndarray:
    """Mean beam velocities (deployments, cells, 4) of one ensemble."""
    total = np.zeros((places.shape[0], cells * 4))
    for moment in moments:
        if plan.mode == "interpolated":
            share = (moment - time[snapshot]) / (time[snapshot + 1] - time[snapshot])
            water = ((1 - share) * sampler.velocities(slabs[snapshot], places[:, 0], places[:, 1])
                     + share * sampler.velocities(slabs[snapshot + 1], places[:, 0], places[:, 1]))
        else:
            past = moment - time[snapshot]  # the pattern now at the instrument was upstream at the time of the snapshot
            water = sampler.velocities(slabs[snapshot], places[:, 0], places[:, 1], (-drift[0] * past)[None, :],
                                       (-drift[1] * past)[None, :])
        if settings.ambiguity_velocity is not None:
            water = wrap(water + rng.normal(0.0, settings.noise, water.shape), settings.ambiguity_velocity)
        total += water
    mean = total / moments.size
    if settings.ambiguity_velocity is None:
        mean = mean + rng.normal(0.0, settings.noise / np.sqrt(pings), mean.shape)
    return quantise(mean, settings.quantisation).reshape(places.shape[0], cells, 4)


def _advection(profiles: xr.Dataset, snapshot: int, z: np.ndarray, settings: InstrumentSettings) -> tuple[np.ndarray, np.ndarray]:
    """Velocity that carries the pattern at heights `z` [m s-1]: given, or the mean flow of the snapshot at each height."""
    if settings.advection is not None:
        return np.full(z.size, settings.advection[0]), np.full(z.size, settings.advection[1])
    levels = profiles["z"].values
    return (np.interp(z, levels, profiles["u"].values[snapshot]), np.interp(z, levels, profiles["v"].values[snapshot]))


def _series(recorded: np.ndarray, beams: Beams, centres: np.ndarray, places: np.ndarray, plan: TimePlan,
            settings: InstrumentSettings, pings: int) -> xr.Dataset:
    vectors = to_vectors(recorded, beams.directions)
    variables = {"u": vectors[..., 0], "v": vectors[..., 1], "w": vectors[..., 2],
                 "error_velocity": error_velocity(recorded, settings.beam_angle)}
    order = np.argsort(beams.depths)
    flag = np.where(beams.contaminated, 4, 1).astype(np.int8)
    flags = {}
    for name, values in variables.items():
        flags[name] = np.where(np.isfinite(values), np.broadcast_to(flag, values.shape), 9).astype(np.int8)[..., order]
    horizontal, vertical, error = noise_of_components(settings.noise, pings, settings.beam_angle)
    series = make_series(
        {name: values[..., order] for name, values in variables.items()}, centres, beams.depths[order], instrument=settings.name,
        flags=flags, averaging_interval=settings.averaging_interval, noise_standard_deviation=horizontal,
        provenance="virtual four-beam Doppler profiler in a large-eddy simulation",
    )
    for beam in range(4):
        series[f"beam_{beam + 1}"] = (("deployment", "time", "depth"), recorded[:, :, order, beam],
                                      {"units": "m s-1", "long_name": f"velocity along beam {beam + 1}, away from the head"})
    for name, value in (("u", horizontal), ("v", horizontal), ("w", vertical), ("error_velocity", error)):
        series.attrs[f"{name}_noise_standard_deviation"] = value
    series = series.assign_coords(
        deployment_x=("deployment", places[:, 0], {"units": "m", "long_name": "x of the head"}),
        deployment_y=("deployment", places[:, 1], {"units": "m", "long_name": "y of the head"}),
    )
    series.attrs.update({
        "kind": "virtual", "time_mode": plan.mode, "snapshot_correlation": plan.correlation, "turnover_time": plan.turnover,
        "pings_per_ensemble": pings, "settings": json.dumps(json.loads(settings.model_dump_json())),
        "beam_angle": settings.beam_angle, "head_depth": settings.depth,
    })
    return series
