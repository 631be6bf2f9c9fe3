"""The main job: plan, one pass through the engine, windows and regimes, samples, comparison, page.

The one pass is the costly part and is journalled block by block; what follows is made anew each time from its results, and
each file of the results folder appears whole or not at all. run.json comes last but for the figures and the page: a folder
without it is not complete.
"""

from __future__ import annotations

import json
import time as clock
from collections.abc import Callable, Sequence
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from lespost import __version__
from lespost.engine.journal import Journal
from lespost.engine.progress import progress_for
from lespost.engine.run import Summary, run_tasks
from lespost.engine.tasks import Task
from lespost.findings import Decision, Finding
from lespost.forcing.resolve import mean_direction, resolve_forcing
from lespost.pipeline.comparison import compare_with_records
from lespost.pipeline.files import plain, write_csv, write_json, write_netcdf, write_zarr
from lespost.pipeline.laws import laws_of_the_runs
from lespost.pipeline.outcome import Outcome
from lespost.pipeline.plan import RunPlan, make_plan
from lespost.pipeline.samples import take_samples
from lespost.pipeline.views import plan_views
from lespost.profiles.blocks import BlockPlan, SlabReader, snapshot_block
from lespost.profiles.checks import check_profiles
from lespost.profiles.closure import Declared
from lespost.profiles.one_pass import assemble, block_statistics
from lespost.profiles.production import add_production, close_surface
from lespost.profiles.settings import IntervalSettings
from lespost.profiles.windows import average_windows
from lespost.regime.anisotropy import anisotropy_profiles
from lespost.regime.classify import classify
from lespost.versions import stack_versions

Say = Callable[[str], None]

#: Files of an earlier run that this one may not make: taken away first, so that none is mistaken for its result.
DERIVED = ("run.json", "report.html", "comparison.csv", "comparison.tex", "scaling.csv", "scaling.json", "plan_views.nc")


def plan_recipe(recipe: Path, out: Path | None = None) -> RunPlan:
    """The plan of a recipe, for --dry-run."""
    return make_plan(recipe, out)


def run_recipe(recipe: Path, out: Path | None = None, *, fresh: bool = False, say: Say = print) -> Outcome:
    """Runs the recipe and writes its results folder; `say` receives progress in words.

    fresh: forget the journal of an earlier run. Raises LespostError of the kind that fits (see lespost.errors); what the
    one pass has done by then is kept.
    """
    started = clock.time()
    plan = make_plan(recipe, out)
    _tell(plan, say)
    timings: dict[str, float] = {}
    with Journal(plan.out / "journal", _identity(plan), fresh=fresh) as journal:
        say(journal.opened)
        for name in DERIVED:
            (plan.out / name).unlink(missing_ok=True)
        profiles, summary = _one_pass(plan, journal, started)
        timings["one pass"] = summary.seconds
        return _products(plan, profiles, summary, timings, say)


def _tell(plan: RunPlan, say: Say) -> None:
    sizes = plan.opened.dataset.sizes
    say(f"fields: {sizes['time']} snapshots of {plan.layout.nx} x {plan.layout.ny} x {plan.layout.nz}, "
        f"{', '.join(plan.layout.names)}")
    for decision in plan.decisions:
        if decision.how == "detected":
            say(f"detected: {decision.subject}: {decision.choice} ({decision.evidence})")
    for finding in plan.opened.findings:
        if finding.severity != "note":
            say(f"{finding.severity}: {finding.message}")


def _identity(plan: RunPlan) -> dict[str, Any]:
    """What the results of the one pass depend on; memory and threads do not change them."""
    recipe = plan.loaded.recipe
    return {
        "version": __version__, "input": plan.opened.fingerprint,
        "fields": json.loads(recipe.fields.model_dump_json()), "profiles": json.loads(plan.profiles.model_dump_json()),
    }


def _one_pass(plan: RunPlan, journal: Journal, started: float) -> tuple[xr.Dataset, Summary]:
    fields = plan.opened.dataset
    readers: dict[int, SlabReader] = {}

    def read(block: BlockPlan) -> Any:
        # One reader a snapshot: its blocks come in order in one thread and hand their halo on.
        reader = readers.setdefault(block.time_index, SlabReader(fields, plan.layout, block.time_index))
        found = snapshot_block(fields, block.time_index, block.z0, block.z1, plan.profiles, plan.layout, reader)
        if block.z1 == plan.layout.nz:
            readers.pop(block.time_index, None)
        return found

    tasks = [Task(block.key, block.label, partial(read, block), block_statistics, block.memory, block.bytes, block.group)
             for block in plan.blocks]
    compute = plan.loaded.recipe.compute
    summary = run_tasks(tasks, journal, compute, progress_for(compute.progress), started)
    return assemble(fields, (journal.get(task.key) for task in tasks), plan.profiles), summary


