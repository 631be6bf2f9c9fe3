"""The base of every section of a recipe: unknown keys refused, values frozen, quantities with units.

Each package states the settings it needs in its own `settings.py` as subclasses of `Settings`; the recipe package
composes them. A quantity may be written as a plain number in its documented unit or as a text with its own unit.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from pydantic import BaseModel, ConfigDict, GetCoreSchemaHandler, GetJsonSchemaHandler
from pydantic_core import CoreSchema, core_schema

from lespost.errors import UnitError
from lespost.units import parse_quantity


class Settings(BaseModel):
    """Base class of the recipe's sections. Field descriptions are the recipe's documentation."""

    model_config = ConfigDict(extra="forbid", frozen=True, validate_default=True)


@dataclass(frozen=True)
class InUnit:
    """Marks a float field as a quantity in `unit`: a number in that unit, or a text with a unit that converts.

    Example: `depth: Annotated[float, InUnit("m"), Field(gt=0)]` accepts 33, "33 m" and "3300 cm". The unit is kept in
    the JSON schema (key "unit") so that the key reference can be generated. NaN and infinity are refused.
    """

    unit: str

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        def read(value: Any) -> Any:
            try:
                number = parse_quantity(value, self.unit)
            except UnitError as error:
                raise ValueError(str(error).removeprefix("value: ")) from None
            if number != number or number in (float("inf"), float("-inf")):
                raise ValueError("must be a finite number")
            return number

        return core_schema.no_info_before_validator_function(read, handler(source))

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        return {**handler(schema), "unit": self.unit}
