"""`lespost inspect PATH...`: what the files hold, what was recognised and why, what is missing, and a recipe that runs."""

from __future__ import annotations

import json
from pathlib import Path

import click


@click.command("inspect")
@click.argument("paths", nargs=-1, required=True, type=str)
@click.option("--write", "recipe", type=click.Path(path_type=Path), help="Save the proposed recipe under this name.")
@click.option("--force", is_flag=True, help="Let --write replace an existing file.")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object.")
def command(paths: tuple[str, ...], recipe: Path | None, force: bool, as_json: bool) -> None:
    """Say what the fields at PATHS hold, how sure that is, and what is missing.

    PATHS: files, zarr stores, folders or patterns of one run. The proposed recipe says explicitly what was recognised; it
    runs as it is where nothing is missing.
    """
    from lespost.errors import RequestError
    from lespost.pipeline.inspection import inspect_paths

    if recipe is not None and recipe.exists() and not force:
        raise RequestError(f"{recipe} exists; give another name, or --force to replace it.")
    found = inspect_paths(paths, recipe.parent if recipe is not None else Path.cwd())
    if recipe is not None:
        from lespost.engine.atomic import replace_file

        with replace_file(recipe) as part:
            part.write_text(found.recipe, encoding="utf-8")
    if as_json:
        click.echo(json.dumps({**found.to_dict(), "written": str(recipe) if recipe else None}, allow_nan=False))
    else:
        click.echo(found.text(recipe))
