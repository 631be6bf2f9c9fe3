"""`python -m toy_fields`: makes solver runs, closed-form flows, random fields and the invented record.

Thin: parses, calls, prints. Errors are one paragraph on stderr with the exit code of their class.
"""

from __future__ import annotations

import shlex
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import click

from lespost.errors import LespostError

DATA = "toy_fields/data"


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
def cli() -> None:
    """Make fields whose truth is known.

    \b
    solve        a small wave-averaged large-eddy run: langmuir, shear or convective, or your own forcing
    closed-form  a flow in closed form: roll, cellular, lines, abc, rotation, strain, shear
    random       random fields of prescribed variances, spacing, axis and memory
    record       an invented field record (OceanSITES/CF) from another realisation of a run
    checksums    write or check the checksums of the shipped data
    """


def _option_text(value: Any) -> str:
    return shlex.quote(str(value))


def command_line(context: click.Context) -> str:
    """The command that makes the same file again: the arguments given, without those that do not shape the result."""
    words = ["python -m toy_fields", context.info_name or ""]
    for parameter in context.command.params:
        name = str(parameter.name)
        if name in ("threads", "replace"):
            continue
        source = context.get_parameter_source(name)
        value = context.params.get(name)
        if source is None or source.name == "DEFAULT" or value is None:
            continue
        if isinstance(parameter, click.Argument):
            words.insert(2, _option_text(value))
        elif getattr(parameter, "is_flag", False):
            words.append(parameter.opts[0])
        elif parameter.multiple:
            words += [f"{parameter.opts[0]} {_option_text(one)}" for one in value]
        else:
            words.append(f"{parameter.opts[0]} {_option_text(value)}")
    return " ".join(words)


def _ramp(text: str | None, option: str) -> Any:
    """A number, or "time:value, time:value" with times in seconds."""
    from toy_fields.errors import ToyRequestError
    from toy_fields.solver.forcing import Ramp

    if text is None:
        return None
    try:
        if ":" not in text:
            return Ramp.constant(float(text))
        pairs = [part.split(":") for part in text.split(",")]
        return Ramp(tuple(float(t) for t, _ in pairs), tuple(float(v) for _, v in pairs))
    except ValueError:
        raise ToyRequestError(
            f'{option} "{text}": write one number, or times in seconds with values, for example "0:0.002,7200:0.008".'
        ) from None


def _numbers(text: str, option: str) -> tuple[float, ...]:
    """Times in seconds from a text with commas."""
    from toy_fields.errors import ToyRequestError

    try:
        return tuple(float(part) for part in text.split(","))
    except ValueError:
        raise ToyRequestError(f'{option} "{text}": write seconds with commas, for example "3600,4200".') from None


_FORCING_OPTIONS = (
    ("--friction-velocity", "friction velocity [m s-1]"),
    ("--stress-direction", "direction the stress points to [degree counter-clockwise from +x]"),
    ("--surface-stokes-drift", "Stokes drift at the surface [m s-1]"),
    ("--stokes-direction", "direction the waves go to [degree counter-clockwise from +x]"),
    ("--surface-heat-flux", "heat flux into the ocean [W m-2], negative cools"),
)


def _forcing_options(function: Callable[..., None]) -> Callable[..., None]:
    for option, text in reversed(_FORCING_OPTIONS):
        function = click.option(option, metavar="VALUE|T:V,T:V", help=f"{text}; may ramp")(function)
    return function


@cli.command()
@click.argument("case", type=click.Choice(["langmuir", "shear", "convective"]))
@click.option("--out", type=click.Path(path_type=Path), required=True, help="the zarr store to write")
@click.option("--seed", type=int, help="seed of the random start")
@click.option("--nx", type=int, help="points along x (even)")
@click.option("--ny", type=int, help="points along y (even)")
@click.option("--nz", type=int, help="levels")
@click.option("--length-x", type=float, help="length of the box along x [m]")
@click.option("--length-y", type=float, help="length of the box along y [m]")
@click.option("--depth", type=float, help="depth of the box [m]")
@_forcing_options
@click.option("--stokes-wavenumber", type=float, help="wavenumber of the waves [rad m-1]")
@click.option("--coriolis-parameter", type=float, help="[s-1]")
@click.option("--mixed-layer-depth", type=float, help="at the start [m]")
@click.option("--temperature-gradient", type=float, help="below the mixed layer [K m-1]")
@click.option("--tracer-depth", type=float, help="adds a passive tracer that starts as 1 above this depth [m]")
@click.option("--time-step", type=float, help="a fixed time step [s]; chosen as the run goes when left out")
@click.option("--output-times", metavar="T,T,...", help="times of the snapshots [s]")
@click.option("--threads", type=click.IntRange(1), default=2, show_default=True)
@click.option("--replace", is_flag=True, help="write over an existing store")
@click.pass_context
def solve(context: click.Context, case: str, out: Path, threads: int, replace: bool, **options: Any) -> None:
    """Runs the small solver for CASE, with any of its settings changed, and writes a zarr store.

    A source of fields, not a research code: see the first lines of toy_fields/solver/__init__.py for what a coarse grid
    misses. The same command gives the same bytes on the same machine, whatever the number of threads.
    """
    from toy_fields import cases
    from toy_fields.progress import progress
    from toy_fields.solver.output import dataset
    from toy_fields.solver.run import run
    from toy_fields.store import check_target, write_store

    check_target(out, replace)
    for option, _ in _FORCING_OPTIONS:
        name = option.removeprefix("--").replace("-", "_")
        options[name] = _ramp(options[name], option)
    if options["output_times"] is not None:
        options["output_times"] = _numbers(options["output_times"], "--output-times")
    chosen = cases.changed(cases.case(case), {key: value for key, value in options.items() if value is not None})
    with progress(case, chosen.output_times[-1]) as report:
        snapshots = list(run(chosen, threads, report))
    fields = dataset(chosen, snapshots).assign_attrs(command=command_line(context))
    write_store(fields, out, replace)
    click.echo(f"{out}: {len(snapshots)} snapshots of {chosen.grid.nx} × {chosen.grid.ny} × {chosen.grid.nz}")


