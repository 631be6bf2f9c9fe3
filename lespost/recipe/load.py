"""Reads a recipe and says everything that is wrong with it at once.

Each complaint names the file, the line, the key, the value found, what is allowed and, for a misspelt word, the
nearest right one. Whether paths exist is checked by the packages that open them.
"""

from __future__ import annotations

import difflib
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any, get_args, get_origin

from pydantic import BaseModel, ValidationError

from lespost.errors import RecipeError
from lespost.recipe.locate import Location, key_lines, line_of
from lespost.recipe.model import Recipe


@dataclass(frozen=True)
class LoadedRecipe:
    """A checked recipe and where it came from; `folder` is what its relative paths are relative to."""

    recipe: Recipe
    path: Path
    text: str

    @property
    def folder(self) -> Path:
        """The folder of the recipe file."""
        return self.path.parent


def load_recipe(path: Path) -> LoadedRecipe:
    """The recipe in the TOML file `path`.

    Raises RecipeError with one line per fault: unknown key, wrong type, wrong unit, impossible value.
    """
    try:
        text = path.read_text(encoding="utf-8")
    except FileNotFoundError:
        raise RecipeError(f"recipe {path} does not exist; `lespost inspect PATH --write {path.name}` makes one.") from None
    except IsADirectoryError:
        raise RecipeError(f"recipe {path} is a folder; give the .toml file inside it.") from None
    except UnicodeDecodeError:
        raise RecipeError(f"recipe {path} is not a text file in UTF-8; a recipe is a TOML file.") from None
    except PermissionError:
        raise RecipeError(f"recipe {path} may not be read; check its permissions.") from None
    return LoadedRecipe(parse_recipe(text, path.name), path.resolve(), text)


def parse_recipe(text: str, name: str = "recipe") -> Recipe:
    """The recipe in the TOML `text`; `name` is used in error messages. Raises RecipeError."""
    try:
        tree = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise RecipeError(f"recipe {name} is not valid TOML: {error}. Quote texts, and write each key once.") from None
    except RecursionError:
        raise RecipeError(f"recipe {name} is nested too deeply to be a recipe.") from None
    try:
        return Recipe.model_validate(tree)
    except ValidationError as error:
        lines = key_lines(text)
        complaints = [_complaint(fault, lines) for fault in error.errors(include_url=False)]
        raise RecipeError(f"recipe {name}: " + "\n  ".join(dict.fromkeys(complaints))) from None


def _complaint(fault: Any, lines: dict[Location, int]) -> str:
    location = tuple(part for part in fault["loc"])
    line = line_of(lines, location)
    where = f"line {line}, " if line else ""
    key = _written(location)
    kind, value = fault["type"], fault.get("input")
    if kind == "extra_forbidden":
        allowed = _allowed_keys(location[:-1])
        near = difflib.get_close_matches(str(location[-1]), allowed, n=1, cutoff=0.5)
        hint = f'did you mean "{near[0]}"?' if near else f"allowed: {', '.join(allowed)}."
        return f"{where}{key}: unknown key; {hint}"
    if kind == "missing":
        return f"{where}{key} is missing; add it."
    if kind == "literal_error":
        expected = fault.get("ctx", {}).get("expected", "")
        choices = [word.strip(" '") for word in expected.replace(" or ", ",").split(",")]
        near = difflib.get_close_matches(str(value), choices, n=1, cutoff=0.5)
        hint = f'; did you mean "{near[0]}"?' if near else ""
        return f"{where}{key} = {value!r}: allowed are {expected}{hint}"
    message = fault["msg"].removeprefix("Value error, ")
    message = message[0].lower() + message[1:] if message else message
    if isinstance(value, dict) or value is None:
        return f"{where}{key}: {message}"
    return f"{where}{key} = {value!r}: {message}"


def _written(location: Location) -> str:
    """A location as a reader of the recipe would write it: [fields].path, [[instrument]] 2 .name."""
    if not location:
        return "the recipe"
    head, rest = f"[{location[0]}]", list(location[1:])
    if rest and isinstance(rest[0], int):
        head = f"[[{location[0]}]] number {rest[0] + 1} "
        rest = rest[1:]
    for part in rest:
        head += f"[{part}]" if isinstance(part, int) else f".{part}"
    return head


def _allowed_keys(location: Location) -> list[str]:
    """Names of the keys allowed at `location`, following the model of the recipe."""
    model: Any = Recipe
    for part in location:
        if isinstance(part, int):
            continue
        field = model.model_fields.get(part) if _is_model(model) else None
        if field is None:
            return []
        model = _model_within(field.annotation)
    return list(model.model_fields) if _is_model(model) else []


def _is_model(thing: Any) -> bool:
    return isinstance(thing, type) and issubclass(thing, BaseModel)


def _model_within(annotation: Any) -> Any:
    """The settings class inside an annotation such as tuple[X, ...] or X | None."""
    if _is_model(annotation):
        return annotation
    if get_origin(annotation) is not None:
        for argument in get_args(annotation):
            found = _model_within(argument)
            if found is not None:
                return found
    return None
