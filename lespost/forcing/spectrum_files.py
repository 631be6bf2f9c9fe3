"""Wave spectra from files: text tables, netCDF by standard names, and buoy text in realtime or history layout.

Every reader ends in `spectrum.Spectrum`: Hz, m2 s (rad-1), directions towards, counter-clockwise from the simulation's +x.
Several times in one file become their mean, or the one asked for; means are taken of energies and first moments, in which the
drift is linear. Text layouts are read in `spectrum_text`.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from lespost.errors import DataError, LespostError
from lespost.forcing.spectrum import Spectrum, direction_weights
from lespost.units import conversion

#: Compass bearing of +x where nobody states one: +x is east.
EAST = 90.0


@dataclass(frozen=True)
class RawSpectra:
    """What a file holds: frequency (nf,) [Hz]; density (nt, nf) [m2 s] or (nt, nf, nd) [m2 s rad-1]; directions (nd,) and
    mean_direction (nt, nf) [degree, compass, clockwise from north], r1 (nt, nf) [1]; `coming_from`: whether these directions say
    where waves come from; bandwidth (nf,) [Hz]. Missing values are NaN."""

    frequency: np.ndarray
    density: np.ndarray
    directions: np.ndarray | None = None
    mean_direction: np.ndarray | None = None
    r1: np.ndarray | None = None
    coming_from: bool = True
    bandwidth: np.ndarray | None = None


def read_spectrum(path: str | Path, time: int | None = None, x_axis_compass_bearing: float | None = None) -> Spectrum:
    """The spectrum in `path`, a netCDF file or a text file, in the simulation's axes.

    time: index of the spectrum to take where there are several (negative from the end); default: their mean.
    x_axis_compass_bearing: compass bearing of +x [degree]; default 90, +x points east. Text files may have companions beside
    them in the buoy archives' naming (NAME.data_spec with NAME.swdir and NAME.swr1), which are read too.
    Raises DataError, naming file and remedy, where the file is no wave spectrum.
    """
    file = Path(path)
    if not file.is_file():
        raise DataError(f"{file}: there is no such file; check the path of the wave spectrum (relative to the recipe).")
    try:
        raw = _read(file)
        return _canonical(raw, file, time, EAST if x_axis_compass_bearing is None else x_axis_compass_bearing)
    except LespostError as error:
        raise error if str(file.name) in str(error) else DataError(f"{file}: {error}") from None


def _read(file: Path) -> RawSpectra:
    with file.open("rb") as stream:
        start = stream.read(8)
    if not start:
        raise DataError(f"{file}: the file is empty; fetch it again.")
    if start[:3] == b"CDF" or start[:8] == b"\x89HDF\r\n\x1a\n":
        return _read_netcdf(file)
    from lespost.forcing.spectrum_text import read_text

    return read_text(file)


def _canonical(raw: RawSpectra, file: Path, time: int | None, bearing: float) -> Spectrum:
    """One time or the mean, frequencies ascending and positive, directions in the simulation's axes."""
    density, frequency = raw.density, raw.frequency
    whole = frequency.size
    count = density.shape[0]
    if time is not None and not -count <= time < count:
        raise DataError(f"{file}: there is no spectrum number {time}; the file holds {count}, numbered from 0.")
    times = np.arange(count) if time is None else np.array([time % count])
    density = density[times]
    flat = density.reshape(times.size, whole, -1)
    known = np.isfinite(flat).all(axis=2)
    frequencies = known.any(axis=0) & (frequency > 0)
    complete = known[:, frequencies].all(axis=1) if frequencies.any() else np.zeros(times.size, bool)
    if frequencies.sum() < 2 or not complete.any():
        raise DataError(f"{file}: no complete spectrum, all are missing or flagged; choose another time or file.")
    keep = np.flatnonzero(frequencies)
    order = keep[np.argsort(frequency[keep], kind="stable")]
    chosen = times[complete]
    density = raw.density[chosen][:, order]
    source = f"{file.name}" + (f" (mean of {chosen.size} spectra)" if chosen.size > 1 else "")
    bandwidth = None if raw.bandwidth is None else raw.bandwidth[order]
    turn = 180.0 if raw.coming_from else 0.0
    if raw.directions is not None:
        towards = _wrap(bearing - (raw.directions + turn))
        return Spectrum(frequency[order], density.mean(axis=0), directions=towards, bandwidth=bandwidth, source=source)
    mean = density.mean(axis=0)
    if raw.mean_direction is None:
        if raw.r1 is not None:
            raise DataError(f"{file}: r1 without a mean direction; add the direction column or companion file (alpha1).")
        return Spectrum(frequency[order], mean, bandwidth=bandwidth, source=source)
    angle = np.radians(bearing - (raw.mean_direction[chosen][:, order] + turn))
    strength = np.ones_like(density) if raw.r1 is None else raw.r1[chosen][:, order]
    missing = (density > 0) & ~(np.isfinite(angle) & np.isfinite(strength))
    if missing.any():
        raise DataError(f"{file}: {int(missing.sum())} of {missing.size} frequencies with energy have no direction; "
                        "choose a time index with complete directions, or leave the direction files out.")
    east, north = (np.nan_to_num(density * strength * part).mean(axis=0) for part in (np.cos(angle), np.sin(angle)))
    r1 = np.divide(np.hypot(east, north), mean, out=np.zeros_like(mean), where=mean > 0)
    return Spectrum(frequency[order], mean, r1=np.minimum(r1, 1.0) if raw.r1 is None else r1,
                    mean_direction=np.degrees(np.arctan2(north, east)), bandwidth=bandwidth, source=source)


