"""[[instrument]] of a recipe: a virtual instrument in the simulated water.

No default names a product. Noise figures differ between makes and settings: take them from the maker's data sheet or from the
noise floor of the record.
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from lespost.settings import InUnit, Settings

Angle = Annotated[float, InUnit("degree"), Field(ge=-360, le=360)]
Length = Annotated[float, InUnit("m"), Field(gt=0)]


class InstrumentSettings(Settings):
    """[[instrument]]: a four-beam Doppler profiler on a mooring (more kinds will follow)."""

    name: str = Field(pattern=r"^[A-Za-z0-9][A-Za-z0-9_-]{0,59}$", description="Name in tables and of the samples file.")
    kind: Literal["doppler_profiler"] = Field("doppler_profiler", description="Kind of instrument.")
    position: tuple[float, float] | None = Field(
        None, description="x, y of the head [m]; default: `deployments` positions spread over the domain.")
    deployments: Annotated[int, Field(ge=1, le=1000)] = Field(
        16, description="Virtual deployments at positions spread over the periodic domain; their scatter is what chance does to one.")
    depth: Annotated[float, InUnit("m"), Field(ge=0)] = Field(description="Depth of the head.")
    looking: Literal["up", "down"] = Field("up", description="Direction in which the beams point.")
    beam_angle: Annotated[float, InUnit("degree"), Field(gt=0, lt=60)] = Field(20.0, description="Beams from the axis.")
    heading: Angle = Field(0.0, description="Direction of beam 1 in the horizontal, degrees counter-clockwise from +x.")
    pitch: Annotated[float, InUnit("degree"), Field(gt=-60, lt=60)] = Field(
        0.0, description="Tilt of the axis towards beam 1, degrees.")
    roll: Annotated[float, InUnit("degree"), Field(gt=-60, lt=60)] = Field(
        0.0, description="Tilt of the axis towards beam 3, degrees.")
    bin_mapping: bool = Field(True, description="Interpolate the beams of a tilted instrument to common depths before combining.")
    blank: Annotated[float, InUnit("m"), Field(ge=0)] = Field(1.0, description="Blanking distance before the first cell.")
    cell_length: Length = Field(1.0, description="Vertical length of a range cell of an untilted instrument.")
    pulse_length: Length | None = Field(None, description="Vertical length of the pulse; default: that of the cell.")
    cells: Annotated[int, Field(ge=1, le=1000)] | None = Field(
        None, description="Number of cells; default: as many as stay clear of side lobes and of the domain's boundaries.")
    beam_width: Annotated[float, InUnit("degree"), Field(ge=0, le=20)] = Field(
        0.0, description="One-way half-power width of a beam; 0: a line. Seldom matters: the spread between beams is far wider.")
    ping_interval: Annotated[float, InUnit("s"), Field(gt=0)] = Field(1.0, description="Time between pings.")
    averaging_interval: Annotated[float, InUnit("s"), Field(gt=0)] = Field(60.0, description="Length of an ensemble of pings.")
    noise: Annotated[float, InUnit("m s-1"), Field(ge=0, le=5)] = Field(
        0.05, description="Standard deviation of the noise of one ping along a beam.")
    ambiguity_velocity: Annotated[float, InUnit("m s-1"), Field(gt=0)] | None = Field(
        None, description="Beam velocities beyond plus or minus this wrap around; default: none do.")
    quantisation: Annotated[float, InUnit("m s-1"), Field(ge=0)] = Field(0.001, description="Step of the recorded velocities; 0: none.")
    time_mode: Literal["auto", "frozen", "interpolated"] = Field(
        "auto", description="Between snapshots: frozen (the pattern of the nearest snapshot, carried by the mean flow), interpolated "
        "(linear in time; only where snapshots resolve the eddies), or auto.")
    advection: tuple[float, float] | None = Field(
        None, description="Velocity that carries a frozen pattern [m s-1]; default: the mean flow of each snapshot at each depth.")
    interpolation: Literal["cubic", "linear"] = Field(
        "cubic", description="Horizontal interpolation: four-point (keeps 0.96 of the variance at 6 cells a wavelength) or two-point.")
    seed: Annotated[int, Field(ge=0)] = Field(0, description="Seed of positions and noise.")

    @model_validator(mode="after")
    def _consistent(self) -> InstrumentSettings:
        if self.averaging_interval < self.ping_interval:
            raise ValueError("averaging_interval is shorter than ping_interval: an ensemble must hold at least one ping")
        if self.position is not None and self.deployments != 16:
            raise ValueError("give either position (one deployment) or deployments (spread over the domain)")
        return self
