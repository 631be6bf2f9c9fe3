"""The [forcing] and [stokes] sections of a recipe: what drives the run at the surface.

Keys left out are taken from what the files state themselves (`Hint`s), and what nobody states stays unknown.
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from lespost.settings import InUnit, Settings

BulkFormula = Literal["large_yeager_2009", "large_yeager_2004", "large_pond_1981", "coare_3_5"]
WaterType = Literal["I", "IA", "IB", "II", "III"]
Direction = Annotated[float, InUnit("degree"), Field(ge=-360, le=360)]


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

    @model_validator(mode="after")
    def _one_of_each(self) -> ForcingSettings:
        for group in (("friction_velocity", "stress", "wind_speed"), ("stress_direction", "wind_from_compass"),
                      ("surface_heat_flux", "surface_temperature_flux"), ("latitude", "coriolis_parameter")):
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
                  "theory_wave"] = Field(
        "auto", description="How the profile is made. auto: what the keys below or the files state; none: no waves; theory_wave: "
        "from the wind alone (Li et al. 2017).")
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
    water_depth: Annotated[float, InUnit("m"), Field(gt=0)] | None = Field(
        None, description="Water depth, where it is not deep for the waves.")
    profile_z: tuple[float, ...] = Field((), description="Heights (m, negative) of a profile given by hand.")
    profile_u: tuple[float, ...] = Field((), description="Drift along x at `profile_z`, m s-1.")
    profile_v: tuple[float, ...] = Field((), description="Drift along y at `profile_z`, m s-1.")
    spectrum_file: str = Field("", description="Wave spectrum file, relative to the recipe.")
    spectral_tail: bool = Field(True, description="Add an f^-5 tail beyond the last frequency of the spectrum.")

    @model_validator(mode="after")
    def _consistent(self) -> StokesSettings:
        if self.wavelength is not None and self.wavenumber is not None:
            raise ValueError("wavelength and wavenumber say the same thing: give only one of them")
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
