"""Bootstrap of correlated samples: in time by blocks (arch), over a few snapshots and tiles of a domain by hand.

The stationary bootstrap serves series; a simulation window of a handful of snapshots is resampled in both of its
directions instead.
"""

from __future__ import annotations

import numpy as np

from lespost.statistics.samples import finite_mean


def bootstrap_standard_error(values: np.ndarray, count: int, rng: np.random.Generator) -> np.ndarray:
    """Standard error of the mean along axis 0 of (time, column) by the stationary block bootstrap (Politis &
    Romano 1994), block length by Politis & White 2004 (with the correction of Patton, Politis & White 2009),
    both from `arch`.

    Columns of similar block length (to a factor of 2) share their resampled blocks: one matrix of how often
    each time is drawn gives the replicates of all of them by one product.
    """
    from arch.bootstrap import StationaryBootstrap, optimal_block_length

    times = values.shape[0]
    good = np.isfinite(values)
    filled = np.where(good, values, finite_mean(values, 0))
    out = np.full(values.shape[1], np.nan)
    spread = np.where(good.any(axis=0), filled.std(axis=0), 0.0)
    varying = np.flatnonzero(good.any(axis=0) & (spread > 0))
    out[np.flatnonzero(good.any(axis=0) & (spread == 0))] = 0.0
    lengths: dict[int, list[int]] = {}
    for column in varying:
        length = float(optimal_block_length(filled[:, column])["stationary"].iloc[0])
        length = min(max(length, 1.0), times / 3.0) if np.isfinite(length) else 1.0
        lengths.setdefault(int(np.ceil(np.log2(length))), []).append(int(column))
    for power, columns in sorted(lengths.items()):
        # the mean block length of the group: no shorter than any of its members, and no longer than a third
        # of the series
        draws = StationaryBootstrap(min(2.0**power, times / 3.0), np.arange(times), seed=rng)
        weights = np.empty((count, times))
        for i, (position, _) in enumerate(draws.bootstrap(count)):
            weights[i] = np.bincount(position[0], minlength=times)
        part = np.where(good[:, columns], values[:, columns], 0.0)
        with np.errstate(invalid="ignore", divide="ignore"):
            replicates = (weights @ part) / (weights @ good[:, columns].astype(np.float64))
        replicates = np.where(np.isfinite(replicates), replicates, finite_mean(values[:, columns], 0))
        out[columns] = replicates.std(axis=0, ddof=1)
    return out


def design_effect(tiles: np.ndarray) -> float:
    """How much neighbouring tiles repeat each other: variance of row (or column) means over that of independent tiles.

    tiles: (tile_y, tile_x) values of one statistic. At least 1. Long streaks along x make the tiles of a row alike: then the
    row means scatter as much as single tiles, and there are only as many independent samples as rows.
    """
    rows, columns = tiles.shape
    single = float(tiles.var(ddof=1)) if tiles.size > 1 else 0.0
    if not single > 0:
        return 1.0
    effects = [1.0]
    for axis, other in ((1, rows), (0, columns)):
        if other > 1 and tiles.shape[axis] > 1:
            effects.append(float(tiles.mean(axis=axis).var(ddof=1)) * tiles.shape[axis] / single)
    return float(min(max(effects), max(rows, columns)))


def resample_snapshots_and_tiles(values: np.ndarray, count: int, rng: np.random.Generator) -> np.ndarray:
    """Replicates of the mean of (snapshot, tile_y, tile_x, component) -> (count, component).

    Each replicate draws snapshots and, independently, tile positions (the same positions in every snapshot, so that a
    slow eddy counts once). Departures are widened by the square root of the `design_effect` of the components' sum, and for
    the small numbers drawn from (n / (n - 1)).
    """
    snapshots, rows, columns, components = values.shape
    flat = values.reshape(snapshots, rows * columns, components)
    tiles = rows * columns
    centre = flat.mean(axis=(0, 1))
    in_time = rng.multinomial(snapshots, np.full(snapshots, 1.0 / snapshots), size=count) / snapshots
    in_space = rng.multinomial(tiles, np.full(tiles, 1.0 / tiles), size=count) / tiles
    draws = np.einsum("rs,rt,stc->rc", in_time, in_space, flat, optimize=True)
    effect = design_effect(values.mean(axis=0).sum(axis=-1)) if tiles > 1 else 1.0
    small = tiles / (tiles - 1.0) if tiles > 1 else 1.0
    return np.asarray(centre + np.sqrt(effect * small) * (draws - centre))
