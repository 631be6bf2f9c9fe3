"""Virtual deployments: an instrument on the one forward operator, many times over, as a canonical series.

    settings -> instrument (its volumes) -> platforms and times -> forward operator, ensembles and noise -> series

A new kind of instrument is a module that states volumes and turns ensembles into a series (doppler_profiler.py shows how); it is
named in KINDS. Many deployments at once give the sampling distribution of what a real one records once.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping, Sequence
from typing import Any, Protocol

import numpy as np
import xarray as xr

from lespost.errors import DataError
from lespost.fields.geometry import domain_lengths, spacing
from lespost.instruments.doppler_profiler import DopplerProfiler
from lespost.instruments.ensembles import record_ensembles
from lespost.instruments.noise import PingNoise
from lespost.instruments.operator import Volumes, make_sampler
from lespost.instruments.platform import moored_positions
from lespost.instruments.response import interpolation_response
from lespost.instruments.settings import InstrumentSettings
from lespost.instruments.timing import TimePlan, plan_time


class PlacedInstrument(Protocol):
    """What every kind of instrument states."""

    @property
    def volumes(self) -> Volumes:
        """Its sampling volumes around the platform."""

    @property
    def noise(self) -> PingNoise:
        """What a ping adds."""

    @property
    def depths(self) -> np.ndarray:
        """Depths it samples [m]."""

    def series(self, recorded: np.ndarray, centres: np.ndarray) -> xr.Dataset:
        """The canonical series of ensemble means (deployments, ensembles, volumes)."""

    def response(self, wavelengths: np.ndarray, speed: float) -> dict[str, xr.DataArray]:
        """What it makes of waves, for the reader of its series."""


KINDS: Mapping[str, Callable[[InstrumentSettings, xr.Dataset], PlacedInstrument]] = {"doppler_profiler": DopplerProfiler.place}


def sample(
    fields: xr.Dataset, profiles: xr.Dataset, settings: InstrumentSettings, windows: Sequence[Any], rng: np.random.Generator
) -> xr.Dataset:
    """The series (deployment, time, depth) that the instrument would have recorded in the canonical dataset `fields`.

    u, v, w, error_velocity in m s-1 in the axes of the simulation, beam_1 to beam_4 positive away from the head; X_flag 4 where side
    lobes spoil a cell, 9 where it holds no number; attributes record every choice. profiles: of the same snapshots (their means carry a
    frozen pattern). windows: objects with start and end [s]; only snapshots from the first start to the last end are sampled.
    Raises DataError where the geometry or the mode of time cannot be honest (geometry.py, timing.py).
    """
    if not np.array_equal(profiles["time"].values, fields["time"].values):
        raise DataError(f'instrument "{settings.name}": the profiles are not those of the fields ({profiles.sizes["time"]} and '
                        f'{fields.sizes["time"]} snapshots, or other times); compute them from the same snapshots.')
    instrument = KINDS[settings.kind](settings, fields)
    sampler = make_sampler(fields, instrument.volumes, settings.interpolation)
    lengths = domain_lengths(fields)
    carried = advection_velocity(profiles, instrument.depths, settings)
    speed = float(np.hypot(carried[:, 0], carried[:, 1]).max())
    plan = plan_time(settings, fields, profiles, instrument.depths, speed, windows)
    places = moored_positions(settings, lengths, rng)
    recorded = record_ensembles(sampler, plan, np.asarray(fields["time"].values, np.float64), places, carried,
                                settings.averaging_interval, instrument.noise, rng)
    series = instrument.series(recorded, plan.centres)
    series["time"].attrs["time_origin"] = str(fields.attrs.get("time_origin") or "run")
    share = subgrid_share(profiles, series["depth"].values)
    if share is not None:
        series["subgrid_share"] = ("depth", share, {"units": "1", "long_name": "share of velocity variance below the grid"})
    wavelengths = reported_wavelengths(fields)
    for name, factor in instrument.response(wavelengths, speed).items():
        series[name] = factor
    series["response_interpolation"] = ("wavelength", np.sqrt(interpolation_response(
        wavelengths / max(spacing(fields)), settings.interpolation)), {"units": "1", "long_name": "factor of horizontal interpolation"})
    series = series.assign_coords(
        deployment_x=("deployment", places[:, 0] % lengths[0], {"units": "m", "long_name": "x of the head"}),
        deployment_y=("deployment", places[:, 1] % lengths[1], {"units": "m", "long_name": "y of the head"}),
    )
    series.attrs.update(_choices(settings, plan, carried))
    return series


def reported_wavelengths(fields: xr.Dataset) -> np.ndarray:
    """(16,) wavelengths [m] from four grid cells to the narrower side of the domain, evenly spaced in the logarithm."""
    return np.asarray(np.geomspace(4.0 * max(spacing(fields)), min(domain_lengths(fields)), 16))


def advection_velocity(profiles: xr.Dataset, depths: np.ndarray, settings: InstrumentSettings) -> np.ndarray:
    """(snapshots, 2) velocity that carries a frozen pattern [m s-1]: the one given, or the mean flow over the depths of the cells.

    One velocity for all depths, because cells and eddies that span the layer move as a whole.
    """
    if settings.advection is not None:
        return np.tile(np.asarray(settings.advection, dtype=np.float64), (profiles.sizes["time"], 1))
    # as many points as levels and cells together: neither a thin layer nor a coarse grid is skipped
    heights = -np.linspace(float(np.min(depths)), float(np.max(depths)), profiles.sizes["z"] + depths.size)
    z = np.asarray(profiles["z"].values, dtype=np.float64)
    means = [[float(np.interp(heights, z, row).mean()) for row in np.asarray(profiles[name].transpose("time", "z").values, np.float64)]
             for name in ("u", "v")]
    return np.array(means).T


def subgrid_share(profiles: xr.Dataset, depths: np.ndarray) -> np.ndarray | None:
    """(depth,) share of velocity variance below the grid, time mean; None where the files do not state subgrid energy."""
    names = ("uu", "vv", "ww")
    if not all(f"{name}_sgs" in profiles for name in names):
        return None
    z = np.asarray(profiles["z"].values, dtype=np.float64)
    below = sum(profiles[f"{name}_sgs"].mean("time").values for name in names)
    above = sum(profiles[name].mean("time").values for name in names)
    return np.asarray(np.interp(-depths, z, below) / np.interp(-depths, z, np.asarray(below + above)))


def _choices(settings: InstrumentSettings, plan: TimePlan, carried: np.ndarray) -> dict[str, Any]:
    """Attributes that say how the series was made."""
    found = plan.decorrelation
    return {
        "kind": "virtual", "time_mode": plan.mode, "regular": int(plan.regular), "snapshot_interval": found.interval,
        "snapshot_correlation": found.fixed, "snapshot_correlation_moving": found.moving, "pattern_velocity_u": found.velocity[0],
        "pattern_velocity_v": found.velocity[1], "pattern_memory": plan.memory, "pattern_memory_evidence": plan.evidence,
        "snapshots_sampled": int(np.unique(plan.snapshot).size), "advection_u": float(carried[:, 0].mean()),
        "advection_v": float(carried[:, 1].mean()), "interpolation": settings.interpolation,
        "settings": json.dumps(settings.model_dump(mode="json"), sort_keys=True),
    }
