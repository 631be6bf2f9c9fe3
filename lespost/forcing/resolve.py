"""From recipe and hints to the forcing of a run: one dataset over time and height, every source named.

The recipe wins; what it leaves out is taken from what the files state; what nobody states is NaN, and is said. Stokes drift
profiles are returned as cell means and at faces.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from lespost.constants import AIR_DENSITY, EARTH_ROTATION, GRAVITY, REFERENCE_DENSITY, SPECIFIC_HEAT_TEOS10
from lespost.errors import DataError, RecipeError
from lespost.findings import Decision, Hint
from lespost.forcing import buoyancy, stress
from lespost.forcing.series import with_series
from lespost.forcing.settings import ForcingSettings, StokesSettings
from lespost.forcing.stokes_profile import resolve_stokes


class Sources:
    """Looks quantities up in recipe, hints and defaults, and keeps an account of where each came from."""

    def __init__(self, hints: Mapping[str, Hint], time: np.ndarray, z: np.ndarray, tabled: frozenset[str] = frozenset()) -> None:
        self.hints, self.time, self.z, self.tabled = hints, time, z, tabled
        self.decisions: list[Decision] = []

    def note(self, subject: str, choice: str, how: Any, evidence: str) -> None:
        """Record one decision."""
        self.decisions.append(Decision(subject, choice, how, evidence))

    def scalar(self, name: str, given: float | None, default: float | None, units: str, reason: str = "") -> float:
        """A number constant in time; NaN if neither recipe, hints nor default know it."""
        words = name.replace("_", " ")
        if given is not None:
            self.note(words, f"{given:g} {units}", "recipe", f"[forcing].{name}{self._overruled(name, given, units)}")
            return float(given)
        if name in self.hints:
            value = float(np.mean(self.hints[name].value))
            self.note(words, f"{value:g} {units}", "metadata", self.hints[name].evidence)
            return value
        if default is not None:
            self.note(words, f"{default:g} {units}", "default", reason or "common practice")
            return float(default)
        self.note(words, "unknown", "default", f"neither [forcing].{name} nor the files state it")
        return float("nan")

    def _overruled(self, name: str, given: float, units: str) -> str:
        """What the files say, where the recipe says something else by more than rounding."""
        hint = self.hints.get(name)
        if hint is None:
            return ""
        values = np.asarray(hint.value, float)
        if np.allclose(values, given, rtol=1e-3):
            return ""
        return f"; the files say {float(values.mean()):g} {units} ({hint.evidence})"

    def series(self, name: str, given: float | None, units: str, key: str = "") -> np.ndarray | None:
        """A quantity over time (constant if stated so); None if nobody states it."""
        words = name.replace("_", " ")
        if given is not None:
            self.note(words, f"{given:g} {units}", "recipe", f"{key or f'[forcing].{name}'}{self._overruled(name, given, units)}")
            return np.full(self.time.size, float(given))
        hint = self.hints.get(name)
        if hint is None:
            return None
        values = np.asarray(hint.value, float)
        if values.ndim and values.shape != self.time.shape:
            raise DataError(f"{hint.evidence}: {values.size} values for {self.time.size} snapshots; "
                            "name the forcing in the recipe.")
        low, high = float(np.min(values)), float(np.max(values))
        how = "recipe" if name in self.tabled else "metadata"
        self.note(words, f"{low:g} {units}" if low == high else f"{low:g} to {high:g} {units}", how, hint.evidence)
        return np.broadcast_to(values, self.time.shape).copy()


def resolve_forcing(
    forcing: ForcingSettings, stokes: StokesSettings, hints: Mapping[str, Hint], time: np.ndarray, z: np.ndarray,
    z_face: np.ndarray, base: Any = None,
) -> xr.Dataset:
    """The forcing at the snapshots' `time` [s] on levels `z` and faces `z_face` [m, upward, surface last].

    base: folder that [stokes].spectrum_file and [forcing].series are relative to. Returns (time): friction_velocity, stress_direction,
    surface_temperature_flux, surface_salinity_flux, surface_buoyancy_flux (upward; absorbed sunlight not included, see
    `shortwave`), us0, stokes_direction, stokes_transport, stokes_depth, significant_wave_height; (time, z) stokes_u, stokes_v
    (cell means); (time, z_face) stokes_u_face, stokes_v_face; scalars gravity, reference_density, specific_heat,
    thermal_expansion, haline_contraction, coriolis_parameter. attrs["decisions"]: JSON list of where each came from.
    Raises RecipeError for contradictions, DataError for series that do not fit.
    """
    clock = np.asarray(time, float)
    known, tabled = with_series(forcing, stokes, hints, clock, Path(base) if base is not None else Path())
    sources = Sources(known, clock, np.asarray(z, float), tabled)
    gravity = sources.scalar("gravity", forcing.gravity, GRAVITY, "m s-2")
    density = sources.scalar("reference_density", forcing.reference_density, REFERENCE_DENSITY, "kg m-3")
    heat = sources.scalar("specific_heat", forcing.specific_heat, SPECIFIC_HEAT_TEOS10, "J kg-1 K-1", "TEOS-10")
    expansion, contraction = _properties(forcing, sources)
    coriolis = _coriolis(forcing, sources)
    ustar = _friction_velocity(forcing, sources, density, gravity)
    direction = _stress_direction(forcing, sources)
    temperature_flux = _temperature_flux(forcing, sources, density, heat)
    salt_flux = np.full(ustar.size, float(buoyancy.salinity_flux(forcing.evaporation_minus_precipitation, forcing.salinity)))
    # No flux is no buoyancy, whatever the unknown properties of the water; an unknown flux stays unknown.
    b0 = buoyancy.buoyancy_flux(temperature_flux, salt_flux, gravity, expansion if np.any(temperature_flux != 0) else 0.0,
                                contraction if np.any(salt_flux != 0) else 0.0) + 0.0
    drift = resolve_stokes(stokes, sources, forcing, direction, np.asarray(z_face, float), gravity, base)
    t = ("time",)
    data: dict[str, tuple[Any, Any, dict[str, str]]] = {
        "friction_velocity": (t, ustar, _about("m s-1", "friction velocity in the water")),
        "stress_direction": (t, direction, _about("degree", "direction the stress acts towards, counter-clockwise from +x")),
        "surface_temperature_flux": (t, temperature_flux, _about("K m s-1", "upward temperature flux at the surface")),
        "surface_salinity_flux": (t, salt_flux, _about("g kg-1 m s-1", "upward salinity flux at the surface")),
        "surface_buoyancy_flux": (t, b0, _about("m2 s-3", "upward buoyancy flux at the surface; positive destabilises")),
        "shortwave": ((), np.nan if forcing.shortwave is None else forcing.shortwave, _about("W m-2", "sunlight into the water")),
        "gravity": ((), gravity, _about("m s-2", "acceleration of gravity")),
        "reference_density": ((), density, _about("kg m-3", "reference density")),
        "specific_heat": ((), heat, _about("J kg-1 K-1", "specific heat")),
        "thermal_expansion": ((), expansion, _about("K-1", "thermal expansion coefficient")),
        "haline_contraction": ((), contraction, _about("kg g-1", "haline contraction coefficient")),
        "coriolis_parameter": ((), coriolis, _about("s-1", "Coriolis parameter")),
        "us0": (t, drift.surface_speed, _about("m s-1", "modulus of the surface Stokes drift")),
        "stokes_direction": (t, drift.direction, _about("degree", "direction towards which the Stokes drift points")),
        "stokes_transport": (t, drift.transport, _about("m2 s-1", "Stokes transport")),
        "stokes_depth": (t, drift.depth, _about("m", "transport over surface drift")),
        "significant_wave_height": (t, drift.wave_height, _about("m", "significant wave height")),
        "stokes_u": (("time", "z"), drift.u, _about("m s-1", "Stokes drift along x, cell mean")),
        "stokes_v": (("time", "z"), drift.v, _about("m s-1", "Stokes drift along y, cell mean")),
        "stokes_u_face": (("time", "z_face"), drift.u_face, _about("m s-1", "Stokes drift along x at faces")),
        "stokes_v_face": (("time", "z_face"), drift.v_face, _about("m s-1", "Stokes drift along y at faces")),
    }
    resolved = xr.Dataset(data, coords={"time": sources.time, "z": sources.z, "z_face": np.asarray(z_face, float)})
    resolved.attrs["decisions"] = json.dumps([decision.to_dict() for decision in sources.decisions])
    resolved.attrs["water_type"] = forcing.water_type
    resolved.attrs["mixed_layer_depth"] = np.nan if forcing.mixed_layer_depth is None else forcing.mixed_layer_depth
    return resolved


def _about(units: str, long_name: str) -> dict[str, str]:
    return {"units": units, "long_name": long_name}


def _properties(forcing: ForcingSettings, sources: Sources) -> tuple[float, float]:
    """(thermal expansion, haline contraction); TEOS-10 where the recipe gives a temperature."""
    teos = None if forcing.temperature is None else buoyancy.seawater_properties(forcing.salinity, forcing.temperature)
    if forcing.thermal_expansion is None and "thermal_expansion" not in sources.hints and teos is not None:
        sources.note("thermal expansion", f"{teos[0]:.4g} K-1", "default",
                     f"TEOS-10 at {forcing.temperature:g} degC, {forcing.salinity:g} g kg-1")
        return teos[0], teos[1]
    expansion = sources.scalar("thermal_expansion", forcing.thermal_expansion, None, "K-1")
    if teos is None:
        teos = buoyancy.seawater_properties(forcing.salinity, 15.0)
        if forcing.evaporation_minus_precipitation:
            sources.note("haline contraction", f"{teos[1]:.4g} kg g-1", "default",
                         "TEOS-10 at 15 degC; give [forcing].temperature")
    return expansion, teos[1]


def _coriolis(forcing: ForcingSettings, sources: Sources) -> float:
    if forcing.latitude is not None:
        value = 2 * EARTH_ROTATION * float(np.sin(np.radians(forcing.latitude)))
        sources.note("Coriolis parameter", f"{value:.4g} s-1", "recipe", "[forcing].latitude")
        return value
    if forcing.coriolis_parameter is None and "coriolis_parameter" not in sources.hints and "latitude" in sources.hints:
        latitude = float(np.mean(sources.hints["latitude"].value))
        value = 2 * EARTH_ROTATION * float(np.sin(np.radians(latitude)))
        sources.note("Coriolis parameter", f"{value:.4g} s-1", "metadata", sources.hints["latitude"].evidence)
        return value
    return sources.scalar("coriolis_parameter", forcing.coriolis_parameter, None, "s-1")


def _friction_velocity(forcing: ForcingSettings, sources: Sources, density: float, gravity: float) -> np.ndarray:
    air = forcing.air_density or AIR_DENSITY
    if forcing.friction_velocity is None and (forcing.stress is not None or forcing.wind_speed is not None):
        tau = forcing.stress
        how = "[forcing].stress"
        if tau is None:
            tau = float(stress.wind_stress(forcing.wind_speed, forcing.bulk_formula, air, gravity=gravity))
            how = f"[forcing].wind_speed by {forcing.bulk_formula}, air density {air:g} kg m-3"
        value = float(stress.friction_velocity(tau, density))
        sources.note("friction velocity", f"{value:.4g} m s-1", "recipe", how)
        return np.full(sources.time.size, value)
    found = sources.series("friction_velocity", forcing.friction_velocity, "m s-1")
    if found is None and (tau_hint := sources.series("stress", None, "N m-2")) is not None:
        found = stress.friction_velocity(tau_hint, density)
    if found is None and (wind := sources.series("wind_speed", None, "m s-1")) is not None:
        found = stress.friction_velocity(stress.wind_stress(wind, forcing.bulk_formula, air, gravity=gravity), density)
    if found is None:
        sources.note("friction velocity", "unknown", "default", "write [forcing].friction_velocity, stress or wind_speed")
        return np.full(sources.time.size, np.nan)
    if np.any(found > 0.06):
        raise RecipeError(f"friction velocity {np.nanmax(found):.3g} m s-1 would take a hurricane; did you mean a stress in "
                          "N m-2? Then write [forcing].stress, which wins over what the files state.")
    return found


def _stress_direction(forcing: ForcingSettings, sources: Sources) -> np.ndarray:
    if forcing.wind_from_compass is not None and forcing.x_axis_compass_bearing is not None:
        towards = forcing.wind_from_compass + 180.0
        value = float(wrap_degrees(forcing.x_axis_compass_bearing - towards))
        sources.note("stress direction", f"{value:g} degree", "recipe",
                     f"wind from {forcing.wind_from_compass:g}, +x bears {forcing.x_axis_compass_bearing:g} (compass)")
        return np.full(sources.time.size, value)
    found = sources.series("stress_direction", forcing.stress_direction, "degree")
    if found is None:
        sources.note("stress direction", "0 degree (along +x)", "default",
                     "nobody states it; checked against the momentum flux near the surface")
        return np.zeros(sources.time.size)
    return np.asarray(wrap_degrees(found))


def wrap_degrees(angle: Any) -> Any:
    """The same angle within (-180, 180]."""
    return -((-np.asarray(angle, float) + 180.0) % 360.0 - 180.0)


def mean_direction(angle: Any) -> float:
    """Mean of directions [degree] as unit vectors: 179 and -179 are neighbours, and have no arithmetic mean."""
    radians = np.radians(np.asarray(angle, float))
    return float(np.degrees(np.arctan2(np.sin(radians).mean(), np.cos(radians).mean())))


def _temperature_flux(forcing: ForcingSettings, sources: Sources, density: float, specific_heat: float) -> np.ndarray:
    if forcing.surface_temperature_flux is None and forcing.surface_heat_flux is not None:
        given = float(buoyancy.temperature_flux(forcing.surface_heat_flux, density, specific_heat))
        sources.note("surface temperature flux", f"{given:.4g} K m s-1", "recipe", "[forcing].surface_heat_flux")
        return np.full(sources.time.size, given)
    if forcing.surface_temperature_flux is None and "surface_heat_flux" in sources.hints:
        flux = sources.series("surface_heat_flux", None, "W m-2")
        assert flux is not None
        return buoyancy.temperature_flux(flux, density, specific_heat)
    found = sources.series("surface_temperature_flux", forcing.surface_temperature_flux, "K m s-1")
    if found is None:
        sources.note("surface temperature flux", "unknown", "default", "write [forcing].surface_heat_flux")
        return np.full(sources.time.size, np.nan)
    return found
