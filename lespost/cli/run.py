"""`lespost run RECIPE`: the main job."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import click


@click.command("run")
@click.argument("recipe", type=click.Path(path_type=Path))
@click.option("--out", type=click.Path(path_type=Path), help="Results folder (default: [run].output of the recipe).")
@click.option("--fresh", is_flag=True, help="Forget what an earlier run of this recipe left in the results folder.")
@click.option("--dry-run", is_flag=True, help="Say what would be read and computed, and stop.")
@click.option("--json", "as_json", is_flag=True, help="Print a summary as JSON on stdout.")
def command(recipe: Path, out: Path | None, fresh: bool, dry_run: bool, as_json: bool) -> None:
    """Turn RECIPE into profiles, regimes, samples, comparison tables, figures and a page.

    An interrupted run is resumed by the same command.
    """
    from lespost.pipeline.run import plan_recipe, run_recipe

    def say(line: str) -> None:
        click.echo(line, err=as_json)

    if dry_run:
        plan = plan_recipe(recipe, out)
        click.echo(json.dumps(plan.to_dict()) if as_json else plan.text())
        return
    outcome = run_recipe(recipe, out, fresh=fresh, say=say)
    if as_json:
        click.echo(json.dumps(_plain(outcome.summary())))
        return
    click.echo(outcome.text())


def _plain(value: Any) -> Any:
    """NaN as null: JSON has no word for what is not known but null."""
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, list):
        return [_plain(item) for item in value]
    if isinstance(value, float) and value != value:
        return None
    return value
