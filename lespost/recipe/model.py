"""The recipe: each section is the settings class of the package that uses it; here they are only put together."""

from __future__ import annotations

from pydantic import Field, model_validator

from lespost.compare.settings import ComparisonSettings
from lespost.engine.settings import ComputeSettings
from lespost.fields.settings import FieldsSettings
from lespost.forcing.settings import ForcingSettings, StokesSettings
from lespost.instruments.settings import InstrumentSettings
from lespost.profiles.settings import ProfilesSettings, WindowsSettings
from lespost.records.settings import RecordSettings
from lespost.regime.settings import RegimeSettings
from lespost.scaling.settings import ScalingSettings
from lespost.settings import Settings


class RunSettings(Settings):
    """[run]: title and output."""

    title: str = Field("", max_length=200, description="Title of the page.")
    output: str = Field("", description="Results folder, relative to the recipe; default: the recipe's name + _out.")


class ScalingSection(ScalingSettings):
    """[scaling]: present where velocity laws are to be tested on the windows of this run and of others."""

    results: tuple[str, ...] = Field(
        (), description="Results folders of other runs whose windows join this run's in one table, relative to the recipe.")


class Recipe(Settings):
    """A whole recipe; only [fields] is required."""

    run: RunSettings = RunSettings()
    fields: FieldsSettings
    forcing: ForcingSettings = ForcingSettings()
    stokes: StokesSettings = StokesSettings()
    windows: WindowsSettings = WindowsSettings()
    profiles: ProfilesSettings = ProfilesSettings()
    regime: RegimeSettings = RegimeSettings()
    instrument: tuple[InstrumentSettings, ...] = ()
    record: tuple[RecordSettings, ...] = ()
    comparison: ComparisonSettings = ComparisonSettings()
    scaling: ScalingSection | None = None
    compute: ComputeSettings = ComputeSettings()

    @model_validator(mode="after")
    def _names_are_unique(self) -> Recipe:
        for kind in ("instrument", "record"):
            names = [item.name for item in getattr(self, kind)]
            repeated = {name for name in names if names.count(name) > 1}
            if repeated:
                raise ValueError(f"two [[{kind}]] tables share the name {sorted(repeated)[0]!r}; give each its own name")
        return self

    @model_validator(mode="after")
    def _records_have_instruments(self) -> Recipe:
        if self.record and not self.instrument:
            raise ValueError("there is a [[record]] but no [[instrument]]: describe the instrument that made the record, so that "
                             "the fields can be sampled as it would have")
        return self
