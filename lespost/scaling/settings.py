"""The [scaling] section of a recipe, and the same choices of `lespost laws`."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from lespost.settings import Settings


class ScalingSettings(Settings):
    """[scaling]: velocity laws to test, the intervals about them, and the null hypotheses beside them."""

    laws: tuple[str, ...] = Field(
        (), description="Laws to test: names of built-in laws or products of powers such as \"us0^0.5 ustar^0.5\" and \"ustar la_t^n\" "
        "(n fitted); none: every built-in law whose columns are there.")
    exponents: Literal["fixed", "free"] = Field(
        "fixed", description="How laws are compared with each other: with the exponent they state, or with a fitted one. Both are fitted.")
    scaled_by: Literal["ustar", "us0", "none"] = Field(
        "ustar", description="Column by which both axes are divided in the usual plot; its by-chance correlation is given beside it.")
    bootstrap_samples: Annotated[int, Field(ge=100, le=100_000)] = Field(1000, description="Replicates of the block bootstrap.")
    permutations: Annotated[int, Field(ge=100, le=100_000)] = Field(2000, description="Permutations of the null hypothesis.")
    confidence: Annotated[float, Field(gt=0.5, lt=1)] = Field(0.95, description="Level of intervals and tests.")
    power: Annotated[float, Field(gt=0.5, lt=1)] = Field(0.8, description="Power asked of a record that is to separate two laws.")
    scales: tuple[str, ...] = Field(
        (), description="Further candidates for a missing scale, as \"name = 0.3 m s-1\".")
    drop_nonpositive: bool = Field(
        False, description="Leave out rows with zeros or negative values, which have no logarithm, instead of stopping.")
    seed: Annotated[int, Field(ge=0)] = Field(0, description="Seed of bootstrap and permutations.")