def _products(plan: RunPlan, profiles: xr.Dataset, summary: Summary, timings: dict[str, float], say: Say) -> Outcome:
    recipe, fields, out = plan.loaded.recipe, plan.opened.dataset, plan.out
    begun = clock.perf_counter()
    forcing = resolve_forcing(recipe.forcing, recipe.stokes, plan.opened.hints, profiles["time"].values, profiles["z"].values,
                              profiles["z_face"].values, plan.loaded.folder)
    profiles = add_production(close_surface(profiles, forcing), forcing)
    windows = average_windows(profiles, plan.windows)
    regime = classify(profiles, forcing, plan.windows, recipe.regime)
    depths = {window.name: _first(regime, window.name, "h") for window in plan.windows}
    findings = (*plan.opened.findings, *_findings(profiles, forcing, plan, depths))
    write_zarr(out / "profiles.zarr", profiles)
    whole = [windows, anisotropy_profiles(windows), _window_forcing(forcing, plan)]
    write_netcdf(out / "windows.nc", xr.merge(whole, join="exact", combine_attrs="override"))
    write_csv(out / "regime.csv", regime)
    views = plan_views(fields, plan.windows, depths)
    if views is not None:
        write_netcdf(out / "plan_views.nc", views)
    timings["windows and regimes"] = clock.perf_counter() - begun

    begun = clock.perf_counter()
    samples, cautions = take_samples(fields, profiles, plan, say)
    if samples:
        timings["virtual instruments"] = clock.perf_counter() - begun
    begun = clock.perf_counter()
    comparison, decisions = compare_with_records(samples, plan, say)
    if comparison is not None:
        timings["comparison"] = clock.perf_counter() - begun

    findings = (*findings, *laws_of_the_runs(plan, say))
    decisions = (*plan.decisions, *(Decision(**item) for item in json.loads(forcing.attrs["decisions"])), *decisions)
    write_json(out / "run.json", _account(plan, regime, forcing, decisions, findings, summary, timings, cautions))
    begun = clock.perf_counter()
    from lespost.report.build import build_report

    page = build_report(out)
    timings["figures and page"] = clock.perf_counter() - begun
    tasks = {"total": len(plan.blocks), "reused": summary.reused, "computed": summary.computed}
    return Outcome(out, page, regime, comparison, findings, tasks, timings)


def _first(regime: pd.DataFrame, window: str, column: str) -> float:
    rows = regime.loc[regime["window"] == window, column]
    return float(rows.iloc[0]) if len(rows) else float("nan")


def _findings(profiles: xr.Dataset, forcing: xr.Dataset, plan: RunPlan, depths: dict[str, float]) -> list[Finding]:
    """Checks that need the profiles. The layer depth is the mean over the windows."""
    known = [depth for depth in depths.values() if np.isfinite(depth)]
    recipe = plan.loaded.recipe
    declared = Declared(
        friction_velocity=float(forcing["friction_velocity"].mean()),
        stress_direction=mean_direction(forcing["stress_direction"].values),
        surface_temperature_flux=float(forcing["surface_temperature_flux"].mean()),
        stokes_direction=mean_direction(forcing["stokes_direction"].values), us0=float(forcing["us0"].mean()),
        reference_density=float(forcing["reference_density"]), specific_heat=float(forcing["specific_heat"]),
        misaligned=recipe.stokes.direction is not None,
    )
    intervals = [IntervalSettings(name=window.name, start=window.start, end=window.end) for window in plan.windows]
    return check_profiles(profiles, declared, float(np.mean(known)) if known else float("nan"), intervals)


def _window_forcing(forcing: xr.Dataset, plan: RunPlan) -> xr.Dataset:
    """Forcing averaged over each window, so that windows.nc stands alone."""
    parts = []
    time = forcing["time"].values
    for window in plan.windows:
        members = forcing.isel(time=window.members(time))
        steady = [str(name) for name in members.data_vars if "time" in members[name].dims and members[name].ndim == 1]
        parts.append(members[steady].mean("time", keep_attrs=True))
    joined = xr.concat(parts, dim="window", coords="minimal", compat="override")
    return joined.assign_coords(window=("window", [window.name for window in plan.windows])).drop_attrs(deep=False)


def _account(
    plan: RunPlan, regime: pd.DataFrame, forcing: xr.Dataset, decisions: Sequence[Decision], findings: Sequence[Finding],
    summary: Summary, timings: dict[str, float], cautions: Sequence[str],
) -> dict[str, Any]:
    """The content of run.json."""
    recipe = plan.loaded.recipe
    directions = {}
    for window in plan.windows:
        rows = regime[regime["window"] == window.name]
        driving = forcing.isel(time=window.members(forcing["time"].values))
        cells = len(rows) > 0 and rows["axis_kind"].iloc[0] == "cell"
        directions[window.name] = {
            "wind": mean_direction(driving["stress_direction"].values), "waves": mean_direction(driving["stokes_direction"].values),
            "axis": float(rows["axis_deg"].iloc[0]) if cells else float("nan"),
        }
    return plain({
        "title": recipe.run.title or plan.loaded.path.stem.replace("_", " "),
        "recipe": json.loads(recipe.model_dump_json()), "recipe_path": str(plan.loaded.path), "recipe_text": plan.loaded.text,
        "versions": stack_versions(), "created": clock.strftime("%Y-%m-%dT%H:%M:%SZ", clock.gmtime()),
        "input": {"paths": json.loads(plan.opened.dataset.attrs.get("source_paths", "[]")), "fingerprint": plan.opened.fingerprint},
        "windows": [{"name": w.name, "start": w.start, "end": w.end} for w in plan.windows], "directions": directions,
        "decisions": [decision.to_dict() for decision in decisions], "findings": [finding.to_dict() for finding in findings],
        "tasks": {"total": len(plan.blocks), "reused": summary.reused, "computed": summary.computed},
        "timings": timings, "cautions": list(cautions),
    })
