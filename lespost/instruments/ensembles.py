"""Ensembles of pings from snapshots: the forward operator applied at the times of the pings, averaged, with the instrument's noise.

Which snapshots, and how they are carried to other times, was decided in timing.py. One snapshot is held at a time (two means of it
where pings are interpolated in time).
"""

from __future__ import annotations

import numpy as np

from lespost.instruments.noise import PingNoise
from lespost.instruments.operator import Sampler, Streak
from lespost.instruments.timing import TimePlan

STILL = Streak()


def record_ensembles(
    sampler: Sampler, plan: TimePlan, time: np.ndarray, places: np.ndarray, carried: np.ndarray, averaging: float, noise: PingNoise,
    rng: np.random.Generator,
) -> np.ndarray:
    """Recorded ensemble means (deployments, ensembles, volumes) [m s-1].

    time: (snapshots,) of the fields [s]. places: (deployments, 2) [m]. carried: (snapshots, 2) velocity of a frozen pattern [m s-1].
    averaging: length of an ensemble [s], its pings equally spaced and centred.
    """
    if plan.mode == "interpolated":
        return _interpolated(sampler, plan, time, places, averaging, noise, rng)
    return _frozen(sampler, plan, time, places, carried, averaging, noise, rng)


def ping_times(centre: float, averaging: float, pings: int) -> np.ndarray:
    """(pings,) times of the pings of the ensemble about `centre` [s]."""
    return np.asarray(centre + averaging * ((np.arange(pings) + 0.5) / pings - 0.5))


def _frozen(
    sampler: Sampler, plan: TimePlan, time: np.ndarray, places: np.ndarray, carried: np.ndarray, averaging: float, noise: PingNoise,
    rng: np.random.Generator,
) -> np.ndarray:
    """The pattern that is now at the instrument was upstream, by velocity times age, when the snapshot was taken."""
    out = np.empty((places.shape[0], plan.centres.size, sampler.volumes.count))
    for snapshot in np.unique(plan.snapshot):
        slab = sampler.read(int(snapshot))
        u, v = carried[snapshot]
        for ensemble in np.flatnonzero(plan.snapshot == snapshot):
            if noise.ambiguity is None:
                age = plan.centres[ensemble] - time[snapshot]
                streak = Streak(-u * averaging, -v * averaging, noise.pings)
                water = sampler.velocities(slab, places[:, 0] - u * age, places[:, 1] - v * age, streak)
                out[:, ensemble] = noise.of_mean(water, rng)
            else:  # wrapping acts on single pings
                ages = ping_times(plan.centres[ensemble], averaging, noise.pings) - time[snapshot]
                x = (places[:, 0] - u * ages[:, None]).ravel()
                y = (places[:, 1] - v * ages[:, None]).ravel()
                water = sampler.velocities(slab, x, y, STILL)
                out[:, ensemble] = noise.of_pings(water.reshape(noise.pings, places.shape[0], -1), rng)
    return out


def _interpolated(
    sampler: Sampler, plan: TimePlan, time: np.ndarray, places: np.ndarray, averaging: float, noise: PingNoise, rng: np.random.Generator
) -> np.ndarray:
    """Every ping is linear between the snapshots around it, so an ensemble mean is a weighted mean of snapshots, exactly."""
    first, last = int(plan.snapshot.min()), int(plan.snapshot.max()) + 1
    water = np.stack([sampler.velocities(sampler.read(index), places[:, 0], places[:, 1], STILL) for index in range(first, last + 1)])
    held = time[first:last + 1]
    out = np.empty((places.shape[0], plan.centres.size, sampler.volumes.count))
    for ensemble, centre in enumerate(plan.centres):
        moments = ping_times(centre, averaging, noise.pings)
        weights = _linear_weights(moments, held)
        if noise.ambiguity is None:
            out[:, ensemble] = noise.of_mean(np.tensordot(weights.mean(axis=0), water, 1), rng)
        else:
            out[:, ensemble] = noise.of_pings(np.tensordot(weights, water, 1), rng)
    return out


def _linear_weights(moments: np.ndarray, time: np.ndarray) -> np.ndarray:
    """(moments, snapshots) weights of linear interpolation; the ends hold."""
    upper = np.clip(np.searchsorted(time, moments), 1, time.size - 1)
    share = np.clip((moments - time[upper - 1]) / (time[upper] - time[upper - 1]), 0.0, 1.0)
    weights = np.zeros((moments.size, time.size))
    rows = np.arange(moments.size)
    weights[rows, upper - 1] = 1.0 - share
    weights[rows, upper] += share
    return weights
