"""[profiles] and [windows] of a recipe."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from lespost.settings import InUnit, Settings


class ProfilesSettings(Settings):
    """[profiles]: what the one pass computes."""

    tiles: int = Field(
        4, ge=1, le=64, description="Second moments are also kept on tiles x tiles parts of each level, whose scatter shows how "
        "well a level samples the turbulence; the nearest number that divides the grid is taken. 1: none."
    )
    higher_moments: bool = Field(True, description="Third and fourth moments too (skewness, kurtosis, transport).")
    prandtl_number: Annotated[float, Field(gt=0)] | None = Field(
        None, description="Subgrid Prandtl number of scalars, nu_sgs over their subgrid diffusivity; default: what the "
        "files state."
    )


class IntervalSettings(Settings):
    """One averaging window."""

    name: str = Field(min_length=1, max_length=60, description="Name of the window in tables and figures.")
    start: Annotated[float, InUnit("s")] = Field(description='Run time at its start, e.g. "7 h".')
    end: Annotated[float, InUnit("s")] = Field(description='Run time at its end, e.g. "8 h".')

    @model_validator(mode="after")
    def _ordered(self) -> IntervalSettings:
        if not self.end >= self.start:
            raise ValueError(f"end ({self.end:g} s) lies before start ({self.start:g} s)")
        return self


class WindowsSettings(Settings):
    """[windows]: over which snapshots profiles are averaged. Without any entry: the whole run."""

    spin_up: Annotated[float, InUnit("s"), Field(ge=0)] = Field(
        0.0, description='Run time before which snapshots count as spin-up and are left out, e.g. "2 h".'
    )
    length: Annotated[float, InUnit("s"), Field(gt=0)] | None = Field(
        None, description="Cut what is left into windows of this length; default: one window."
    )
    intervals: tuple[IntervalSettings, ...] = Field(
        (), description='Windows by hand, e.g. [{name = "peak", start = "7 h", end = "8 h"}]; spin_up does not apply to them.'
    )

    @model_validator(mode="after")
    def _names_differ(self) -> WindowsSettings:
        names = [interval.name for interval in self.intervals]
        if len(set(names)) < len(names):
            raise ValueError("two windows share a name; give each its own")
        if self.intervals and self.length is not None:
            raise ValueError("give either `length` or `intervals`")
        return self

    def over(self, times: list[float]) -> tuple[IntervalSettings, ...]:
        """The windows over snapshots at `times` (run time in s, ascending); empty where the spin-up leaves no snapshot.

        A snapshot belongs to a window when start <= time <= end; automatic windows end just before the next one begins,
        so that no snapshot counts twice.
        """
        if self.intervals:
            return self.intervals
        kept = [time for time in times if time >= self.spin_up]
        if not kept:
            return ()
        first, last = kept[0], kept[-1]
        if self.length is None or last - first <= self.length:
            return (IntervalSettings(name="all", start=first, end=last),)
        windows: list[IntervalSettings] = []
        count = -(-(last - first) // self.length)
        for number in range(int(count)):
            inside = [t for t in kept if first + number * self.length <= t < first + (number + 1) * self.length]
            if number == int(count) - 1:
                inside = [t for t in kept if t >= first + number * self.length]
            if inside:
                windows.append(IntervalSettings(name=f"part {len(windows) + 1}", start=inside[0], end=inside[-1]))
        return tuple(windows)
