"""The recipe's words for `[comparison]`: what is compared, at which depths, when two numbers count as equal.

The chain that both sides go through is `[comparison.processing]` (`lespost.records.settings`).
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from lespost.records.settings import ProcessingSettings
from lespost.settings import InUnit, Settings

Quantity = Literal[
    "u_mean",
    "v_mean",
    "w_mean",
    "speed",
    "temperature_mean",
    "uu",
    "vv",
    "ww",
    "uv",
    "uw",
    "vw",
    "tke",
    "error_velocity_variance",
    "temperature_variance",
]


class ComparisonSettings(Settings):
    """How records are compared with virtual samples. Defaults give one row per quantity and depth of each
    pair."""

    pairs: dict[str, tuple[str, ...]] = Field(
        default_factory=dict,
        description='Which instruments each record is compared with, by name: { mooring = ["profiler"] }. '
        "Absent: all.",
    )
    quantities: tuple[Quantity, ...] = Field(
        default=("u_mean", "v_mean", "speed", "uu", "vv", "ww", "tke", "error_velocity_variance"),
        min_length=1,
        description="Quantities to compare; those that one side lacks are left out.",
    )
    depths: tuple[Annotated[float, InUnit("m"), Field(ge=0)], ...] = Field(
        default=(),
        description="Depths of the record to use (the nearest cell within the tolerance); absent: all of "
        "them.",
    )
    depth_pairing: Literal["nearest", "interpolate"] = Field(
        default="nearest",
        description="Pair each cell of the record with the nearest cell of the instrument, or with the "
        "linear interpolation of "
        "the statistic between the two cells around it.",
    )
    depth_tolerance: Annotated[float, InUnit("m"), Field(gt=0)] | None = Field(
        default=None,
        description="Largest distance of paired cells; absent: half of the wider spacing of the two sides.",
    )
    allow_windows: bool = Field(
        default=False,
        description="Compare a record with a model window of another length; second moments then cover other "
        "periods.",
    )
    cut_record: bool = Field(
        default=False,
        description="Cut a record longer than the model window into pieces of its length, each of them one "
        "deployment.",
    )
    allow_unequal_chains: bool = Field(
        default=False, description="Compare series that came with different processing steps already applied."
    )
    confidence: Annotated[float, Field(gt=0.5, lt=1)] = Field(
        default=0.95, description="Confidence of all intervals."
    )
    bootstrap_count: int = Field(
        default=400, ge=100, le=20000, description="Replicates of the block bootstrap."
    )
    equivalence_margin: Annotated[float, Field(gt=0, lt=1)] = Field(
        default=0.2, description="Ratios within 1 - margin to 1 + margin count as equal (variances, speeds)."
    )
    velocity_margin: Annotated[float, InUnit("m s-1"), Field(gt=0)] = Field(
        default=0.02, description="Mean velocity components within this of each other count as equal."
    )
    temperature_margin: Annotated[float, InUnit("K"), Field(gt=0)] = Field(
        default=0.1, description="Mean temperatures within this of each other count as equal."
    )
    covariance_margin: Annotated[float, Field(gt=0, lt=1)] = Field(
        default=0.05,
        description="Covariances count as equal if they differ by less than this times the product of the "
        "model's two "
        "standard deviations, that is, by so much in correlation.",
    )
    false_discovery_rate: Annotated[float, Field(gt=0, lt=1)] = Field(
        default=0.05,
        description="Expected share of false differences among those reported (Benjamini & Hochberg 1995).",
    )
    smallest_effective_samples: Annotated[float, Field(ge=2)] = Field(
        default=10.0, description="With fewer independent samples on either side no verdict is given."
    )
    largest_noise_share: Annotated[float, Field(gt=0, le=1)] = Field(
        default=0.3,
        description="With more noise than this share of a variance, on either side, no verdict is given on "
        "it.",
    )
    largest_subgrid_share: Annotated[float, Field(gt=0, le=1)] = Field(
        default=0.3,
        description="With a larger share of the model's variance below its grid, no difference of that "
        "variance is stated.",
    )
    processing: ProcessingSettings = Field(
        default_factory=ProcessingSettings, description="The chain that both sides go through."
    )