def _wrap(angle: np.ndarray) -> np.ndarray:
    return (angle + 180.0) % 360.0 - 180.0


def frequency_factor(units: str, where: str) -> float:
    """Hz per unit of a frequency axis; radians per second, which UDUNITS takes for hertz, are told apart by their name."""
    if "rad" in units.lower():
        return conversion(units, "rad s-1", where)[0] / (2 * np.pi)
    return conversion(units or "Hz", "Hz", where)[0]


def refuse_unclear_angular(frequency_units: str, density_units: str, both: bool, where: str) -> None:
    """Raises DataError where the axis is in radians per second and nothing says whether the density is per radian or per cycle.

    "m2 s" is written for either, a factor of 2π apart; a directional density's "rad-1" speaks of direction.
    """
    if "rad" not in frequency_units.lower():
        return
    if both:
        raise DataError(f"{where}: a directional density over angular frequency; give the frequencies in Hz and the density in "
                        '"m2 s rad-1", per hertz and radian of direction.')
    if not re.search(r"rad|hz|hertz", density_units.lower()):
        raise DataError(f'{where}: frequencies in "{frequency_units}" and a density in "{density_units}" leave open whether it is per '
                        'radian per second or per hertz, a factor of 6.28; write "m2 s rad-1" or "m2 Hz-1".')


def density_unit(text: str) -> str:
    """A density's unit in a spelling that UDUNITS reads: "m^2/Hz/deg" becomes "m2 s degree-1"."""
    out = text.strip().replace("**", "").replace("^", "").replace("*", " ")
    out = out.replace("/Hz", " s").replace("/hz", " s").replace("Hz-1", "s")
    for word in ("degrees", "degree", "deg"):
        out = out.replace(f"/{word}", " degree-1").replace(f"{word}-1", "degree-1")
    return out.replace("/radian", " rad-1").replace("/rad", " rad-1").replace("m2s", "m2 s")


DENSITY_NAMES = {"sea_surface_wave_variance_spectral_density": 1, "sea_surface_wave_directional_variance_spectral_density": 2}
FREQUENCY_NAMES = ("wave_frequency", "sea_surface_wave_frequency")
FROM_NAMES = ("sea_surface_wave_from_direction", "sea_surface_wave_mean_from_direction")
TO_NAMES = ("sea_surface_wave_to_direction", "sea_surface_wave_mean_to_direction")
HEIGHT_NAMES = ("sea_surface_wave_significant_height",)


def _read_netcdf(file: Path) -> RawSpectra:
    """A spectrum in a netCDF file that names its variables by CF standard names."""
    import netCDF4

    try:
        data = netCDF4.Dataset(str(file))
    except OSError as error:
        raise DataError(f"{file}: not readable as netCDF ({error.strerror or error}); is the copy complete? Fetch it "
                        "again.") from None
    with data:
        try:
            return _from_dataset(data, file)
        except (RuntimeError, OSError) as error:
            raise DataError(f"{file}: damaged netCDF file ({error}); fetch it again.") from None


