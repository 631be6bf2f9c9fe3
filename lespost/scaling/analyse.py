"""One table through every test: fits, by-chance twins, missing scales, rivals, and what record would separate them.

The parts are in `fit`, `self_correlation`, `dimensions`, `discrimination` and `planner`; `report` puts the result into rows and words.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lespost.errors import DataError, RequestError
from lespost.scaling.dimensions import Known, MissingScale, known_from_text, missing_scale
from lespost.scaling.discrimination import Discrimination, discriminate
from lespost.scaling.fit import Axes, LawFit, block_length, fit_law, law_axes
from lespost.scaling.laws import BUILT_IN, Law, Powers, parse_law, require_positive, usable
from lespost.scaling.planner import Plan, plan, scatter_of
from lespost.scaling.self_correlation import Guard, guard, run_length
from lespost.scaling.settings import ScalingSettings
from lespost.scaling.table import ScaleTable

#: Exponents that people write; the nearest one inside the interval of a fit is tried as exact.
ROUND = (0.25, 1 / 3, 0.5, 2 / 3, 0.75, 4 / 3, 1.5, 2.0, 3.0)


@dataclass(frozen=True)
class Tested:
    """One law: its fits with the exponent fitted and held (None if it has no stated exponent), each pair of axes with its guard.

    scaled: fit and guard of the axes divided by a common column (None where the law is that column). missing: the hidden scale at
    the fitted exponent; missing_round: at the nearest round exponent `ROUND` within the interval.
    """

    law: Law
    free: LawFit
    fixed: LawFit | None
    axes: Axes
    guard: Guard
    scaled: LawFit | None
    scaled_axes: Axes | None
    scaled_guard: Guard | None
    missing: MissingScale | None
    missing_round: MissingScale | None


@dataclass(frozen=True)
class Analysis:
    """All laws of one table. fixed, free: how they compare with stated and with fitted exponents. plans: what would separate the best
    from its unseparated rivals, (with stated exponents, with fitted ones). remarks: laws and rows that were left out, and why."""

    table: ScaleTable
    settings: ScalingSettings
    tested: tuple[Tested, ...]
    fixed: Discrimination
    free: Discrimination
    plans_fixed: tuple[Plan, ...]
    plans_free: tuple[Plan, ...]
    remarks: tuple[str, ...]


def choose_laws(table: ScaleTable, settings: ScalingSettings) -> tuple[list[Law], list[str]]:
    """Laws to test and remarks on built-in ones left out. Raises RequestError if a law that was asked for cannot be tested."""
    if settings.laws:
        laws = [parse_law(text) for text in dict.fromkeys(settings.laws)]
        for law in laws:
            if why := usable(law, table):
                raise RequestError(f'law "{law.name}" {why}, which the table does not have; add the column or leave the law out.')
        return laws, []
    laws, remarks = [], []
    for law in BUILT_IN.values():
        why = usable(law, table)
        if not why and not settings.drop_nonpositive:
            # the buoyancy flux changes sign in any record with days and nights: that is no fault of the table
            bad = int((table.columns["b0"] <= 0).sum()) if "b0" in law.needs else 0
            why = f"has no meaning in {bad} rows with b0 of zero or below" if bad else ""
        if why:
            remarks.append(f'law "{law.name}" left out: it {why}')
        else:
            laws.append(law)
    if not laws:
        raise DataError("no built-in law can be tested: the table needs ustar or us0 beside the velocity.")
    return laws, remarks


def analyse(table: ScaleTable, settings: ScalingSettings, rng: np.random.Generator | None = None) -> Analysis:
    """Every test of `table`, reproducible by `settings.seed`. Raises DataError or RequestError where it cannot be done."""
    rng = rng or np.random.default_rng(settings.seed)
    laws, remarks = choose_laws(table, settings)
    by: Powers = {} if settings.scaled_by == "none" or settings.scaled_by not in table.columns else {settings.scaled_by: 1.0}
    names = tuple(dict.fromkeys([*(name for law in laws for name in law.needs), *by]))
    table = require_positive(table, names, settings.drop_nonpositive)
    if not np.ptp(np.log(table.columns["velocity"])) > 1e-9:
        raise DataError(f"the {table.velocity_name} is the same in all rows: there is nothing for a law to explain.")
    flat = [law for law in laws if not np.ptp(law.log_predictor(table)) > 1e-9]
    for law in flat:
        remarks.append(f'law "{law.name}" left out: its predictor is the same in all rows')
    laws = [law for law in laws if law not in flat]
    if not laws:
        raise DataError("the forcing is the same in all rows: no law can be tested; a range of forcing is needed.")
    known = tuple(known_from_text(text) for text in settings.scales)
    tested = tuple(_test(law, table, by, known, settings, rng) for law in laws)
    exact = [item.law.name for item in tested if float(np.std(item.free.residual)) < 1e-7]
    if exact:
        raise DataError(f"law {exact[0]} gives the {table.velocity_name} without any scatter: the velocity was computed from its own "
                        "predictors, so the table cannot test a law.")
    held = [item.fixed or item.free for item in tested]
    free = [item.free for item in tested if item.law.curve is None]
    by_stated = discriminate(held, table, settings.bootstrap_samples, settings.confidence, rng)
    by_fitted = discriminate(free or held, table, settings.bootstrap_samples, settings.confidence, rng)
    return Analysis(table, settings, tested, by_stated, by_fitted, _plans(by_stated, held, table, settings, False),
                    _plans(by_fitted, free or held, table, settings, True), tuple(dict.fromkeys([*remarks, *table.left_out])))


def _test(law: Law, table: ScaleTable, by: Powers, known: tuple[Known, ...], settings: ScalingSettings, rng: np.random.Generator) -> Tested:
    count, level = settings.bootstrap_samples, settings.confidence
    free = fit_law(law, table, count, level, rng)
    fixed = None if law.free else fit_law(law, table, count, level, rng, fixed=True)
    axes = law_axes(law, table)
    run = run_length(max(free.block, block_length(np.log(table.columns["velocity"]), table.time is not None)))
    own = guard(axes.x, axes.y, axes.x_powers, axes.y_powers, table, run, settings.permutations, level, rng)
    scaled = scaled_axes = scaled_guard = None
    # a law whose velocity is already divided by something has its scaled axes built in
    if by and not law.free:
        candidate = law_axes(law, table, by)
        if np.ptp(candidate.x) > 1e-9:
            scaled_axes = candidate
            scaled = fit_law(law, table, count, level, rng, scaled_by=by)
            scaled_guard = guard(candidate.x, candidate.y, candidate.x_powers, candidate.y_powers, table, run,
                                 settings.permutations, level, rng)
    missing = missing_scale(free, table, level, known) if law.curve is None else None
    rounded = None
    if missing is not None:
        inside = [n for n in ROUND if free.slope.low <= n <= free.slope.high]
        if inside:
            nearest = min(inside, key=lambda n: abs(n - free.slope.value))
            rounded = missing_scale(free, table, level, known, nearest)
    return Tested(law, free, fixed, axes, own, scaled, scaled_axes, scaled_guard, missing, rounded)


def _plans(result: Discrimination, fits: list[LawFit], table: ScaleTable, settings: ScalingSettings, free: bool) -> tuple[Plan, ...]:
    by_name = {fit.law.name: fit for fit in fits}
    best = by_name[result.standings[0].name]
    scatter, duration = scatter_of(best, table)
    return tuple(
        plan(best.law, by_name[name].law, table, scatter, duration, settings.power, settings.confidence, free, best.neff,
             best.slope.value)
        for name in result.inseparable if name != best.law.name
    )
