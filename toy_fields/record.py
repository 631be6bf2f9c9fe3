"""An invented field record: a moored profiler in an independent realisation of a solver run, with the blemishes of a
real one. The file follows OceanSITES and CF (timeSeriesProfile) and says in its first attributes that it is invented.

The run goes on where the shipped snapshots stop sampling it, so that a record is long enough for statistics.
"""

from __future__ import annotations

import os
from collections.abc import Callable
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np

from toy_fields.errors import ToyRequestError
from toy_fields.profiler import BeamSampler, Profiler
from toy_fields.solver.output import attributes_of
from toy_fields.solver.run import Case, start

GOOD, CORRECTABLE, BAD, MISSING = 1, 3, 4, 9
_FLAG_VALUES = np.array([0, 1, 2, 3, 4, 7, 8, 9], dtype=np.int8)
_FLAG_MEANINGS = (
    "unknown good_data probably_good_data potentially_correctable_bad_data bad_data nominal_value interpolated_value "
    "missing_value"
)
_FILL = np.float32(99999.0)
_EPOCH = datetime(1950, 1, 1, tzinfo=UTC)
#: A date that nobody can have measured at, when the record was invented.
RUN_START = datetime(2040, 3, 1, tzinfo=UTC)


@dataclass(frozen=True)
class RecordPlan:
    """When and how the run is sampled: start and end [s of the run], ensemble and ping_interval [s], standard deviation
    of the noise of one beam in one ensemble [m s-1], share of spikes, one gap (start, length) [s]; seed of the noise."""

    begin: float = 16200.0
    end: float = 30600.0
    ensemble: float = 60.0
    ping_interval: float = 15.0
    beam_noise: float = 0.0015
    spike_share: float = 0.003
    gap: tuple[float, float] = (23400.0, 840.0)
    seed: int = 71

    def __post_init__(self) -> None:
        if self.end <= self.begin or self.ensemble < self.ping_interval or self.ping_interval <= 0:
            raise ToyRequestError("record: the end must be after the beginning, and an ensemble hold a ping or more.")


@dataclass(frozen=True)
class Recorded:
    """times [s of the run] at ensemble centres (time,), beams (4, time, depth) [m s-1], flags (time, depth)."""

    times: np.ndarray
    beams: np.ndarray
    flags: np.ndarray


def sample_run(
    case: Case, profiler: Profiler, plan: RecordPlan, threads: int = 1,
    progress: Callable[[float, int], None] | None = None,
) -> Recorded:
    """Runs the case and samples it; the result has no noise and all flags good."""
    pings = round(plan.ensemble / plan.ping_interval)
    ensembles = int((plan.end - plan.begin) / plan.ensemble + 1e-9)
    times = plan.begin + (np.arange(ensembles) + 0.5) * plan.ensemble
    stepper = start(replace(case, output_times=(plan.end,)), threads)
    sampler = BeamSampler(case.grid, profiler)
    beams = np.zeros((4, ensembles, len(profiler.depths)))
    for n in range(ensembles):
        for ping in range(pings):
            moment = plan.begin + n * plan.ensemble + (ping + 0.5) * plan.ping_interval
            while stepper.time < moment - 1e-6:
                stepper.step(moment - stepper.time)
                if progress is not None:
                    progress(stepper.time, stepper.steps)
            beams[:, n] += sampler.beams(stepper.state) / pings
    return Recorded(times, beams, np.full(beams.shape[1:], GOOD, dtype=np.int8))


