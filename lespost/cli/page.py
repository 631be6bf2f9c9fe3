"""`lespost page OUT`: rebuild figures and page from a results folder."""

from __future__ import annotations

import json
from pathlib import Path

import click


@click.command("page")
@click.argument("out", type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="Print the paths written as JSON.")
def command(out: Path, as_json: bool) -> None:
    """Rebuild the figures and the page of the results folder OUT."""
    from lespost.report.build import build_report

    page = build_report(out)
    figures = sorted(str(path) for path in (out / "figures").iterdir() if path.suffix in (".svg", ".png"))
    if as_json:
        click.echo(json.dumps({"page": str(page), "figures": figures}))
    else:
        click.echo(f"{page}  ({len(figures)} figure files in {out / 'figures'})")
