"""[[instrument]] of a recipe: a virtual instrument in the simulated water.

No default names a product. Noise figures differ between makes and modes: take them from the maker's data sheet or from the
noise floor of the record. Where beams point is in geometry.py, what happens between snapshots in timing.py.
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from lespost.settings import InUnit, Settings

Angle = Annotated[float, InUnit("degree"), Field(ge=-360, le=360)]
Interpolation = Literal["linear", "cubic", "quintic", "spectral"]
Length = Annotated[float, InUnit("m"), Field(gt=0)]

#: Virtual deployments where the recipe states neither their number nor a position.
DEPLOYMENTS = 16


class InstrumentSettings(Settings):
    """[[instrument]]: a four-beam Doppler profiler on a mooring (more kinds will follow)."""

    name: str = Field(pattern=r"^[A-Za-z0-9][A-Za-z0-9_-]{0,59}$", description="Name in tables and of the samples file.")
    kind: Literal["doppler_profiler"] = Field("doppler_profiler", description="Kind of instrument.")
    position: tuple[float, float] | None = Field(
        None, description="x, y of the head [m]: one deployment; default: `deployments` positions spread over the domain.")
    deployments: Annotated[int, Field(ge=1, le=10000)] | None = Field(
        None, description=f"Virtual deployments spread over the periodic domain ({DEPLOYMENTS} by default); their scatter is what "
        "chance does to one.")
    depth: Annotated[float, InUnit("m"), Field(ge=0)] = Field(description="Depth of the head.")
    looking: Literal["up", "down"] = Field("up", description="Direction in which the beams point.")
    beam_angle: Annotated[float, InUnit("degree"), Field(gt=0, lt=60)] = Field(20.0, description="Beams from the axis.")
    beam_azimuths: tuple[Angle, Angle, Angle, Angle] = Field(
        (0.0, 180.0, 90.0, 270.0), description="Directions of the four beams about the axis, degrees counter-clockwise from the "
        "heading, seen from above; beams 1, 2 and 3, 4 are the opposing pairs.")
    heading: Angle = Field(0.0, description="Direction of the instrument's own x axis (beam 1 by default) in the horizontal, "
                           "degrees counter-clockwise from +x of the simulation.")
    pitch: Annotated[float, InUnit("degree"), Field(gt=-60, lt=60)] = Field(
        0.0, description="Tilt of the axis towards the heading.")
    roll: Annotated[float, InUnit("degree"), Field(gt=-60, lt=60)] = Field(
        0.0, description="Tilt of the axis to the left of the heading.")
    bin_mapping: bool = Field(True, description="Interpolate the beams of a tilted instrument to common depths before combining.")
    blank: Annotated[float, InUnit("m"), Field(ge=0)] = Field(1.0, description="Blanking distance before the first cell.")
    cell_length: Length = Field(1.0, description="Vertical length of a range cell of an untilted instrument.")
    pulse_length: Length | None = Field(None, description="Vertical length of the pulse; default: that of the cell.")
    cells: Annotated[int, Field(ge=1, le=1000)] | None = Field(
        None, description="Number of cells; default: as many as stay clear of the boundary and, where they count, of side lobes.")
    side_lobes: bool = Field(
        True, description="Side lobes spoil the cells next to the boundary, D (1 - cos(angle + tilt)) + 1.5 cells: flagged as failed, "
        "left out where the number of cells is automatic.")
    repeated_water: Literal["refuse", "label"] = Field(
        "refuse", description="What to do where the beams spread as wide as the periodic domain, so that they meet the same water twice.")
    beam_width: Annotated[float, InUnit("degree"), Field(ge=0, le=20)] = Field(
        0.0, description="One-way half-power full width of a beam; 0: a line. Seldom matters: the spread between beams is far wider.")
    ping_interval: Annotated[float, InUnit("s"), Field(gt=0)] = Field(1.0, description="Time between pings.")
    averaging_interval: Annotated[float, InUnit("s"), Field(gt=0)] = Field(60.0, description="Length of an ensemble of pings.")
    noise: Annotated[float, InUnit("m s-1"), Field(ge=0, le=5)] = Field(
        0.05, description="Standard deviation of the noise of one ping; white in time, between cells and between beams.")
    noise_of: Literal["beam", "horizontal"] = Field(
        "beam", description="Whether `noise` is that of a velocity along a beam or of a horizontal component (as data sheets often "
        "state it), which is larger by 1/(sqrt(2) sin(beam_angle)).")
    ambiguity_velocity: Annotated[float, InUnit("m s-1"), Field(gt=0)] | None = Field(
        None, description="Velocities of a ping along a beam beyond plus or minus this wrap around; default: none do.")
    quantisation: Annotated[float, InUnit("m s-1"), Field(ge=0)] = Field(
        0.001, description="Step of the recorded ensemble velocities along the beams; 0: none.")
    time_mode: Literal["auto", "frozen", "interpolated"] = Field(
        "auto", description="Between snapshots: frozen (the pattern of the nearest snapshot, carried past by the mean flow), "
        "interpolated (linear in time; only where snapshots resolve the eddies), or auto: whichever the measured decorrelation allows.")
    advection: tuple[float, float] | None = Field(
        None, description="Velocity u, v [m s-1] that carries a frozen pattern; default: the mean flow over the depths of the cells.")
    interpolation: Interpolation = Field(
        "cubic", description="Horizontal interpolation: linear (two points in each direction), cubic (four), quintic (six) or spectral "
        "(all Fourier modes; loses nothing, slow and large in memory beyond 256 x 256 points). Of the variance of a wave of 6 cells "
        "along the grid they keep 0.83, 0.97, 0.99 and 1.")
    seed: Annotated[int, Field(ge=0)] = Field(0, description="Seed of positions and noise.")

    @model_validator(mode="after")
    def _consistent(self) -> InstrumentSettings:
        if self.averaging_interval < self.ping_interval:
            raise ValueError("averaging_interval is shorter than ping_interval: an ensemble must hold at least one ping")
        if self.position is not None and self.deployments not in (None, 1):
            raise ValueError("give either position (one deployment) or deployments (spread over the domain)")
        turns = sorted(azimuth % 360.0 for azimuth in self.beam_azimuths)
        gaps = [(after - before) % 360.0 for before, after in zip(turns, turns[1:] + turns[:1], strict=True)]
        if min(gaps) < 10.0:
            raise ValueError("two of beam_azimuths lie within 10 degrees of each other: four different beams are needed")
        return self

    @property
    def pings(self) -> int:
        """Pings of an ensemble."""
        return max(1, int(self.averaging_interval / self.ping_interval + 1e-9))