def _grid_options(function: Callable[..., None]) -> Callable[..., None]:
    for option, kind, default, text in reversed(
        (
            ("--nx", int, 64, "points along x (even)"), ("--ny", int, 64, "points along y (even)"),
            ("--nz", int, 32, "levels"), ("--length-x", float, 200.0, "length of the box along x [m]"),
            ("--length-y", float, 200.0, "length of the box along y [m]"), ("--depth", float, 50.0, "depth of the box [m]"),
        )
    ):
        function = click.option(option, type=kind, default=default, show_default=True, help=text)(function)
    return function


_ARRANGEMENT = click.option(
    "--arrangement", type=click.Choice(["collocated", "staggered", "spectral"]), default="spectral", show_default=True
)
_TIMES = click.option("--times", default="0", show_default=True, metavar="T,T,...", help="times of the snapshots [s]")


@cli.command("closed-form")
@click.argument("flow", type=click.Choice(["roll", "cellular", "lines", "abc", "rotation", "strain", "shear"]))
@click.option("--out", type=click.Path(path_type=Path), required=True, help="a .zarr store or .nc file to write")
@_grid_options
@_ARRANGEMENT
@_TIMES
@click.option(
    "--set", "settings", multiple=True, metavar="NAME=VALUE", help="a parameter of the flow, e.g. --set jet=0.03; may repeat"
)
@click.option("--continuum", is_flag=True, help="amplitudes of the continuum, not those free of divergence on the grid")
@click.option("--replace", is_flag=True, help="write over an existing file")
@click.pass_context
def closed_form(
    context: click.Context, flow: str, out: Path, arrangement: str, times: str, settings: tuple[str, ...], continuum: bool,
    replace: bool, **sizes: Any,
) -> None:
    """Writes a flow whose statistics are formulas, in double precision."""
    from toy_fields.closed_form.make import make_flow
    from toy_fields.solver.grid import Grid
    from toy_fields.store import write_plain

    grid = Grid(**sizes)
    fields = make_flow(flow, grid, arrangement, _numbers(times, "--times"), settings, continuum)
    write_plain(fields.assign_attrs(command=command_line(context)), out, replace)
    click.echo(f"{out}: {flow}, {arrangement}")


@cli.command()
@click.option("--out", type=click.Path(path_type=Path), required=True, help="a .zarr store or .nc file to write")
@_grid_options
@_ARRANGEMENT
@_TIMES
@click.option("--variance-along", type=float, default=3e-5, show_default=True, help="along the axis [m2 s-2]")
@click.option("--variance-across", type=float, default=6e-5, show_default=True, help="across the axis [m2 s-2]")
@click.option("--variance-vertical", type=float, default=5e-5, show_default=True, help="[m2 s-2]")
@click.option("--spacing", type=float, default=50.0, show_default=True, help="between convergence lines [m]")
@click.option("--axis", type=float, default=0.0, show_default=True, help="direction of the streaks [degree from +x]")
@click.option("--slope", type=float, default=-5 / 3, show_default=True, help="of the spectrum beyond its peak")
@click.option("--alignment", type=float, default=2.0, show_default=True, help="0: cells without direction")
@click.option("--integral-time", type=float, default=600.0, show_default=True, help="[s]")
@click.option("--tracer", type=float, default=0.0, show_default=True, help="log-deviation of a streak tracer; 0: none")
@click.option("--seed", type=int, default=1, show_default=True)
@click.option("--replace", is_flag=True, help="write over an existing file")
@click.pass_context
def random(
    context: click.Context, out: Path, arrangement: str, times: str, replace: bool, nx: int, ny: int, nz: int,
    length_x: float, length_y: float, depth: float, **plan: Any,
) -> None:
    """Writes random solenoidal fields of prescribed statistics; exact variances in every snapshot."""
    from toy_fields.closed_form.layout import check_arrangement
    from toy_fields.random_fields import RandomField, RandomPlan
    from toy_fields.solver.grid import Grid
    from toy_fields.store import write_plain

    grid = Grid(nx, ny, nz, length_x, length_y, depth)
    field = RandomField(RandomPlan(grid, arrangement=check_arrangement(arrangement), **plan))
    fields = field.snapshots(_numbers(times, "--times"), "float32")
    write_plain(fields.assign_attrs(command=command_line(context)), out, replace)
    click.echo(f"{out}: random fields, {arrangement}")