def _named(data: Any, *names: str) -> Any:
    """The first variable with one of the standard names, or None."""
    return next((variable for variable in data.variables.values() if getattr(variable, "standard_name", "") in names), None)


def _values(variable: Any) -> np.ndarray:
    return np.ma.filled(np.ma.asarray(variable[...]).astype(np.float64), np.nan)


def _from_dataset(data: Any, file: Path) -> RawSpectra:
    variable = _named(data, *reversed(DENSITY_NAMES))
    if variable is None:
        raise DataError(f"{file}: no variable has the standard name {' or '.join(DENSITY_NAMES)}; "
                        f"add that attribute to the variable of the density, or "
                        "give the "
                        f"spectrum as a two-column text file. The file has: {', '.join(data.variables) or 'nothing'}.")
    name = f'{file.name}, variable "{variable.name}"'
    frequency_axis = _axis(data, variable, FREQUENCY_NAMES, ("frequency", "freq", "f", "wave_frequency"))
    if frequency_axis is None:
        raise DataError(f"{name}: no frequency axis among its dimensions {', '.join(variable.dimensions)}; give the "
                        "coordinate the "
                        f"standard name {FREQUENCY_NAMES[0]}.")
    units_text = str(getattr(frequency_axis, "units", "Hz"))
    factor = frequency_factor(units_text, f'{file.name}, variable "{frequency_axis.name}"')
    frequency = _values(frequency_axis) * factor
    direction_axis = _axis(data, variable, FROM_NAMES + TO_NAMES, ("direction", "dir", "theta"))
    both = DENSITY_NAMES.get(getattr(variable, "standard_name", ""), 1) == 2
    if both and direction_axis is None:
        raise DataError(f"{name}: no direction axis; give its coordinate the standard name {FROM_NAMES[0]} or {TO_NAMES[0]}.")
    axes = [frequency_axis.dimensions[0], *([direction_axis.dimensions[0]] if both else [])]
    density = _arranged(variable, axes, file)
    refuse_unclear_angular(units_text, str(getattr(variable, "units", "")), both, name)
    unit = density_unit(str(getattr(variable, "units", "")))
    per_radian_per_second = "rad" in units_text.lower() and "rad" in unit and not both
    radians = 2 * np.pi if per_radian_per_second else 1.0
    bounds = _bounds(data, frequency_axis, factor)
    if not both:
        density = density * conversion(unit.replace("rad-1", ""), "m2 s", name)[0] * radians
        return _with_moments(data, file, RawSpectra(frequency, density, bandwidth=bounds), axes[0])
    assert direction_axis is not None
    compass = _values(direction_axis) * conversion(str(getattr(direction_axis, "units", "degree")), "degree", name)[0]
    repeated = compass.size > 1 and abs(abs(compass[-1] - compass[0]) - 360.0) < 1e-6
    if repeated:
        compass, density = compass[:-1], density[..., :-1]
    density = density * _per_radian(data, unit, density, frequency, compass, bounds, name)
    return RawSpectra(frequency, density, directions=compass, coming_from=_comes_from(direction_axis, file), bandwidth=bounds)


def _axis(data: Any, variable: Any, standard_names: tuple[str, ...], names: tuple[str, ...]) -> Any:
    """The coordinate of `variable` that carries one of the standard names, or failing that one of the plain names."""
    candidates = [other for other in data.variables.values()
                  if len(other.dimensions) == 1 and other.dimensions[0] in variable.dimensions]
    for other in candidates:
        if getattr(other, "standard_name", "") in standard_names:
            return other
    return next((other for other in candidates if other.name.lower() in names), None)


def _arranged(variable: Any, axes: list[str], file: Path) -> np.ndarray:
    """Values as (all other dimensions flattened, *axes). Raises DataError where the others are more than times."""
    others = [name for name in variable.dimensions if name not in axes]
    long = [name for name in others if variable.shape[variable.dimensions.index(name)] > 1]
    if len(long) > 1:
        raise DataError(f'{file}: variable "{variable.name}" runs over {", ".join(long)}; cut out one place, leaving only times.')
    order = [variable.dimensions.index(name) for name in [*others, *axes]]
    values = _values(variable).transpose(order)
    return values.reshape(-1, *values.shape[len(others):])