def blemish(recorded: Recorded, profiler: Profiler, plan: RecordPlan) -> Recorded:
    """The record with noise, side-lobe contamination near the surface, spikes and a gap, each flagged."""
    random = np.random.default_rng(plan.seed)
    beams = recorded.beams + plan.beam_noise * random.standard_normal(recorded.beams.shape)
    flags = recorded.flags.copy()
    shallow = profiler.depths < profiler.contaminated_depth
    # The surface seen through the side lobes is almost at rest along a slanted beam: velocities come out too low.
    beams[:, :, shallow] = 0.4 * beams[:, :, shallow] + 3 * plan.beam_noise * random.standard_normal(
        (4, len(recorded.times), int(shallow.sum()))
    )
    flags[:, shallow] = BAD
    spikes = random.random(flags.shape) < plan.spike_share
    beams[0][spikes] += random.choice([-0.25, 0.25], size=int(spikes.sum()))
    flags[spikes & (flags == GOOD)] = CORRECTABLE
    gap = (recorded.times >= plan.gap[0]) & (recorded.times < plan.gap[0] + plan.gap[1])
    flags[gap] = MISSING
    return Recorded(recorded.times, beams, flags)


def write_record(
    recorded: Recorded, case: Case, profiler: Profiler, plan: RecordPlan, path: Path, command: str, latitude: float
) -> None:
    """Writes the record as an OceanSITES-style netCDF-4 file; +x of the run is east, +y north.

    The file has the same bytes whenever it is written from the same numbers: it carries no date of making.
    """
    import netCDF4

    moments = [RUN_START + timedelta(seconds=float(t)) for t in recorded.times]
    days = np.array([(moment - _EPOCH) / timedelta(days=1) for moment in moments])
    missing = recorded.flags == MISSING
    u, v, w, error = profiler.velocities(recorded.beams)
    partial = path.with_name(f".{path.name}.part")
    with netCDF4.Dataset(partial, "w", format="NETCDF4") as file:
        file.setncatts(_globals(recorded, case, profiler, plan, command, moments))
        for name, size in (("TIME", len(days)), ("DEPTH", len(profiler.depths)), ("LATITUDE", 1), ("LONGITUDE", 1)):
            file.createDimension(name, size)
        _axis(file, "TIME", days, standard_name="time", long_name="time of the ensemble's centre", axis="T",
              units="days since 1950-01-01T00:00:00Z", calendar="standard", valid_min=0.0, valid_max=90000.0)
        _axis(file, "DEPTH", profiler.depths, standard_name="depth", long_name="depth of the cell's centre",
              units="m", positive="down", axis="Z", reference="sea_level",
              coordinate_reference_frame="urn:ogc:def:crs:EPSG::5831")
        _axis(file, "LATITUDE", np.array([latitude]), standard_name="latitude", long_name="invented latitude",
              units="degrees_north", axis="Y", valid_min=-90.0, valid_max=90.0)
        _axis(file, "LONGITUDE", np.array([0.0]), standard_name="longitude", long_name="invented longitude",
              units="degrees_east", axis="X", valid_min=-180.0, valid_max=180.0)
        indicative = "indicative_error_from_multibeam_acoustic_doppler_velocity_profiler_in_sea_water"
        for name, values, standard_name, long_name in (
            ("UCUR", u, "eastward_sea_water_velocity", "eastward velocity (+x of the run)"),
            ("VCUR", v, "northward_sea_water_velocity", "northward velocity (+y of the run)"),
            ("WCUR", w, "upward_sea_water_velocity", "upward velocity"),
            ("ECUR", error, indicative, "error velocity"),
        ):
            _velocity(file, name, values, missing, standard_name=standard_name, long_name=long_name,
                      ancillary_variables=f"{name}_QC", cell_methods=f"time: mean (interval: {plan.ping_interval:g} s)")
            _flags(file, name, long_name, recorded.flags)
        for n in range(4):
            _velocity(file, f"BEAM_{n + 1}", recorded.beams[n], missing,
                      long_name=f"velocity along beam {n + 1}, positive away from the head")
    os.replace(partial, path)


