"""The [forcing] and [stokes] sections of a recipe: what drives the run at the surface.

Keys left out are taken from what the files state themselves (`Hint`s), and what nobody states stays unknown.
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BeforeValidator, Field, model_validator

from lespost.settings import InUnit, Settings

BulkFormula = Literal["large_yeager_2009", "large_yeager_2004", "large_pond_1981", "coare_3_5"]
WaterType = Literal["I", "IA", "IB", "II", "III"]
#: Keys of which at most one may be given, whether in the section or in its table over time.
EXCLUSIVE = (("friction_velocity", "stress", "wind_speed"), ("stress_direction", "wind_from_compass"),
             ("surface_heat_flux", "surface_temperature_flux"), ("latitude", "coriolis_parameter"))

_COMPASS_POINTS = "N NNE NE ENE E ESE SE SSE S SSW SW WSW W WNW NW NNW".split()


def _no_compass_words(value: object) -> object:
    """A compass word says neither its sense nor where +x points: refused, with the number it would have."""
    if isinstance(value, str) and value.strip().upper() in _COMPASS_POINTS:
        number = 22.5 * _COMPASS_POINTS.index(value.strip().upper())
        raise ValueError(
            f"give degrees counter-clockwise from +x (towards), or what it comes from under a key of its own "
            f"(..._from_compass = {number:g}) with [forcing].x_axis_compass_bearing"
        )
    return value


Direction = Annotated[float, InUnit("degree"), Field(ge=-360, le=360), BeforeValidator(_no_compass_words)]
Compass = Annotated[float, InUnit("degree"), Field(ge=0, le=360)]


class ForcingSettings(Settings):
    """[forcing]: wind, heat, fresh water, rotation and the properties of the water."""

    friction_velocity: Annotated[float, InUnit("m s-1"), Field(ge=0, le=0.5)] | None = Field(
        None, description="Friction velocity in the water, (stress / density)^(1/2).")
    stress: Annotated[float, InUnit("N m-2"), Field(ge=0, le=20)] | None = Field(
        None, description="Wind stress on the water.")
    wind_speed: Annotated[float, InUnit("m s-1"), Field(ge=0, le=100)] | None = Field(
        None, description="Neutral wind speed at 10 m; the stress follows from `bulk_formula`.")
    bulk_formula: BulkFormula = Field("large_yeager_2009", description="Drag law for `wind_speed`.")
    air_density: Annotated[float, InUnit("kg m-3"), Field(gt=0.5, lt=2)] | None = Field(
        None, description="Density of air for `wind_speed`; default 1.22.")
    stress_direction: Direction | None = Field(
        None, description="Direction towards which the stress acts, degrees counter-clockwise from +x.")
    wind_from_compass: Annotated[float, InUnit("degree"), Field(ge=0, le=360)] | None = Field(
        None, description="Compass direction the wind comes from, degrees clockwise from north; needs "
        "`x_axis_compass_bearing`.")
    x_axis_compass_bearing: Annotated[float, InUnit("degree"), Field(ge=0, le=360)] | None = Field(
        None, description="Compass bearing of the simulation's +x axis (90: x points east).")
    surface_heat_flux: Annotated[float, InUnit("W m-2")] | None = Field(
        None, description="Net heat flux into the ocean without penetrating sunlight; cooling is negative.")
    surface_temperature_flux: Annotated[float, InUnit("K m s-1")] | None = Field(
        None, description="Kinematic temperature flux, upward positive, instead of `surface_heat_flux`.")
    shortwave: Annotated[float, InUnit("W m-2"), Field(ge=0, le=1500)] | None = Field(
        None, description="Sunlight entering the water; its part absorbed in the layer counts in the convective scales.")
    water_type: WaterType = Field("I", description="Optical water type for `shortwave` (Paulson & Simpson 1977).")
    evaporation_minus_precipitation: Annotated[float, InUnit("m s-1"), Field(ge=-1e-4, le=1e-4)] = Field(
        0.0, description="Evaporation minus precipitation, metres of water per second.")
    temperature: Annotated[float, InUnit("degC"), Field(ge=-3, le=45)] | None = Field(
        None, description="Surface temperature, for the properties of sea water.")
    salinity: Annotated[float, InUnit("g kg-1"), Field(ge=0, le=45)] = Field(
        35.0, description="Absolute salinity, for the properties of sea water.")
    thermal_expansion: Annotated[float, InUnit("K-1"), Field(gt=-1e-3, lt=1e-3)] | None = Field(
        None, description="Thermal expansion coefficient; default: what the files state, else TEOS-10 at `temperature`.")
    latitude: Annotated[float, InUnit("degree"), Field(ge=-90, le=90)] | None = Field(None, description="Latitude.")
    coriolis_parameter: Annotated[float, InUnit("s-1"), Field(ge=-2e-4, le=2e-4)] | None = Field(
        None, description="Coriolis parameter, instead of `latitude`.")
    gravity: Annotated[float, InUnit("m s-2"), Field(gt=0, lt=30)] | None = Field(None, description="Acceleration of gravity.")
    reference_density: Annotated[float, InUnit("kg m-3"), Field(gt=900, lt=1200)] | None = Field(
        None, description="Reference density of the water.")
    specific_heat: Annotated[float, InUnit("J kg-1 K-1"), Field(gt=1000, lt=6000)] | None = Field(
        None, description="Specific heat of the water.")
    mixed_layer_depth: Annotated[float, InUnit("m"), Field(gt=0)] | None = Field(
        None, description="Boundary-layer depth h to use instead of the one found in the profiles.")
    series: str = Field(
        "", description='CSV table of forcing over time, relative to the recipe: a column "time [s]" of run time, and columns named '
        'like the keys of this section with their units, e.g. "wind_speed [m s-1]"; also stokes_surface_speed, stokes_direction.')
    series_start: str = Field(
        "", description="Calendar time (ISO 8601) of run time zero, where the times of the table are calendar times.")

    @model_validator(mode="after")
    def _one_of_each(self) -> ForcingSettings:
        for group in EXCLUSIVE:
            given = [name for name in group if getattr(self, name) is not None]
            if len(given) > 1:
                raise ValueError(f"{' and '.join(given)} say the same thing: give only one of them")
        if self.wind_from_compass is not None and self.x_axis_compass_bearing is None:
            raise ValueError("wind_from_compass needs x_axis_compass_bearing (90 where +x points east)")
        if self.friction_velocity is not None and self.friction_velocity > 0.06:
            raise ValueError(
                f"friction_velocity = {self.friction_velocity:g} m s-1 would take a hurricane; did you mean a stress in N m-2? "
                "Then write stress = ... instead")
        return self


class StokesSettings(Settings):
    """[stokes]: the waves' Stokes drift."""

    kind: Literal["auto", "none", "monochromatic", "profile", "bulk_breivik_2014", "bulk_breivik_2016", "spectrum",
                  "theory_wave", "pierson_moskowitz"] = Field(
        "auto", description="How the profile is made. auto: what the keys below or the files state; none: no waves; theory_wave, "
        "pierson_moskowitz: a fully developed sea from the wind alone, with the losses of spreading (Li et al. 2017) or all in one "
        "direction.")
    surface_speed: Annotated[float, InUnit("m s-1"), Field(ge=0, le=3)] | None = Field(
        None, description="Stokes drift at the surface.")
    amplitude: Annotated[float, InUnit("m"), Field(gt=0, le=30)] | None = Field(
        None, description="Amplitude of a monochromatic wave.")
    wave_height: Annotated[float, InUnit("m"), Field(gt=0, le=40)] | None = Field(
        None, description="Significant wave height; a monochromatic wave of equal variance has amplitude H/(2 sqrt 2).")
    wavelength: Annotated[float, InUnit("m"), Field(gt=0)] | None = Field(None, description="Wavelength.")
    wavenumber: Annotated[float, InUnit("m-1"), Field(gt=0)] | None = Field(
        None, description="Wavenumber k; the drift decays as exp(2 k z).")
    transport: Annotated[float, InUnit("m2 s-1"), Field(gt=0)] | None = Field(
        None, description="Stokes transport, for the bulk profiles.")
    direction: Direction | None = Field(
        None, description="Direction towards which the drift points, degrees counter-clockwise from +x; default: the stress.")
    waves_from_compass: Compass | None = Field(
        None, description="Compass direction the waves come from, degrees clockwise from north; needs "
        "[forcing].x_axis_compass_bearing.")
    water_depth: Annotated[float, InUnit("m"), Field(gt=0)] | None = Field(
        None, description="Water depth, where it is not deep for the waves.")
    profile_z: tuple[float, ...] = Field((), description="Heights (m, negative) of a profile given by hand.")
    profile_u: tuple[float, ...] = Field((), description="Drift along x at `profile_z`, m s-1.")
    profile_v: tuple[float, ...] = Field((), description="Drift along y at `profile_z`, m s-1.")
    spectrum_file: str = Field("", description="Wave spectrum file, relative to the recipe.")
    spectral_tail: bool = Field(True, description="Add an f^-5 tail beyond the last frequency of the spectrum.")

    @model_validator(mode="after")
    def _consistent(self) -> StokesSettings:
        for one, other in (("wavelength", "wavenumber"), ("amplitude", "surface_speed"), ("direction", "waves_from_compass")):
            if getattr(self, one) is not None and getattr(self, other) is not None:
                raise ValueError(f"{one} and {other} say the same thing: give only one of them")
        if self.amplitude is not None and self.wave_height is not None and self.kind == "monochromatic":
            raise ValueError("amplitude and wave_height say the same thing: give only one of them")
        if not len(self.profile_z) == len(self.profile_u) or (self.profile_v and len(self.profile_v) != len(self.profile_z)):
            raise ValueError("profile_z, profile_u and profile_v must be equally long")
        if any(height > 0 for height in self.profile_z):
            raise ValueError("profile_z must be heights below the surface, zero or negative")
        needs = {"profile": ("profile_z",), "spectrum": ("spectrum_file",),
                 "bulk_breivik_2014": ("surface_speed", "transport"), "bulk_breivik_2016": ("surface_speed", "transport")}
        for name in needs.get(self.kind, ()):
            if not getattr(self, name):
                raise ValueError(f'kind = "{self.kind}" needs {name}')
        return self

    @property
    def decay_wavenumber(self) -> float | None:
        """k of exp(2 k z) if wavenumber or wavelength is given [m-1]."""
        if self.wavenumber is not None:
            return self.wavenumber
        return None if self.wavelength is None else 6.283185307179586 / self.wavelength
