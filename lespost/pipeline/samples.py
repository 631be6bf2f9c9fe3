"""Virtual instruments of a run: each is sampled, written under samples/, and kept for the comparison."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import xarray as xr

from lespost.pipeline.plan import RunPlan


def take_samples(
    fields: xr.Dataset, profiles: xr.Dataset, plan: RunPlan, say: Callable[[str], None]
) -> tuple[dict[str, xr.Dataset], list[str]]:
    """(series by instrument name, cautions for the page). Files are written to samples/NAME.nc, each whole or not at all."""
    settings = plan.loaded.recipe.instrument
    if not settings:
        return {}, []
    from lespost.instruments.cautions import PLANNING_CAUTION
    from lespost.instruments.sample import sample
    from lespost.records.write import write_series

    samples = {}
    (plan.out / "samples").mkdir(exist_ok=True)
    for number, instrument in enumerate(settings):
        # Each instrument has a stream of its own, so that adding one leaves the others' numbers as they were.
        rng = np.random.default_rng([instrument.seed, number])
        series = sample(fields, profiles, instrument, plan.windows, rng)
        samples[instrument.name] = series
        write_series(series, plan.out / "samples" / f"{instrument.name}.nc",
                     {"title": f"Virtual instrument {instrument.name} in {plan.loaded.recipe.run.title or plan.loaded.path.stem}"})
        sizes = series.sizes
        say(f"instrument {instrument.name}: {sizes['deployment']} virtual deployments, {sizes['time']} times, {sizes['depth']} "
            f"depths; time {series.attrs['time_mode']} (snapshots correlate by {series.attrs['snapshot_correlation']:.2f})")
    return samples, [PLANNING_CAUTION]
