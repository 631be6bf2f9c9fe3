"""`lespost scales`: the scales and dimensionless numbers of one forcing. The work is in `lespost.forcing.one_forcing`."""

from __future__ import annotations

import json
from typing import Any

import click

#: Units of the numbers printed, in their order.
UNITS = {
    "ustar": "m s-1", "b0": "m2 s-3", "wstar": "m s-1", "us0": "m s-1", "la_t": "1", "la_sl": "1", "la_proj": "1",
    "alpha_deg": "degree", "hoenikker": "1", "h_over_l_langmuir": "1", "obukhov": "m", "dissipation_shear": "1",
    "dissipation_langmuir": "1", "dissipation_convective": "1", "forcing_regime": "",
}


@click.command("scales")
@click.option("--ustar", "friction_velocity", help="Friction velocity in the water [m s-1].")
@click.option("--stress", help="Wind stress [N m-2], instead of --ustar.")
@click.option("--wind", "wind_speed", help="Neutral wind speed at 10 m [m s-1], instead of --ustar.")
@click.option("--bulk-formula", default="large_yeager_2009", show_default=True, help="Drag law for --wind.",
              type=click.Choice(["large_yeager_2009", "large_yeager_2004", "large_pond_1981", "coare_3_5"]))
@click.option("--heat", "surface_heat_flux", default="0", show_default=True,
              help="Net heat flux into the ocean [W m-2]; cooling is negative.")
@click.option("--evaporation-minus-precipitation", default="0", show_default=True, help="Metres of water per second [m s-1].")
@click.option("--depth", "mixed_layer_depth", help="Depth h of the boundary layer [m].")
@click.option("--us0", "surface_speed", help="Surface Stokes drift [m s-1].")
@click.option("--decay-wavenumber", "wavenumber", help="Wavenumber k of the drift us0 exp(2 k z) [m-1].")
@click.option("--wavelength", help="Wavelength [m], instead of --decay-wavenumber.")
@click.option("--amplitude", help="Amplitude of a monochromatic wave [m], instead of --us0.")
@click.option("--wave-height", help="Significant wave height [m]: instead of --us0, or beside it for the cell axis.")
@click.option("--no-waves", is_flag=True, help="There are no waves: us0 is zero, not unknown.")
@click.option("--angle", "direction", default="0", show_default=True,
              help="Direction of the waves minus that of the stress [degree], counter-clockwise.")
@click.option("--la-sl-reference", type=click.Choice(["none", "base"]), default="none", show_default=True,
              help="Drift subtracted in la_sl: none, or that at the base of the layer.")
@click.option("--latitude", help="Latitude [degree], for the inertial period and the Ekman scale.")
@click.option("--temperature", default="15", show_default=True, help="Of the water [degC], for its thermal expansion (TEOS-10).")
@click.option("--salinity", default="35", show_default=True, help="Absolute salinity [g kg-1].")
@click.option("--thermal-expansion", help="Thermal expansion coefficient [K-1], instead of TEOS-10.")
@click.option("--gravity", help="Acceleration of gravity [m s-2]; default 9.81.")
@click.option("--density", "reference_density", help="Reference density of the water [kg m-3]; default 1025.")
@click.option("--specific-heat", help="Specific heat of the water [J kg-1 K-1]; default that of TEOS-10.")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object; unknown or undefined numbers are null.")
def command(as_json: bool, no_waves: bool, la_sl_reference: Any, **given: Any) -> None:
    """Scales of a forcing: Langmuir numbers, Hoenikker number, Obukhov length, and the regime they point to.

    Quantities are numbers in the unit named, or texts with a unit such as "10 kt" or "600 ft". What cannot be known from the
    options stays unknown. Example:

    lespost scales --ustar 0.0061 --us0 0.068 --decay-wavenumber 0.1047 --depth 33
    """
    from lespost.forcing.expected import LAWS
    from lespost.forcing.expected import UNITS as EXPECTED_UNITS
    from lespost.forcing.one_forcing import one_forcing

    found = one_forcing(given, no_waves, la_sl_reference)
    numbers = found.scales.to_dict()
    if as_json:
        also = {"inertial_period": found.inertial_period, "ekman_scale": found.ekman_scale, **found.expected.to_dict()}
        conventions = {**found.conventions, "also": {**_known(also), "laws": LAWS}}
        click.echo(json.dumps({**_known(numbers), "conventions": conventions}, allow_nan=False))
        return
    rows = [(name, _text(value), UNITS[name], _meaning(name, found.conventions)) for name, value in numbers.items()]
    if found.inertial_period == found.inertial_period:
        rows.append(("inertial period", _text(found.inertial_period / 3600), "h", "2 pi / |f|"))
        rows.append(("Ekman scale", _text(found.ekman_scale), "m", "ustar / |f|"))
    rows += [(f"expected {name}", _text(value), EXPECTED_UNITS[name], LAWS[name]) for name, value in found.expected.to_dict().items()]
    widths = [max(len(row[column]) for row in rows) for column in range(3)]
    for name, value, unit, meaning in rows:
        click.echo(f"{name:<{widths[0]}}  {value:>{widths[1]}}  {unit:<{widths[2]}}  {meaning}".rstrip())
    for name in ("water", "stress", "wave_height"):
        click.echo(f"{name.replace('_', ' ')}: {found.conventions[name]}")


def _known(numbers: dict[str, Any]) -> dict[str, Any]:
    return {name: None if value != value else value for name, value in numbers.items()}


def _text(value: Any) -> str:
    if isinstance(value, str):
        return value
    return "-" if value != value else f"{value:.5g}"


def _meaning(name: str, words: dict[str, str]) -> str:
    return words.get(name, words["dissipation"] if name.startswith("dissipation") else "")
