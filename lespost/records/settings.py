"""The recipe's words for field records, `[[record]]`, and for the processing chain,
`[comparison.processing]`.

`RecordSettings` says how one file is to be read; `ProcessingSettings` says what is then done to it and,
identically, to the virtual samples it is compared with. The reading is in `read.py`, the chain in
`processing.py`.
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from lespost.settings import InUnit, Settings

FlagWord = Literal["pass", "not_evaluated", "suspect", "fail"]
ColumnRole = Literal[
    "time",
    "depth",
    "eastward",
    "northward",
    "upward",
    "x",
    "y",
    "speed",
    "direction_to",
    "error_velocity",
    "temperature",
    "salinity",
]


class RecordSettings(Settings):
    """One field record: where it is, how its axes lie in the simulation, what of it may be used."""

    name: str = Field(min_length=1, description="Name of the record in tables and figures.")
    path: str = Field(min_length=1, description="File of the record, relative to the recipe.")
    kind: Literal["auto", "netcdf", "csv"] = Field(
        default="auto", description="File kind; auto looks at the first bytes."
    )
    x_axis_compass_bearing: Annotated[float, InUnit("degree"), Field(ge=-360, le=360)] | None = Field(
        default=None,
        description="Compass bearing of the simulation's +x axis, degrees clockwise from true north; 90 "
        "means that x is "
        "east and y north, which is assumed, and said, where the key is absent.",
    )
    magnetic_declination: Annotated[float, InUnit("degree"), Field(ge=-180, le=180)] | None = Field(
        default=None,
        description="Declination (positive east) still to be applied to components recorded in magnetic "
        "axes; 0 states that "
        "the record is already in true axes.",
    )
    columns: dict[ColumnRole, str] = Field(
        default_factory=dict,
        description="Variable or column that plays a role, where names and standard names do not tell, for "
        "example "
        '{ upward = "w2" }.',
    )
    column_units: dict[str, str] = Field(
        default_factory=dict,
        description="Units of a variable or column by its name, where the file has none or a wrong one.",
    )
    depth: Annotated[float, InUnit("m"), Field(ge=0)] | None = Field(
        default=None, description="Depth of the sensor, for single-level records that do not state it."
    )
    depth_positive: Literal["auto", "down", "up"] = Field(
        default="auto",
        description="Direction in which the file's vertical coordinate increases; auto trusts its "
        "attributes.",
    )
    moving_depths: Literal["interpolate", "nominal", "refuse"] = Field(
        default="interpolate",
        description="What to do where cells move (mooring motion): interpolate every profile to the median "
        "depths, ignore "
        "the motion, or refuse.",
    )
    station: str | None = Field(default=None, description="Which station of a file that holds several.")
    flag_scheme: Literal["auto", "qartod", "oceansites", "ndbc", "none"] = Field(
        default="auto",
        description="Meaning of the quality flags; auto reads it from the file's own flag_meanings or the "
        "convention it "
        "names, and refuses bare numbers. none ignores all flags.",
    )
    flag_meanings: dict[str, FlagWord] = Field(
        default_factory=dict,
        description="Meaning of flag words that are not in any of the known vocabularies.",
    )
    probably_good: Literal["pass", "suspect"] = Field(
        default="pass", description="What the flag probably good (OceanSITES 2) counts as in QARTOD terms."
    )
    ignore_tests: tuple[str, ...] = Field(
        default=(),
        description="Quality tests whose verdict is set aside, by words of their name, for example "
        '"vertical_velocity": a test of |w| against the speed flags every convective downwelling.',
    )
    time_window: tuple[str, str] | None = Field(
        default=None,
        description="Part of the record to use: two ISO 8601 times (UTC), start included, end excluded.",
    )
    noise_standard_deviation: Annotated[float, InUnit("m s-1"), Field(ge=0)] | None = Field(
        default=None, description="Noise of one recorded velocity sample where the maker states it."
    )
    largest_speed: Annotated[float, InUnit("m s-1"), Field(gt=0)] = Field(
        default=10.0,
        description="Velocities beyond this are flagged fail: no current of the open ocean reaches it.",
    )

    @model_validator(mode="after")
    def _window_in_order(self) -> RecordSettings:
        if self.time_window is not None and not self.time_window[0] < self.time_window[1]:
            raise ValueError("time_window: the first time must be before the second")
        return self


class ProcessingSettings(Settings):
    """The chain that record and virtual samples go through, in this order."""

    flags_accepted: tuple[FlagWord, ...] = Field(
        default=("pass", "not_evaluated"),
        min_length=1,
        description="Flags whose samples are kept; all others become gaps.",
    )
    despike: Literal["none", "median", "phase_space"] = Field(
        default="median",
        description="Spike removal: departure from a moving median in units of 1.4826 MAD, or the "
        "phase-space threshold "
        "method (Goring & Nikora 2002). Spikes become gaps.",
    )
    despike_window: int = Field(default=7, ge=3, le=501, description="Samples in the moving median (odd).")
    despike_threshold: Annotated[float, Field(gt=1)] = Field(
        default=6.0,
        description="Departure, in robust standard deviations, beyond which a sample is a spike (moving "
        "median).",
    )
    largest_gap_filled: int = Field(
        default=3,
        ge=0,
        le=100,
        description="Gaps up to this many samples are filled linearly; longer ones stay gaps.",
    )
    averaging_interval: Annotated[float, InUnit("s"), Field(gt=0)] | None = Field(
        default=None,
        description="Interval of block averages. Absent: the samples as they are; a comparison then takes "
        "the coarser "
        "interval of its two sides.",
    )
    smallest_good_fraction: Annotated[float, Field(gt=0, le=1)] = Field(
        default=0.5, description="Share of good samples below which a block average is a gap."
    )
    rotate_to: Annotated[float, InUnit("degree"), Field(ge=-360, le=360)] | None = Field(
        default=None,
        description="Direction that u shall point to, degrees counter-clockwise from the simulation's +x; "
        "absent: no rotation.",
    )
    detrend: Literal["none", "mean", "linear"] = Field(
        default="linear", description="What is removed from each deployment before second moments are formed."
    )
    longest_period: Annotated[float, InUnit("s"), Field(gt=0)] | None = Field(
        default=None,
        description="Fluctuations slower than this are removed by subtracting a moving mean of this length.",
    )
    noise_variance: Literal["keep", "stated", "lag_zero", "plateau"] = Field(
        default="keep",
        description="Removal of the noise variance from variances: keep none; stated by the instrument; "
        "extrapolation of the "
        "autocovariance to lag zero; level of the spectrum near the Nyquist frequency.",
    )

    @model_validator(mode="after")
    def _odd_window(self) -> ProcessingSettings:
        if self.despike_window % 2 == 0:
            raise ValueError("despike_window must be odd")
        return self