@cli.command()
@click.argument("case", type=click.Choice(["langmuir", "shear", "convective"]))
@click.option("--out", type=click.Path(path_type=Path), required=True, help="the netCDF file to write")
@click.option("--seed", type=int, required=True, help="seed of the run; not that of the shipped store")
@click.option("--begin", type=float, default=16200.0, show_default=True, help="start of the record [s of the run]")
@click.option("--end", type=float, default=30600.0, show_default=True, help="end of the record [s of the run]")
@click.option("--head-depth", type=float, default=25.0, show_default=True, help="depth of the profiler [m]")
@click.option("--beam-noise", type=float, default=0.0015, show_default=True, help="of one beam, one minute [m s-1]")
@click.option("--noise-seed", type=int, default=71, show_default=True, help="seed of noise and spikes")
@click.option("--threads", type=click.IntRange(1), default=2, show_default=True)
@click.option("--replace", is_flag=True, help="write over an existing file")
@click.pass_context
def record(
    context: click.Context, case: str, out: Path, seed: int, begin: float, end: float, head_depth: float,
    beam_noise: float, noise_seed: int, threads: int, replace: bool,
) -> None:
    """Writes an INVENTED field record: a moored profiler in an independent realisation of CASE.

    OceanSITES/CF file with noise, side-lobe contamination, spikes and a gap, all flagged.
    """
    import math

    from lespost.constants import EARTH_ROTATION
    from toy_fields import cases
    from toy_fields.errors import ToyRequestError
    from toy_fields.profiler import Profiler
    from toy_fields.progress import progress
    from toy_fields.record import RecordPlan, blemish, sample_run, write_record
    from toy_fields.store import check_target

    check_target(out, replace)
    original = cases.case(case)
    if seed == original.initial.seed:
        raise ToyRequestError(f"--seed {seed} is the seed of the shipped {case} store: a record needs another one.")
    chosen = cases.changed(original, {"seed": seed})
    profiler = Profiler(head_depth=head_depth)
    plan = RecordPlan(begin=begin, end=end, beam_noise=beam_noise, seed=noise_seed)
    with progress(f"record in {case}", plan.end) as report:
        clean = sample_run(chosen, profiler, plan, threads, report)
    latitude = math.degrees(math.asin(chosen.forcing.coriolis_parameter / (2 * EARTH_ROTATION)))
    write_record(blemish(clean, profiler, plan), chosen, profiler, plan, out, command_line(context), latitude)
    click.echo(f"{out}: {len(clean.times)} ensembles of {len(profiler.depths)} cells, invented")


@cli.command()
@click.option("--write", is_flag=True, help="write checksums.txt anew instead of checking it")
@click.option("--data", type=click.Path(path_type=Path, exists=True), default=DATA, show_default=True)
def checksums(write: bool, data: Path) -> None:
    """Checks the shipped data against data/checksums.txt (the format of sha256sum)."""
    from toy_fields.errors import ToyRequestError
    from toy_fields.store import checksum_lines

    listing = data / "checksums.txt"
    names = [path.name for path in data.iterdir() if path.suffix in (".zarr", ".nc")]
    lines = checksum_lines(data, names)
    if write:
        listing.write_text("\n".join(lines) + "\n")
        click.echo(f"{listing}: {len(lines)} files")
        return
    stated = listing.read_text().splitlines()
    if lines != stated:
        wrong = sorted({line.split("  ", 1)[1] for line in set(lines) ^ set(stated)})
        raise ToyRequestError(
            f"{len(wrong)} of the shipped files differ from {listing}, the first is {wrong[0]}: restore them from the "
            "repository, or make them again with the command in their attributes."
        )
    click.echo(f"{len(lines)} files as stated")


def main() -> None:
    """Entry point: turns errors into one paragraph and an exit code."""
    try:
        cli(standalone_mode=False)
    except LespostError as error:
        click.echo(f"error: {error}", err=True)
        sys.exit(error.exit_code)
    except click.ClickException as error:
        error.show()
        sys.exit(2)
    except (click.Abort, KeyboardInterrupt):
        click.echo("interrupted", err=True)
        sys.exit(130)
