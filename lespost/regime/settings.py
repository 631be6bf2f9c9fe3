"""The [regime] section of a recipe."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from lespost.settings import Settings

Frame = Literal["auto", "wind", "stokes", "cell", "shear"]
DepthMethod = Literal["auto", "maximum_stratification", "buoyancy_threshold", "heat_flux_minimum", "stress_decay"]
Share = Annotated[float, Field(ge=0, le=2)]


class RegimeSettings(Settings):
    """[regime]: depth bands, axes and confidence of the classification."""

    bands: tuple[tuple[Share, Share], ...] = Field(
        ((0.1, 0.5), (0.5, 0.9)), min_length=1,
        description="Depth bands as fractions of the boundary-layer depth, [top, bottom], the upper mixed layer first. The top is "
        "kept at least three levels below the surface, where the subgrid model rules.")
    frame: Frame = Field(
        "auto", description="Axis called along: wind, stokes, cell (from the w field), shear (Lagrangian shear of the band); auto: cell "
        "where w shows a plain axis, else wind near the surface, else the band's own.")
    depth_method: DepthMethod = Field("auto", description="Definition of the boundary-layer depth.")
    bootstrap_samples: Annotated[int, Field(ge=100, le=100_000)] = Field(2000, description="Replicates behind the probabilities.")
    confidence: Annotated[float, Field(gt=0.5, lt=1)] = Field(
        0.8, description="Probability below which the answer is undetermined.")
    seed: Annotated[int, Field(ge=0)] = Field(0, description="Seed of the bootstrap.")

    @model_validator(mode="after")
    def _bands_in_order(self) -> RegimeSettings:
        for top, bottom in self.bands:
            if not top < bottom:
                raise ValueError(f"band [{top:g}, {bottom:g}]: the top comes first and must be the smaller depth")
        return self