def _comes_from(axis: Any, file: Path) -> bool:
    text = f"{getattr(axis, 'standard_name', '')} {getattr(axis, 'long_name', '')}".lower()
    if "from" in text:
        return True
    if "to_direction" in text or "towards" in text or " to " in f" {text} ":
        return False
    raise DataError(f'{file}: variable "{axis.name}" does not say whether waves come from or go to these directions; give '
                    'it the standard '
                    f"name {FROM_NAMES[0]} or {TO_NAMES[0]}.")


def _bounds(data: Any, axis: Any, factor: float) -> np.ndarray | None:
    """Band widths [Hz] from the frequency axis's CF bounds, or None."""
    name = getattr(axis, "bounds", "")
    if name not in data.variables or data.variables[name].shape != (*axis.shape, 2):
        return None
    return np.abs(np.diff(_values(data.variables[name]), axis=1)[:, 0]) * factor


def _per_radian(data: Any, unit: str, density: np.ndarray, frequency: np.ndarray, compass: np.ndarray, bounds: np.ndarray | None,
                name: str) -> float:
    """Factor from the stored density to m2 s rad-1, held against the wave height that the file states, where it states one.

    The unit decides between per radian and per degree; where it says neither, the wave height does. Raises DataError where
    unit and wave height contradict each other by the factor 57.3 between the two, or where nothing decides.
    """
    stated = "rad" in unit or "degree" in unit
    factor = conversion(unit, "m2 s rad-1", name)[0] if stated else conversion(unit, "m2 s", name)[0]
    heights = _named(data, *HEIGHT_NAMES)
    measured = np.nan if heights is None else float(np.sqrt(np.nanmean(_values(heights) ** 2)))
    if not measured > 0:
        if stated:
            return float(factor)
        raise DataError(f'{name}: unit "{unit}" does not say whether the density is per radian or per degree, and no wave '
                        'height tells; '
                        'write "m2 s rad-1" or "m2 s degree-1" as its unit.')
    order = np.argsort(frequency)
    mean = np.nanmean(density, axis=0)[order] @ direction_weights(compass) * factor
    mean = np.nan_to_num(mean)
    variance = float((mean * bounds[order]).sum() if bounds is not None else np.trapezoid(mean, frequency[order]))
    ratio = variance / (measured**2 / 16)
    other = np.degrees(1.0)
    for correction in (1.0,) if stated else (1.0, other):
        if 1 / 3 < ratio * correction < 3:
            return float(factor * correction)
    raise DataError(f"{name}: integrated over frequency and direction it makes a wave height of "
                    f"{4 * np.sqrt(variance):.3g} m where the file "
                    f'states {measured:.3g} m; is the density per degree or per radian? Its unit is "{unit}".')


def _with_moments(data: Any, file: Path, raw: RawSpectra, frequency_dimension: str) -> RawSpectra:
    """Adds mean direction and r1 by frequency where the file has them."""
    direction = next((v for v in data.variables.values() if getattr(v, "standard_name", "") in FROM_NAMES + TO_NAMES
                      and frequency_dimension in v.dimensions), None)
    if direction is None:
        return raw
    factor = conversion(str(getattr(direction, "units", "degree")), "degree", f'{file.name}, variable "{direction.name}"')[0]
    angles = _arranged(direction, [frequency_dimension], file) * factor
    spread = next((v for v in data.variables.values()
                   if v.name.lower() in ("r1", "wave_r1") and frequency_dimension in v.dimensions), None)
    r1 = None if spread is None else _arranged(spread, [frequency_dimension], file)
    shape = raw.density.shape
    if angles.shape != shape or (r1 is not None and r1.shape != shape):
        raise DataError(f'{file}: "{direction.name}" and the density differ in shape ({angles.shape} and {shape}); cut '
                        'them to the same times.')
    return RawSpectra(raw.frequency, raw.density, mean_direction=angles, r1=r1, coming_from=_comes_from(direction, file),
                      bandwidth=raw.bandwidth)
