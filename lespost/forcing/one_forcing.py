"""The scales of one forcing stated by hand, without files: what `lespost scales` prints.

The numbers take the same road as a run's: `resolve.resolve_forcing` with one time and no hints, then `scales.scales`.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from pydantic import ValidationError

from lespost.constants import AIR_DENSITY, GRAVITY
from lespost.errors import RequestError
from lespost.forcing.dispersion import angular_frequency
from lespost.forcing.expected import ExpectedLevels, expected_levels
from lespost.forcing.langmuir import SurfaceLayerReference
from lespost.forcing.resolve import resolve_forcing
from lespost.forcing.scales import Scales, conventions, scales
from lespost.forcing.settings import ForcingSettings, StokesSettings


@dataclass(frozen=True)
class OneForcing:
    """Scales, the conventions behind them, the levels that published laws expect, and what only rotation adds:
    inertial_period [s], ekman_scale u*/|f| [m] (NaN without a latitude or at the equator)."""

    scales: Scales
    conventions: dict[str, str]
    inertial_period: float
    ekman_scale: float
    expected: ExpectedLevels


#: Command-line options by the settings' field that holds their bounds.
OPTIONS = {
    "friction_velocity": "--ustar", "stress": "--stress", "wind_speed": "--wind", "bulk_formula": "--bulk-formula",
    "surface_heat_flux": "--heat", "evaporation_minus_precipitation": "--evaporation-minus-precipitation",
    "temperature": "--temperature", "salinity": "--salinity", "thermal_expansion": "--thermal-expansion",
    "latitude": "--latitude", "gravity": "--gravity", "reference_density": "--density", "specific_heat": "--specific-heat",
    "mixed_layer_depth": "--depth", "surface_speed": "--us0", "amplitude": "--amplitude", "wave_height": "--wave-height",
    "wavelength": "--wavelength", "wavenumber": "--decay-wavenumber", "direction": "--angle",
}


def one_forcing(given: dict[str, Any], no_waves: bool = False, la_sl_reference: SurfaceLayerReference = "none") -> OneForcing:
    """The scales of the forcing `given` by the settings' field names (`OPTIONS`): numbers, texts with units, or None.

    Without any wave key the waves are unknown (NaN), unless `no_waves`. Raises RequestError for impossible or contradictory
    input.
    """
    known = {name: value for name, value in given.items() if value is not None}
    _refuse_contradictions(known, no_waves)
    forcing: ForcingSettings = _settings(ForcingSettings, known)
    stokes: StokesSettings = _settings(StokesSettings, {**known, "kind": "none"} if no_waves else known)
    angle = stokes.direction or 0.0
    h = np.nan if forcing.mixed_layer_depth is None else forcing.mixed_layer_depth
    k = stokes.decay_wavenumber
    layer = 1.0 if np.isnan(h) else h
    decay_unknown = k is None and bool(stokes.surface_speed)
    resolvable = StokesSettings(kind="none") if decay_unknown else stokes
    faces = layer * np.array([-1.0, -0.2, 0.0])
    resolved = resolve_forcing(forcing, resolvable, {}, np.zeros(1), 0.5 * (faces[1:] + faces[:-1]), faces)

    def number(name: str, place: tuple[int, ...] = (0,)) -> float:
        return float(resolved[name].values[place])

    us0 = float(stokes.surface_speed or 0) if decay_unknown else number("us0")
    depth_known = not (decay_unknown or np.isnan(h))
    height, height_words = _height(stokes, us0, k, forcing.gravity or GRAVITY)
    ustar = number("friction_velocity")
    result = scales(
        friction_velocity=ustar, buoyancy_flux=number("surface_buoyancy_flux"), surface_stokes_drift=us0,
        stokes_depth=np.nan if decay_unknown else number("stokes_depth"),
        surface_layer_drift=float(np.hypot(number("stokes_u", (0, 1)), number("stokes_v", (0, 1)))) if depth_known else np.nan,
        base_drift=float(np.hypot(number("stokes_u_face", (0, 0)), number("stokes_v_face", (0, 0)))) if depth_known else np.nan,
        layer_depth=h, misalignment=angle, wave_height=height, la_sl_reference=la_sl_reference,
    )
    words = conventions(la_sl_reference)
    words["wave_height"] = height_words
    words["water"] = (f"g {number('gravity', ()):g} m s-2, density {number('reference_density', ()):g} kg m-3, specific heat "
                      f"{number('specific_heat', ()):g} J kg-1 K-1, thermal expansion {number('thermal_expansion', ()):.4g} K-1"
                      + ("" if forcing.thermal_expansion is not None or forcing.temperature is None else
                         f" (TEOS-10 at {forcing.temperature:g} degC, {forcing.salinity:g} g kg-1)"))
    words["stress"] = "unknown" if np.isnan(ustar) else "given" if forcing.wind_speed is None else (
        f"{forcing.bulk_formula} with the neutral wind at 10 m, air density {forcing.air_density or AIR_DENSITY:g} kg m-3")
    f = abs(float(resolved["coriolis_parameter"]))
    rotating = f > 0
    return OneForcing(result, words, 2 * np.pi / f if rotating else np.nan, ustar / f if rotating else np.nan,
                      expected_levels(result, h))


def _refuse_contradictions(known: dict[str, Any], no_waves: bool) -> None:
    groups = (("friction_velocity", "stress", "wind_speed"), ("surface_speed", "amplitude"), ("wavelength", "wavenumber"),
              ("amplitude", "wave_height"))
    for group in groups:
        both = [OPTIONS[name] for name in group if name in known]
        if len(both) > 1:
            raise RequestError(f"{' and '.join(both)} say the same thing; give only one of them.")
    waves = [OPTIONS[name] for name in ("surface_speed", "amplitude", "wave_height", "wavelength", "wavenumber") if name in known]
    if no_waves and waves:
        raise RequestError(f"--no-waves contradicts {', '.join(waves)}; leave one or the other out.")
    if not waves or "surface_speed" in known:
        return
    length = "wavelength" in known or "wavenumber" in known
    if not length:
        raise RequestError(f"{waves[0]} alone makes no Stokes drift; add --wavelength, or give --us0.")
    if not {"amplitude", "wave_height"} & set(known):
        raise RequestError(f"{waves[0]} alone makes no Stokes drift; add --us0, --amplitude or --wave-height.")


def _settings(kind: Any, known: dict[str, Any]) -> Any:
    """Settings of class `kind` from the keys it has; a refusal names the option."""
    try:
        return kind(**{name: value for name, value in known.items() if name in kind.model_fields})
    except ValidationError as error:
        first = error.errors()[0]
        reason = first["msg"].removeprefix("Value error, ").rstrip(".")
        name = str(first["loc"][0]) if first["loc"] else ""
        where = f"{OPTIONS.get(name, name)} = {first['input']}: " if name else ""
        for field, option in OPTIONS.items():
            reason = reason.replace(f"{field} =", f"{option}").replace("write stress = ...", "give --stress")
        raise RequestError(f"{where}{reason[0].lower() if name else reason[0]}{reason[1:]}. See lespost scales --help for "
                           "units and "
                           "meaning.") from None


def _height(stokes: StokesSettings, us0: float, k: float | None, gravity: float) -> tuple[float, str]:
    """(wave height for the cell axis [m], where it comes from)."""
    if stokes.wave_height is not None:
        return stokes.wave_height, "significant wave height as given"
    if k is None or not us0 > 0:
        return np.nan, "unknown; the cell axis of misaligned wind and waves needs it"
    amplitude = stokes.amplitude or float(np.sqrt(us0 / (k * angular_frequency(k, None, gravity))))
    return 2 * amplitude, (f"{2 * amplitude:.4g} m, trough to crest (2 a) of the equivalent monochromatic wave with this "
                           "us0 and wavenumber; "
                           "used for the cell axis only")