def _globals(
    recorded: Recorded, case: Case, profiler: Profiler, plan: RecordPlan, command: str, moments: list[datetime]
) -> dict[str, str | float | int]:
    forcing = attributes_of(case)
    kept = (
        "friction_velocity", "stress_direction", "surface_stokes_drift", "stokes_direction", "stokes_wavenumber",
        "surface_heat_flux", "coriolis_parameter", "thermal_expansion", "gravity", "reference_density", "specific_heat",
        "initial_mixed_layer_depth", "forcing_units", "seed",
    )
    half = timedelta(seconds=plan.ensemble / 2)
    return {
        "title": "INVENTED DATA: a moored Doppler profiler in simulated turbulence",
        "summary": "INVENTED. No instrument was in the water: the velocities were sampled from a small large-eddy "
        "simulation (an independent realisation of the case named in case), with noise, side-lobe contamination, spikes "
        "and a gap added and flagged. Never use these data as observations.",
        "comment": "Orbital velocities of the waves are not in the data. +x of the simulation is east, +y north.",
        "case": case.name,
        "command": command,
        "Conventions": "CF-1.8, OceanSITES-1.4, ACDD-1.3",
        "featureType": "timeSeriesProfile",
        "cdm_data_type": "Station",
        "data_type": "OceanSITES time-series data",
        "data_mode": "D",
        "site_code": "INVENTED",
        "platform_code": "INVENTED-1",
        "id": "OS_INVENTED-1_204003_D_PROFILER",
        "naming_authority": "invented",
        "array": "",
        "network": "",
        "source": "simulation",
        "institution": "none: invented data",
        "time_coverage_start": (moments[0] - half).strftime("%Y-%m-%dT%H:%M:%SZ"),
        "time_coverage_end": (moments[-1] + half).strftime("%Y-%m-%dT%H:%M:%SZ"),
        "run_start": RUN_START.strftime("%Y-%m-%dT%H:%M:%SZ"),
        "geospatial_vertical_min": float(profiler.depths[0]),
        "geospatial_vertical_max": float(profiler.depths[-1]),
        "instrument": "invented four-beam Doppler profiler, looking up",
        "instrument_depth": profiler.head_depth,
        "beam_angle": profiler.beam_angle,
        "cell_length": profiler.cell_length,
        "averaging_interval": plan.ensemble,
        "ping_interval": plan.ping_interval,
        "beam_noise_standard_deviation": plan.beam_noise,
        "license": "CC0-1.0",
        **{name: forcing[name] for name in kept if name in forcing},
    }


def _axis(file, name: str, values: np.ndarray, **attributes: str | float) -> None:  # type: ignore[no-untyped-def]
    variable = file.createVariable(name, "f8", (name,))
    variable.setncatts(attributes)
    variable[:] = values


def _velocity(file, name: str, values: np.ndarray, missing: np.ndarray, **attributes: str) -> None:  # type: ignore[no-untyped-def]
    variable = file.createVariable(
        name, "f4", ("TIME", "DEPTH", "LATITUDE", "LONGITUDE"), fill_value=_FILL, zlib=True, shuffle=True
    )
    variable.setncatts({"units": "m s-1", "valid_min": np.float32(-5), "valid_max": np.float32(5), **attributes})
    # 0.1 mm/s is what such instruments store.
    stored = np.round(np.where(missing, _FILL, values), 4).astype(np.float32)
    variable[:] = stored[:, :, None, None]


def _flags(file, name: str, long_name: str, flags: np.ndarray) -> None:  # type: ignore[no-untyped-def]
    variable = file.createVariable(
        f"{name}_QC", "i1", ("TIME", "DEPTH", "LATITUDE", "LONGITUDE"), fill_value=np.int8(-128), zlib=True
    )
    variable.setncatts(
        {
            "long_name": f"quality flag of {long_name}", "conventions": "OceanSITES reference table 2",
            "flag_values": _FLAG_VALUES, "flag_meanings": _FLAG_MEANINGS,
            "valid_min": np.int8(0), "valid_max": np.int8(9),
        }
    )
    variable[:] = flags[:, :, None, None]
