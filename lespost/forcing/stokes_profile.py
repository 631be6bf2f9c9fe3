"""The Stokes drift of a run on its own levels, from recipe or hints: direction, surface value, transport, cell means."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from lespost.errors import RecipeError
from lespost.forcing import stokes as forms
from lespost.forcing.settings import ForcingSettings, StokesSettings

if TYPE_CHECKING:
    from lespost.forcing.resolve import Sources


@dataclass(frozen=True)
class StokesOnGrid:
    """Over time [nt]: surface_speed [m s-1], direction [degree, towards], transport [m2 s-1], depth [m], wave_height [m];
    u, v [m s-1]: cell means (nt, nz); u_face, v_face: at faces (nt, nz + 1)."""

    surface_speed: np.ndarray
    direction: np.ndarray
    transport: np.ndarray
    depth: np.ndarray
    wave_height: np.ndarray
    u: np.ndarray
    v: np.ndarray
    u_face: np.ndarray
    v_face: np.ndarray


def resolve_stokes(settings: StokesSettings, sources: Sources, forcing: ForcingSettings, stress_direction: np.ndarray,
                   z_face: np.ndarray, gravity: float, base: Path | None) -> StokesOnGrid:
    """The drift on faces `z_face` [m] (ascending). Raises RecipeError where the keys do not make a profile."""
    if settings.kind == "none":
        sources.note("Stokes drift", "none", "recipe", '[stokes].kind = "none"')
        return _scaled(sources, np.zeros(sources.time.size), stress_direction, lambda z: np.zeros_like(z), 0.0, z_face)
    if settings.kind == "profile" or (settings.kind == "auto" and settings.profile_z):
        return _by_hand(settings, sources, z_face)
    if settings.kind == "spectrum" or (settings.kind == "auto" and settings.spectrum_file):
        return _from_spectrum(settings, sources, forcing, stress_direction, z_face, gravity, base)
    stored = {"stokes_profile_u", "stokes_profile_v"} & set(sources.hints)
    if settings.kind == "auto" and settings.surface_speed is None and stored:
        return _from_profile_hints(sources, z_face)
    direction = _direction(settings, sources, forcing, stress_direction)
    if settings.kind == "pierson_moskowitz":
        return _fully_developed(settings, sources, forcing, direction, z_face, gravity)
    if settings.kind in ("bulk_breivik_2014", "bulk_breivik_2016"):
        us0, transport = float(settings.surface_speed or 0), float(settings.transport or 0)
        form = forms.breivik_2014 if settings.kind == "bulk_breivik_2014" else forms.breivik_2016
        sources.note("Stokes drift", f"{us0:g} m s-1 at the surface, transport {transport:g} m2 s-1", "recipe", settings.kind)
        return _scaled(sources, np.full(sources.time.size, us0), direction, lambda z: form(z, us0, transport) / us0,
                       transport / us0, z_face, settings.wave_height)
    if settings.kind == "theory_wave":
        return _theory_wave(settings, sources, forcing, direction, z_face, gravity)
    return _monochromatic(settings, sources, direction, z_face, gravity)


def _stated_direction(settings: StokesSettings, forcing: ForcingSettings) -> tuple[float | None, str]:
    """(direction towards which the drift points, counter-clockwise from +x [degree], the recipe's words for it)."""
    if settings.waves_from_compass is None:
        return settings.direction, "[stokes].direction"
    if forcing.x_axis_compass_bearing is None:
        raise RecipeError("[stokes].waves_from_compass needs [forcing].x_axis_compass_bearing (90 where +x points east).")
    towards = forcing.x_axis_compass_bearing - (settings.waves_from_compass + 180.0)
    return -((-towards + 180.0) % 360.0 - 180.0), "[stokes].waves_from_compass"


def _direction(settings: StokesSettings, sources: Sources, forcing: ForcingSettings, stress_direction: np.ndarray) -> np.ndarray:
    stated, key = _stated_direction(settings, forcing)
    found = sources.series("stokes_direction", stated, "degree", key)
    if found is not None:
        return found
    sources.note("Stokes direction", "that of the stress", "default", "nobody states it; write [stokes].direction")
    return stress_direction


def _monochromatic(settings: StokesSettings, sources: Sources, direction: np.ndarray, z_face: np.ndarray, gravity: float
                   ) -> StokesOnGrid:
    k = settings.decay_wavenumber
    if k is None and "stokes_wavenumber" in sources.hints:
        k = float(np.mean(sources.hints["stokes_wavenumber"].value))
        sources.note("Stokes wavenumber", f"{k:g} m-1", "metadata", sources.hints["stokes_wavenumber"].evidence)
    height = settings.wave_height
    amplitude = settings.amplitude
    if amplitude is None and height is not None and settings.surface_speed is None:
        amplitude = height / (2 * np.sqrt(2))
    surface: np.ndarray | None
    if amplitude is not None and settings.surface_speed is None:
        if k is None:
            raise RecipeError("[stokes]: an amplitude or wave height needs wavelength or wavenumber.")
        surface = np.full(sources.time.size, float(forms.monochromatic(0.0, amplitude, k, settings.water_depth, gravity)))
        sources.note("Stokes drift", f"{surface[0]:.4g} m s-1 at the surface", "recipe",
                     f"one wave, amplitude {amplitude:g} m, k {k:g} m-1")
        height = height if height is not None else 2 * np.sqrt(2) * amplitude
    else:
        surface = sources.series("stokes_surface_speed", settings.surface_speed, "m s-1", "[stokes].surface_speed")
    if surface is None:
        if settings.kind == "monochromatic":
            raise RecipeError('[stokes]: kind = "monochromatic" needs surface_speed, or amplitude and wavelength.')
        sources.note("Stokes drift", "unknown", "default", 'nobody states it; write [stokes].surface_speed, or kind = "none"')
        return _unknown(sources, direction, z_face)
    if not np.any(surface > 0):
        return _scaled(sources, surface, direction, lambda z: np.zeros_like(z), 0.0, z_face)
    if "stokes_profile_shape" in sources.hints and settings.decay_wavenumber is None and settings.amplitude is None:
        shape = np.asarray(sources.hints["stokes_profile_shape"].value, float)
        sources.note("Stokes profile", "cell means as stored", "metadata", sources.hints["stokes_profile_shape"].evidence)
        depth = 1 / (2 * k) if k is not None else float((shape * np.diff(z_face)).sum())
        faces = np.exp(2 * k * z_face) if k is not None else np.interp(z_face, sources.z, shape)
        return _from_shapes(sources, surface, direction, shape, faces, depth, height)
    if k is None:
        raise RecipeError("[stokes]: the surface drift is known but not how it decays; write wavenumber or wavelength.")
    wavenumber = k
    if settings.water_depth is None:
        sources.note("Stokes profile", f"exp(2 k z), k = {k:g} m-1", "recipe" if settings.decay_wavenumber else "metadata",
                     "one deep-water wave")
        shape = forms.exponential_cell_means(z_face, 1.0, k)
        return _from_shapes(sources, surface, direction, shape, np.exp(2 * k * z_face), 1 / (2 * k), height)
    depth_m = settings.water_depth
    at_surface = float(forms.monochromatic(0.0, 1.0, k, depth_m, gravity))
    ratio = forms.monochromatic_transport(1.0, k, depth_m, gravity) / at_surface
    sources.note("Stokes profile", f"one wave in {depth_m:g} m of water, k = {k:g} m-1", "recipe", "[stokes].water_depth")
    return _scaled(sources, surface, direction,
                   lambda z: forms.monochromatic(z, 1.0, wavenumber, depth_m, gravity) / at_surface, ratio, z_face, height)


def _wind(settings: StokesSettings, sources: Sources, forcing: ForcingSettings) -> float:
    """Mean wind at 10 m [m s-1] that a fully developed sea is made of."""
    wind = sources.series("wind_speed", forcing.wind_speed, "m s-1")
    if wind is None or not np.all(wind > 0):
        raise RecipeError(f'[stokes]: kind = "{settings.kind}" needs [forcing].wind_speed.')
    return float(wind.mean())


def _fully_developed(settings: StokesSettings, sources: Sources, forcing: ForcingSettings, direction: np.ndarray,
                     z_face: np.ndarray, gravity: float) -> StokesOnGrid:
    """The unidirectional spectrum of Pierson & Moskowitz (1964) for the wind, integrated, with its tail."""
    from lespost.forcing.spectrum import Spectrum, stokes_drift, summary
    from lespost.forcing.wave_models import peak_frequency_of_wind, pierson_moskowitz

    # 19.5 m wind over 10 m wind of the logarithmic profile, as Li et al. (2017) take it
    peak = peak_frequency_of_wind(1.075 * _wind(settings, sources, forcing), gravity)
    frequency = peak * np.geomspace(0.3, 30.0, 1200)
    spectrum = Spectrum(frequency, pierson_moskowitz(frequency, peak, gravity=gravity), source="Pierson-Moskowitz spectrum")
    numbers = summary(spectrum, settings.water_depth, True, gravity)
    sources.note("Stokes drift", f"{numbers.us0:.4g} m s-1, transport {numbers.transport:.4g} m2 s-1", "recipe",
                 f"unidirectional Pierson-Moskowitz spectrum, peak {peak:.3g} Hz")
    return _scaled(sources, np.full(sources.time.size, numbers.us0), direction,
                   lambda z: stokes_drift(z, spectrum, settings.water_depth, True, gravity)[0] / numbers.us0, numbers.decay_scale,
                   z_face, settings.wave_height or numbers.hs)


def _theory_wave(settings: StokesSettings, sources: Sources, forcing: ForcingSettings, direction: np.ndarray, z_face: np.ndarray,
                 gravity: float) -> StokesOnGrid:
    wind = _wind(settings, sources, forcing)
    us0, transport = forms.theory_wave_bulk(wind, gravity)
    sources.note("Stokes drift", f"{us0:.4g} m s-1, transport {transport:.4g} m2 s-1", "recipe",
                 "fully developed sea from the wind (Li et al. 2017), profile of Breivik et al. 2016")
    return _scaled(sources, np.full(sources.time.size, us0), direction, lambda z: forms.breivik_2016(z, us0, transport) / us0,
                   transport / us0, z_face, settings.wave_height)


def _by_hand(settings: StokesSettings, sources: Sources, z_face: np.ndarray) -> StokesOnGrid:
    z = np.asarray(settings.profile_z, float)
    order = np.argsort(z)
    u = np.asarray(settings.profile_u, float)[order]
    v = np.asarray(settings.profile_v, float)[order] if settings.profile_v else np.zeros_like(u)
    z = z[order]
    sources.note("Stokes drift", f"profile of {z.size} heights", "recipe", "[stokes].profile_z, linear between, constant outside")
    return _vectors(sources, lambda h: np.interp(h, z, u), lambda h: np.interp(h, z, v), z_face, settings.wave_height)


def _from_spectrum(settings: StokesSettings, sources: Sources, forcing: ForcingSettings, stress_direction: np.ndarray,
                   z_face: np.ndarray, gravity: float, base: Path | None) -> StokesOnGrid:
    """The drift of a spectrum file; a spectrum without directions follows [stokes].direction, else the stress."""
    from lespost.forcing.spectrum import stokes_drift, summary
    from lespost.forcing.spectrum_files import read_spectrum

    spectrum = read_spectrum((base or Path()) / settings.spectrum_file, x_axis_compass_bearing=forcing.x_axis_compass_bearing)
    stated, _ = _stated_direction(settings, forcing)
    if stated is not None:
        spectrum = spectrum.towards(stated)
    depth, tail = settings.water_depth, settings.spectral_tail
    numbers = summary(spectrum, depth, tail, gravity)
    sources.note("Stokes drift", f"{numbers.us0:.4g} m s-1 at the surface", "recipe",
                 f"spectrum {settings.spectrum_file} up to {spectrum.frequency[-1]:g} Hz, tail {'added' if tail else 'left out'}")
    if not spectrum.has_direction and numbers.us0 > 0:
        sources.note("Stokes direction", "that of the stress", "default", "the spectrum has none; write [stokes].direction")
        return _scaled(sources, np.full(sources.time.size, numbers.us0), stress_direction,
                       lambda z: stokes_drift(z, spectrum, depth, tail, gravity)[0] / numbers.us0, numbers.decay_scale, z_face,
                       numbers.hs)
    if spectrum.has_direction and stated is None and forcing.x_axis_compass_bearing is None:
        sources.note("Stokes direction", f"{numbers.direction:.4g} degree", "default",
                     "compass directions of the spectrum with +x pointing east; write [forcing].x_axis_compass_bearing")

    def component(number: int) -> Callable[[np.ndarray], np.ndarray]:
        return lambda z: stokes_drift(z, spectrum, depth, tail, gravity)[number]

    return _vectors(sources, component(0), component(1), z_face, numbers.hs)


def _from_profile_hints(sources: Sources, z_face: np.ndarray) -> StokesOnGrid:
    nothing = np.zeros(sources.z.size)
    parts = {name: np.asarray(sources.hints[name].value, float) if name in sources.hints else nothing
             for name in ("stokes_profile_u", "stokes_profile_v")}
    for name in parts:
        if name in sources.hints:
            sources.note(name.replace("_", " "), "cell means as stored", "metadata", sources.hints[name].evidence)
    u, v = parts["stokes_profile_u"], parts["stokes_profile_v"]
    u_face, v_face = (_extended(sources.z, part, z_face) for part in (u, v))
    return _finish(sources, u, v, u_face, v_face, np.diff(z_face), None)


def _extended(z: np.ndarray, values: np.ndarray, z_face: np.ndarray) -> np.ndarray:
    """Values at faces from cell means: linear inside; at the surface the exponential whose means the two top cells are."""
    inner = np.interp(z_face, z, values)
    if z.size > 1 and values[-1] * values[-2] > 0 and abs(values[-1]) > abs(values[-2]):
        decay = np.log(values[-1] / values[-2]) / (z[-1] - z[-2])
        reach = decay * (z_face[-1] - z_face[-2])
        inner[-1] = values[-1] * reach / -np.expm1(-reach)
    return inner


def _vectors(sources: Sources, u: Callable[[np.ndarray], np.ndarray], v: Callable[[np.ndarray], np.ndarray], z_face: np.ndarray,
             wave_height: float | None) -> StokesOnGrid:
    faces = np.minimum(z_face, 0.0)
    cells = forms.cell_means(u, faces), forms.cell_means(v, faces)
    return _finish(sources, *cells, u(faces), v(faces), np.diff(z_face), wave_height)


def _finish(sources: Sources, u: np.ndarray, v: np.ndarray, u_face: np.ndarray, v_face: np.ndarray, thickness: np.ndarray,
            wave_height: float | None) -> StokesOnGrid:
    """A steady vector profile over all times; direction and modulus are those at the surface face."""
    count = sources.time.size
    speed = float(np.hypot(u_face[-1], v_face[-1]))
    transport = float(np.hypot((u * thickness).sum(), (v * thickness).sum()))
    angle = float(np.degrees(np.arctan2(v_face[-1], u_face[-1]))) if speed > 0 else np.nan
    whole = [np.broadcast_to(part, (count, part.size)).copy() for part in (u, v, u_face, v_face)]
    return StokesOnGrid(np.full(count, speed), np.full(count, angle), np.full(count, transport),
                        np.full(count, transport / speed if speed > 0 else np.nan), _height(count, wave_height), *whole)


def _scaled(sources: Sources, surface: np.ndarray, direction: np.ndarray, shape: Callable[[np.ndarray], np.ndarray], depth: float,
            z_face: np.ndarray, wave_height: float | None = None) -> StokesOnGrid:
    faces = np.minimum(z_face, 0.0)
    return _from_shapes(sources, surface, direction, forms.cell_means(shape, faces), shape(faces), depth, wave_height)


def _from_shapes(sources: Sources, surface: np.ndarray, direction: np.ndarray, cells: np.ndarray, faces: np.ndarray, depth: float,
                 wave_height: float | None) -> StokesOnGrid:
    angle = np.radians(direction)[:, None]
    speed = surface[:, None]
    u, v = speed * np.cos(angle) * cells, speed * np.sin(angle) * cells
    u_face, v_face = speed * np.cos(angle) * faces, speed * np.sin(angle) * faces
    known_depth = np.where(surface > 0, depth, np.nan)
    return StokesOnGrid(surface, np.where(surface > 0, direction, np.nan), surface * depth, known_depth,
                        _height(surface.size, wave_height), u, v, u_face, v_face)


def _unknown(sources: Sources, direction: np.ndarray, z_face: np.ndarray) -> StokesOnGrid:
    count = sources.time.size
    nothing: Any = np.full(count, np.nan)
    cells, faces = np.full((count, z_face.size - 1), np.nan), np.full((count, z_face.size), np.nan)
    return StokesOnGrid(nothing, nothing, nothing, nothing, nothing, cells, cells, faces, faces)


def _height(count: int, wave_height: float | None) -> np.ndarray:
    return np.full(count, np.nan if wave_height is None else float(wave_height))
