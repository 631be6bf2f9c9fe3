"""The [fields] section of a recipe: where the files are and, where they do not say it themselves, how they are laid out.

Every key has an "auto" or empty default: the readers then use the files' own metadata, and after that the evidence of
continuity (`lespost.fields.detect`). What is written here always wins, unless the data plainly contradict it.
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from lespost.settings import InUnit, Settings

#: Names that [fields].names and [fields].units may define, besides tracer_<name>.
FIELD_NAMES = ("u", "v", "w", "theta", "salinity", "p", "tke_sgs", "nu_sgs")
COORDINATE_NAMES = ("time", "x", "y", "z", "z_face", "x_face", "y_face")

Position = Literal["auto", "centre", "low_face", "high_face"]
WPosition = Literal[
    "auto", "centre", "faces", "faces_without_surface", "faces_without_bottom", "interior_faces"
]
Scheme = Literal["auto", "spectral", "central", "staggered"]


class ScalesSettings(Settings):
    """[fields.scales]: what one unit of a non-dimensional file is worth. Present only for such files."""

    length: Annotated[float, InUnit("m"), Field(gt=0, description="Metres in one unit of length.")]
    velocity: Annotated[float, InUnit("m s-1"), Field(gt=0, description="m s-1 in one unit of velocity.")]
    time: Annotated[float, InUnit("s"), Field(gt=0)] | None = Field(
        None, description="Seconds in one unit of time; default: length / velocity."
    )
    temperature: float = Field(1.0, gt=0, description="Kelvin in one unit of temperature.")


class RawSettings(Settings):
    """[fields.raw]: how headerless binary files are arranged."""

    shape: tuple[Annotated[int, Field(ge=1)], Annotated[int, Field(ge=1)], Annotated[int, Field(ge=1)]] = Field(
        description="Sizes of the three axes of one variable at one time, as the writing program declares the array."
    )
    axes: tuple[Literal["x", "y", "z"], ...] = Field(
        (), description="The axes in the same order as `shape`, e.g. [\"x\", \"y\", \"z\"]; empty: decided by continuity."
    )
    shapes: dict[str, tuple[int, int, int]] = Field(
        {}, description="Variables of another shape, e.g. {w = [80, 80, 65]}."
    )
    order: Literal["C", "Fortran"] = Field(
        "C", description="C: the last index runs fastest in the file. Fortran: the first index runs fastest."
    )
    dtype: Literal["float32", "float64"] = Field("float32", description="Type of one number.")
    byte_order: Literal["little", "big"] = Field("little", description="Byte order of the file.")
    header_bytes: int = Field(0, ge=0, description="Bytes to skip at the start of each file.")
    record_markers: Literal[0, 4, 8] = Field(
        0, description="Bytes of each Fortran record marker (sequential unformatted files: 4, seldom 8); 0: none."
    )
    record: Literal["variable", "time", "level"] = Field(
        "variable", description="What one Fortran record holds: a variable at one time, all variables at one time, or "
        "one plane of the slowest axis."
    )
    variables: tuple[str, ...] = Field(
        (), description="Names of the variables in the order they follow each other in one file, e.g. [\"u\", \"v\", \"w\"]."
    )
    files: dict[str, str] = Field(
        {}, description="For one file per variable: its name or pattern below `path`, e.g. {u = \"u_*.bin\"}."
    )
    arrangement: Literal["times", "variables"] = Field(
        "times", description="Several times in one file: all variables of the first time come first (times), or all "
        "times of the first variable (variables)."
    )

    @model_validator(mode="after")
    def _consistent(self) -> RawSettings:
        if bool(self.variables) == bool(self.files):
            raise ValueError("give either `variables` (all in one file) or `files` (one file per variable)")
        if self.axes and sorted(self.axes) != ["x", "y", "z"]:
            raise ValueError('`axes` must hold "x", "y" and "z" once each')
        return self


class FieldsSettings(Settings):
    """[fields]: where the simulation's output is and how it is laid out."""

    path: str | tuple[str, ...] = Field(
        description="File, zarr store, folder or pattern (run_*.nc), or a list of them, relative to the recipe."
    )
    format: Literal["auto", "netcdf", "zarr", "raw"] = Field("auto", description="Kind of the files.")
    names: dict[str, str] = Field(
        {}, description="Names in the files, e.g. {u = \"vel_1\", theta = \"T\"}; also time, x, y, z, z_face."
    )
    units: dict[str, str] = Field(
        {}, description="Units where the files state none or a wrong one, e.g. {u = \"cm s-1\", z = \"cm\", time = \"h\"}."
    )
    scales: ScalesSettings | None = Field(None, description="Scales of a non-dimensional file.")
    axes: tuple[Literal["time", "z", "y", "x"], ...] = Field(
        (), description="Axes of the fields in the order of the file, e.g. [\"time\", \"z\", \"x\", \"y\"]."
    )
    z_sense: Literal["auto", "up", "depth"] = Field(
        "auto", description="Whether the file's vertical coordinate increases upward or is a depth."
    )
    surface: Literal["auto", "first", "last"] = Field(
        "auto", description="Whether the first or the last level of the file is next to the surface."
    )
    surface_height: Annotated[float, InUnit("m")] | None = Field(
        None, description="Value of the file's upward vertical coordinate at the mean surface, in m; default: 0, or its "
        "highest face where it counts from the bottom."
    )
    w_positive: Literal["up", "down"] = Field("up", description="Direction in which the file's w is positive.")
    u_position: Position = Field("auto", description="Where u sits along x; low_face: u[i] at x[i] - dx/2.")
    v_position: Position = Field("auto", description="Where v sits along y; low_face: v[j] at y[j] - dy/2.")
    w_position: WPosition = Field("auto", description="Where w sits along z.")
    horizontal_scheme: Scheme = Field("auto", description="Horizontal derivative under which the flow is solenoidal.")
    velocity_kind: Literal["auto", "eulerian", "lagrangian"] = Field(
        "auto", description="Whether u, v are Eulerian means over the waves or include the Stokes drift (Lagrangian); "
        "auto: the files' attribute velocity_kind, else eulerian."
    )
    rigid_lid: bool = Field(True, description="w vanishes at the surface; false for a model with a moving surface.")
    dx: Annotated[float, InUnit("m"), Field(gt=0)] | None = Field(None, description="Grid spacing along x.")
    dy: Annotated[float, InUnit("m"), Field(gt=0)] | None = Field(None, description="Grid spacing along y.")
    dz: Annotated[float, InUnit("m"), Field(gt=0)] | None = Field(None, description="Uniform level thickness.")
    z: tuple[float, ...] = Field((), description="Heights of the cell centres in m (z <= 0), in the order of the file.")
    z_face: tuple[float, ...] = Field((), description="Heights of the nz + 1 faces in m (z <= 0), in the order of the file.")
    periodic_column: Literal["auto", "none", "x", "y", "both"] = Field(
        "auto", description="Axes whose last point repeats the first one."
    )
    time_from: Literal["auto", "variable", "step", "index"] = Field(
        "auto", description="Where times come from: the time variable; step numbers (variable, or digits in the file "
        "names) times time_step; or the position times time_interval."
    )
    time_unit: str = Field(
        "", description="Unit of the time variable, e.g. \"h\", \"days since 2026-01-31\", \"inertial periods\"."
    )
    time_step: Annotated[float, InUnit("s"), Field(gt=0)] | None = Field(None, description="Model time step.")
    time_interval: Annotated[float, InUnit("s"), Field(gt=0)] | None = Field(None, description="Time between snapshots.")
    time_start: Annotated[float, InUnit("s")] = Field(
        0.0, description="Run time of the first snapshot when time_from is index; of step 0 when it is step."
    )
    time_origin: Literal["auto", "reference", "first"] = Field(
        "auto", description="Calendar times: count seconds from the units' reference date or from the first snapshot; "
        "auto: the reference date unless it lies more than a year before."
    )
    calendar: str = Field("", description="Calendar of the time variable where the files state none.")
    overlap: Literal["refuse", "later", "earlier"] = Field(
        "refuse", description="Repeated times, as after a restart: which piece counts."
    )
    allow_gaps: bool = Field(False, description="Leave out snapshots that are missing or unreadable, and say so.")
    absent_chunks: Literal["judge", "zero", "gap"] = Field(
        "judge", description="Chunks that a zarr store does not hold: judged by their surroundings, true zeros, or gaps."
    )
    raw: RawSettings | None = Field(None, description="Arrangement of raw binary files.")

    @model_validator(mode="after")
    def _names_are_known(self) -> FieldsSettings:
        known = (*FIELD_NAMES, *COORDINATE_NAMES)
        for table in ("names", "units"):
            for key in getattr(self, table):
                if key not in known and not key.startswith("tracer_"):
                    raise ValueError(f"{table}.{key} is not known; use one of {', '.join(known)} or tracer_<name>")
        if len(set(self.axes)) != len(self.axes):
            raise ValueError("`axes` names an axis twice")
        if self.axes and not {"z", "y", "x"} <= set(self.axes):
            raise ValueError('`axes` must hold "z", "y" and "x" (and "time" where the fields have it)')
        if self.time_from == "step" and self.time_step is None:
            raise ValueError('time_from = "step" needs time_step, e.g. time_step = "0.5 s"')
        if self.time_from == "index" and self.time_interval is None:
            raise ValueError('time_from = "index" needs time_interval, e.g. time_interval = "600 s"')
        if self.format == "raw" and self.raw is None:
            raise ValueError('format = "raw" needs a [fields.raw] table: shape, dtype, variables or files')
        return self

    @property
    def paths(self) -> tuple[str, ...]:
        """`path` as a tuple."""
        return (self.path,) if isinstance(self.path, str) else tuple(self.path)
