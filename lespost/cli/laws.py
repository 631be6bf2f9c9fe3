"""`lespost laws TABLE`: tests velocity-scaling laws on a table. The work is in `lespost.scaling`."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import click


@click.command(name="laws")
@click.argument("tables", nargs=-1, required=True, type=click.Path(path_type=Path), metavar="TABLE...")
@click.option("--law", "laws", multiple=True, help='A law to test, such as "us0^0.5 ustar^0.5" or "ustar la_t^n" (n fitted); repeat for '
              "several. None: every built-in law whose columns are there.")
@click.option("--scale", "scales", multiple=True, help='A scale that a law might hide, as "name = 0.3 m s-1"; repeat for several.')
@click.option("--scaled-by", type=click.Choice(["ustar", "us0", "none"]), default="ustar", show_default=True,
              help="Column that divides both axes in the usual plot.")
@click.option("--plan", "plans", multiple=True, nargs=2, metavar="LAW LAW", help="Also say how long a record must be to separate these "
              "two, with forcing and scatter like those of the table.")
@click.option("--drop-nonpositive", is_flag=True, help="Leave out rows with zeros or negative values, which have no logarithm.")
@click.option("--seed", type=int, default=0, show_default=True, help="Seed of bootstrap and permutations.")
@click.option("--out", type=click.Path(path_type=Path, file_okay=False),
              help="Write scaling.csv, scaling.json and figures into this folder.")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object; unknown numbers are null.")
def command(tables: tuple[Path, ...], laws: tuple[str, ...], scales: tuple[str, ...], scaled_by: Any, plans: tuple[tuple[str, str], ...],
            drop_nonpositive: bool, seed: int, out: Path | None, as_json: bool) -> None:
    """Test laws such as V = C us0 on TABLE, and say which of them chance, or this table, cannot tell apart.

    TABLE is a comma-separated file with a velocity, its forcing and their units, such as "velocity (m s-1), ustar (m s-1), us0 (m s-1),
    time"; columns ending in _se are standard errors. Or give one or more results folders of `lespost run`: each window is a row.
    """
    from lespost.scaling.analyse import analyse
    from lespost.scaling.report import plain, to_json, to_text, write
    from lespost.scaling.request import ask_plan, load, settings_from

    settings = settings_from(laws, scales, scaled_by, drop_nonpositive, seed)
    analysis = analyse(load(tables), settings)
    asked = [ask_plan(analysis, first, second) for first, second in plans]
    if out is not None:
        out.mkdir(parents=True, exist_ok=True)
        write(analysis, out)
        from lespost.report.scaling_figures import write_figures

        write_figures(analysis, out / "figures")
    if as_json:
        click.echo(json.dumps(plain({**to_json(analysis), "asked": [item.plain for item in asked]}), allow_nan=False))
        return
    click.echo(to_text(analysis))
    for item in asked:
        click.echo(item.text)
    if out is not None:
        click.echo(f"written: {out / 'scaling.csv'}, {out / 'scaling.json'}, {out / 'figures'}")
