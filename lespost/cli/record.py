"""`lespost record FILE`: checks and describes a field record. The work is in `lespost.records.describe`."""

from __future__ import annotations

import json
from pathlib import Path

import click


@click.command(name="record")
@click.argument("file", type=click.Path(path_type=Path))
@click.option(
    "--kind",
    type=click.Choice(["auto", "netcdf", "csv"]),
    default="auto",
    show_default=True,
    help="Kind of file.",
)
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object.")
def command(file: Path, kind: str, as_json: bool) -> None:
    """Say what a field record holds, how much of it is good and what it can resolve.

    FILE is a netCDF file (CF, OceanSITES) or a text table.
    """
    from lespost.records.describe import describe
    from lespost.records.read import open_raw

    description = describe(open_raw(file, kind))
    if as_json:
        click.echo(json.dumps(description.to_dict(), allow_nan=False))
    else:
        click.echo(description.to_text())
