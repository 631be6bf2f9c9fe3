"""Records of a run against its virtual samples: read, compared, written as comparison.csv and comparison.tex."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping

import numpy as np
import pandas as pd
import xarray as xr

from lespost.findings import Decision
from lespost.pipeline.files import write_csv
from lespost.pipeline.plan import RunPlan


def compare_with_records(
    samples: Mapping[str, xr.Dataset], plan: RunPlan, say: Callable[[str], None]
) -> tuple[pd.DataFrame | None, tuple[Decision, ...]]:
    """(the comparison table, what was decided in reading the records); (None, ()) where the recipe names no record.

    Raises RecordError for records that cannot be used, DataError where they cannot be paired with the samples.
    """
    recipe = plan.loaded.recipe
    if not recipe.record:
        return None, ()
    from lespost.compare.latex import write_latex
    from lespost.compare.table import compare
    from lespost.records.read import read_record

    records, decisions = {}, []
    for settings in recipe.record:
        series = read_record(settings, plan.loaded.folder)
        records[settings.name] = series
        decisions += [Decision(**item) for item in json.loads(series.attrs.get("decisions", "[]"))]
        say(f"record {settings.name}: {series.sizes['time']} times x {series.sizes['depth']} depths")
    rng = np.random.default_rng(0)
    table = compare(samples, records, recipe.comparison, plan.windows, rng)
    write_csv(plan.out / "comparison.csv", table)
    write_latex(table, plan.out / "comparison.tex")
    return table, tuple(decisions)
