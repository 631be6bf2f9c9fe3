"""What a run will do: fields opened, windows resolved, blocks planned, and what that costs. Nothing is computed here."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np

from lespost.fields.open import OpenedFields, open_fields
from lespost.findings import Decision
from lespost.profiles.blocks import BlockPlan, plan_blocks
from lespost.profiles.layout import Layout, layout_of
from lespost.profiles.settings import ProfilesSettings
from lespost.profiles.windows import Window, resolve_windows
from lespost.recipe.load import LoadedRecipe, load_recipe


@dataclass(frozen=True, eq=False)
class RunPlan:
    """Everything that is known before the first block is read. out: the results folder."""

    loaded: LoadedRecipe
    out: Path
    opened: OpenedFields
    decisions: tuple[Decision, ...]
    windows: tuple[Window, ...]
    profiles: ProfilesSettings
    layout: Layout
    blocks: tuple[BlockPlan, ...] = field(repr=False)

    def to_dict(self) -> dict[str, Any]:
        """The plan as plain values for JSON."""
        memory = max(block.memory for block in self.blocks)
        compute = self.loaded.recipe.compute
        held = min(compute.memory, memory * (compute.thread_count + compute.readers))
        return {
            "out": str(self.out), "snapshots": int(self.opened.dataset.sizes["time"]),
            "grid": {"nx": self.layout.nx, "ny": self.layout.ny, "nz": self.layout.nz}, "blocks": len(self.blocks),
            "bytes": sum(block.bytes for block in self.blocks), "memory_of_a_block": memory, "memory_in_flight": held,
            "threads": compute.thread_count,
            "windows": [{"name": w.name, "start": w.start, "end": w.end,
                         "snapshots": int(w.members(self.opened.dataset["time"].values).size)} for w in self.windows],
            "instruments": [item.name for item in self.loaded.recipe.instrument],
            "records": [item.name for item in self.loaded.recipe.record],
        }

    def text(self) -> str:
        """The plan in lines for a reader."""
        d = self.to_dict()
        windows = "; ".join(f"{w['name']}: {w['start']:g} to {w['end']:g} s, {w['snapshots']} snapshots" for w in d["windows"])
        return "\n".join([
            f"results:     {d['out']}",
            f"fields:      {d['snapshots']} snapshots of {d['grid']['nx']} x {d['grid']['ny']} x {d['grid']['nz']}",
            f"blocks:      {d['blocks']}, {d['bytes'] / 1e6:.0f} MB of fields in memory terms",
            f"memory:      {d['memory_in_flight'] / 1e6:.0f} MB of blocks in flight on {d['threads']} computing threads",
            f"windows:     {windows}",
            f"instruments: {', '.join(d['instruments']) or 'none'}",
            f"records:     {', '.join(d['records']) or 'none'}",
            "nothing was computed (--dry-run)",
        ])


def results_folder(loaded: LoadedRecipe, out: Path | None) -> Path:
    """Where results go: --out, else [run].output beside the recipe, else the recipe's name with _out."""
    if out is not None:
        return out
    return loaded.folder / (loaded.recipe.run.output or f"{loaded.path.stem}_out")


def make_plan(recipe: Path, out: Path | None) -> RunPlan:
    """The plan of the recipe file `recipe`. Raises RecipeError, DataError, LayoutError as their names say."""
    loaded = load_recipe(recipe)
    opened = open_fields(loaded.recipe.fields, loaded.folder)
    profiles, decisions = _prandtl_number(loaded.recipe.profiles, opened)
    time = np.asarray(opened.dataset["time"].values, float)
    windows = resolve_windows(loaded.recipe.windows, time)
    layout = layout_of(opened.dataset, profiles.prandtl_number)
    blocks = plan_blocks(opened.dataset, profiles, loaded.recipe.compute.block_memory, layout=layout)
    return RunPlan(loaded, results_folder(loaded, out), opened, (*opened.decisions, *decisions), tuple(windows), profiles, layout,
                   tuple(blocks))


def _prandtl_number(settings: ProfilesSettings, opened: OpenedFields) -> tuple[ProfilesSettings, tuple[Decision, ...]]:
    """[profiles] with the subgrid Prandtl number that the files state, where the recipe leaves it out."""
    hint = opened.hints.get("prandtl_number")
    if settings.prandtl_number is not None or hint is None or "nu_sgs" not in opened.dataset:
        return settings, ()
    value = float(np.mean(hint.value))
    note = Decision("subgrid Prandtl number", f"{value:g}", "metadata", hint.evidence)
    return settings.model_copy(update={"prandtl_number": value}), (note,)


def with_folder(plan: RunPlan, out: Path) -> RunPlan:
    """The same plan for another results folder."""
    return replace(plan, out=out)
