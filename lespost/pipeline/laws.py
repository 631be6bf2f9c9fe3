"""[scaling] of a recipe: velocity laws on the windows of this run and of others, as scaling.csv with its figures."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from lespost.errors import LespostError
from lespost.findings import Finding
from lespost.pipeline.plan import RunPlan


def laws_of_the_runs(plan: RunPlan, say: Callable[[str], None]) -> list[Finding]:
    """Writes scaling.csv, scaling.json and figures/laws*; regime.csv and windows.nc of this run must stand already.

    A table that cannot carry a law (too few windows, no range in the forcing) is a finding with its reason: the rest of the run
    does not depend on it. Returns the findings.
    """
    settings = plan.loaded.recipe.scaling
    if settings is None:
        return []
    from lespost.report.scaling_figures import write_figures
    from lespost.scaling.analyse import analyse
    from lespost.scaling.from_results import table_from_results
    from lespost.scaling.report import statement, write

    folders = [plan.out, *(plan.loaded.folder / name for name in settings.results)]
    try:
        analysis = analyse(table_from_results(folders), settings, np.random.default_rng(settings.seed))
    except LespostError as error:
        message = f"[scaling]: no law could be tested: {error}"
        say(f"warning: {message}")
        return [Finding("scaling-not-possible", "warning", message)]
    write(analysis, plan.out)
    write_figures(analysis, plan.out / "figures")
    for line in statement(analysis):
        if line.startswith("With "):  # which laws cannot be separated; the rest stands in the files
            say(f"laws: {line}")
    return []
