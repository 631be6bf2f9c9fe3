"""What the command line asks of `lespost.scaling`, in its terms: tables or results folders, settings, plans."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from lespost.errors import RequestError
from lespost.scaling.analyse import Analysis
from lespost.scaling.from_results import table_from_results
from lespost.scaling.laws import BUILT_IN, Law, parse_law, usable
from lespost.scaling.planner import Plan, plan, scatter_of
from lespost.scaling.report import plain_plan, plan_in_words
from lespost.scaling.settings import ScalingSettings
from lespost.scaling.table import ScaleTable, read_table


@dataclass(frozen=True)
class Asked:
    """A plan that was asked for, in words and for JSON."""

    plan: Plan
    text: str
    plain: dict[str, Any]


def load(paths: Sequence[Path]) -> ScaleTable:
    """The table of one file, or of results folders. Raises RequestError for a mixture or several files."""
    folders = [path for path in paths if path.is_dir()]
    if len(folders) == len(paths):
        return table_from_results(folders)
    if len(paths) > 1:
        raise RequestError("give one table, or results folders, not several tables: one analysis takes its rows from one table.")
    return read_table(paths[0])


def settings_from(laws: Sequence[str], scales: Sequence[str], scaled_by: Any, drop_nonpositive: bool, seed: int) -> ScalingSettings:
    """Settings of one call. Raises RequestError for values out of bounds."""
    try:
        return ScalingSettings(laws=tuple(laws), scales=tuple(scales), scaled_by=scaled_by, drop_nonpositive=drop_nonpositive, seed=seed)
    except ValidationError as error:
        first = error.errors()[0]
        raise RequestError(f"--{'-'.join(str(part) for part in first['loc']).replace('_', '-')}: {first['msg']}.") from None


def ask_plan(analysis: Analysis, first: str, second: str) -> Asked:
    """How long a record must be to separate two laws if `first` holds, with the forcing of the table and the scatter about the law
    that fits it best."""
    laws = [_law(text, analysis.table) for text in (first, second)]
    settings = analysis.settings
    fits = [item.fixed or item.free for item in analysis.tested]
    fit = min(fits, key=lambda fit: float(fit.residual.std()))
    scatter, duration = scatter_of(fit, analysis.table)
    found = plan(laws[0], laws[1], analysis.table, scatter, duration, settings.power, settings.confidence,
                 settings.exponents == "free", fit.neff)
    return Asked(found, plan_in_words(found), plain_plan(found))


def _law(text: str, table: ScaleTable) -> Law:
    law = BUILT_IN.get(text) or parse_law(text)
    if why := usable(law, table):
        raise RequestError(f'--plan: law "{law.name}" {why}, which the table does not have.')
    return law
