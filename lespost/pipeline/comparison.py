"""Records of a run against its virtual samples: read, compared, written as comparison.csv and comparison.tex."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping

import numpy as np
import pandas as pd
import xarray as xr

from lespost.errors import RecipeError
from lespost.findings import Decision
from lespost.pipeline.files import write_csv
from lespost.pipeline.plan import RunPlan


def compare_with_records(
    samples: Mapping[str, xr.Dataset], plan: RunPlan, say: Callable[[str], None]
) -> tuple[pd.DataFrame | None, tuple[Decision, ...]]:
    """(the comparison table, what was decided in reading the records); (None, ()) where the recipe names no record.

    Raises RecipeError if there are records but no instrument to hold against them.
    """
    recipe = plan.loaded.recipe
    if not recipe.record:
        return None, ()
    if not samples:
        raise RecipeError(f"recipe {plan.loaded.path.name}: there is a [[record]] but no [[instrument]]: describe the instrument "
                          "that made the record, so that the fields can be sampled as it would have.")
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
