"""`lespost waves FILE`: the Stokes drift of a wave spectrum. The work is in `lespost.forcing.spectrum`."""

from __future__ import annotations

import json
from pathlib import Path

import click


@click.command("waves")
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--depths", default="", help='Depths of a drift profile [m], such as "0,1,5".')
@click.option("--water-depth", help="Depth of the water [m]; default: deep for all waves.")
@click.option("--no-tail", is_flag=True, help="Leave out the f^-5 tail beyond the last frequency.")
@click.option("--time", type=int, help="Number of the spectrum to take, from 0; default: the mean over all times.")
@click.option("--x-axis-compass-bearing", "bearing", type=float,
              help="Compass bearing of +x [degree]; default 90, +x points east.")
@click.option("--gravity", default="9.81", show_default=True, help="Acceleration of gravity [m s-2].")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object.")
def command(file: Path, depths: str, water_depth: str | None, no_tail: bool, time: int | None, bearing: float | None,
            gravity: str, as_json: bool) -> None:
    """Surface Stokes drift, transport and depth scale of the wave spectrum in FILE.

    FILE is netCDF with CF standard names, a text table (frequency, density) or buoy text. Components u, v of a profile are along
    the simulation's +x and +y (east and north unless a bearing is given), or along the waves where the file has no directions.
    """
    from lespost.errors import RequestError
    from lespost.forcing.spectrum import stokes_drift, summary
    from lespost.forcing.spectrum_files import read_spectrum
    from lespost.units import parse_quantity

    try:
        levels = [parse_quantity(word.strip(), "m", "--depths") for word in depths.split(",") if word.strip()]
        bottom = None if water_depth is None else parse_quantity(water_depth, "m", "--water-depth")
        g = parse_quantity(gravity, "m s-2", "--gravity")
    except Exception as error:
        raise RequestError(str(error)) from None
    if not g > 0 or (bottom is not None and not bottom > 0):
        raise RequestError("--gravity and --water-depth must be positive; depths are counted downwards from the surface.")
    if any(level < 0 or (bottom is not None and level > bottom) for level in levels):
        raise RequestError(f"--depths {depths}: give depths between 0 and the bottom, counted downwards.")
    spectrum = read_spectrum(file, time, bearing)
    tail = not no_tail
    numbers = summary(spectrum, bottom, tail, g)
    u, v = stokes_drift([-level for level in levels], spectrum, bottom, tail, g)
    profile = [{"depth": level, "u": float(a), "v": float(b), "speed": float((a * a + b * b) ** 0.5)}
               for level, a, b in zip(levels, u, v, strict=True)]
    if as_json:
        names = ("us0", "transport", "decay_scale", "hs", "fp", "tail_fraction")
        found: dict[str, object] = {name: _known(getattr(numbers, name)) for name in names}
        click.echo(json.dumps({**found, "profile": profile} if levels else found, allow_nan=False))
        return
    share = f"{100 * numbers.tail_fraction:.1f} % of us0" if numbers.us0 > 0 else "nothing to share"
    rows = [("surface drift us0", numbers.us0, "m s-1", ""), ("direction", numbers.direction, "degree", "towards, from +x to +y"),
            ("transport", numbers.transport, "m2 s-1", ""), ("depth scale", numbers.decay_scale, "m", "transport / us0"),
            ("wave height Hs", numbers.hs, "m", "from the frequencies given"), ("peak frequency", numbers.fp, "Hz", ""),
            ("last frequency", float(spectrum.frequency[-1]), "Hz", f"f^-5 tail beyond it: {share}" if tail else "no tail added")]
    click.echo(spectrum.source)
    for name, value, unit, remark in rows:
        click.echo(f"{name:<18} {'-' if value != value else format(value, '.5g'):>12} {unit:<7} {remark}".rstrip())
    if levels:
        click.echo(f"{'depth [m]':>12} {'u [m s-1]':>12} {'v [m s-1]':>12} {'speed [m s-1]':>14}")
        for row in profile:
            click.echo(f"{row['depth']:>12.4g} {row['u']:>12.5g} {row['v']:>12.5g} {row['speed']:>14.5g}")


def _known(value: float) -> float | None:
    return None if value != value else value
