"""The horizontal axes of the files: spacing, direction, the repeated periodic column, the stagger that coordinates tell."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

from lespost.errors import LayoutError, UnitError
from lespost.fields.axes import coordinate_of
from lespost.fields.names import match_name
from lespost.fields.settings import FieldsSettings
from lespost.fields.variable import RawFile
from lespost.units import conversion

#: Largest relative departure from uniform spacing (coordinates are often single precision).
UNIFORM = 1e-3

_SPACING = {"x": ("dx", "deltax", "xspacing"), "y": ("dy", "deltay", "yspacing")}
_LENGTH = {
    "x": ("lx", "lengthx", "xlength", "domainlengthx", "domainx"),
    "y": ("ly", "lengthy", "ylength", "domainlengthy", "domainy"),
}


@dataclass(frozen=True)
class HorizontalAxis:
    """One horizontal dimension of the files.

    size: points in the file, a repeated one included. spacing [m]. positions: ascending, m, None if the files state none.
    reversed: the file runs from high to low. evidence: of the spacing. length: of the domain where stated, m.
    """

    dim: str
    size: int
    spacing: float
    positions: np.ndarray | None
    reversed: bool
    evidence: str
    how: Literal["recipe", "metadata"]
    length: float | None = None


def length_factor(units: str | None, settings: FieldsSettings, key: str, where: str) -> float:
    """Metres in one unit of a coordinate: the recipe's unit, else the file's, else the scale of a non-dimensional file."""
    text = settings.units.get(key, units or "")
    if settings.scales is not None and (not text or text.strip().lower() in ("1", "-")):
        return settings.scales.length
    if not text:
        return 1.0
    try:
        factor, _ = conversion(text, "m", where)
    except UnitError:
        raise UnitError(
            f'{where}: unit "{text}" does not convert to "m"; write the right one as [fields].units = {{{key} = "m"}}.'
        ) from None
    return factor


def attribute_length(attrs: Mapping[str, Any], spellings: tuple[str, ...], settings: FieldsSettings) -> tuple[float, str] | None:
    """A length that a global attribute states, in m, and the attribute's name."""
    found = match_name({"value": spellings}, attrs)
    if not found:
        return None
    try:
        value = float(attrs[found["value"]])
    except (TypeError, ValueError):
        return None
    scale = settings.scales.length if settings.scales is not None else 1.0
    return (value * scale, found["value"]) if value > 0 else None


def read_axis(file: RawFile, dim: str, size: int, role: Literal["x", "y"], settings: FieldsSettings) -> HorizontalAxis:
    """The axis along `dim`. Raises LayoutError if its spacing is unknown or uneven, UnitError for an angle or wrong unit."""
    length = attribute_length(file.attrs, _LENGTH[role], settings)
    declared: float | None = getattr(settings, f"d{role}")
    positions, backward, spacing = None, False, None
    evidence, how = "", "metadata"
    variable = coordinate_of(file, dim, role, settings)
    if variable is not None and variable.shape == (size,):
        numbers = np.asarray(file.values(variable.name), np.float64)
        units = settings.units.get(role, variable.units or "")
        angle = units.lower().startswith("degree")
        if angle and declared is None:
            raise LayoutError(
                f'{variable.describe()} is an angle ("{units}"); the horizontal grid must be in metres: write '
                f"[fields].d{role} with the spacing."
            )
        steps = np.diff(numbers)
        # a coordinate that merely counts points is no coordinate
        counts = not units and size > 1 and np.allclose(np.abs(steps), 1.0) and (declared is not None or length is not None)
        if not angle and not counts:
            factor = length_factor(variable.units, settings, role, variable.describe())
            if size > 1:
                mean = float(np.mean(steps))
                if mean == 0.0 or np.max(np.abs(steps - mean)) > UNIFORM * abs(mean):
                    raise LayoutError(
                        f"{variable.describe()} is not evenly spaced ({np.min(steps):.6g} to {np.max(steps):.6g}); the "
                        f"horizontal grid must be uniform. If it is not the {role} axis, write [fields].axes."
                    )
                backward, spacing = mean < 0, abs(mean) * factor
                evidence = f'coordinate "{variable.name}"'
            positions = (numbers[::-1] if backward else numbers) * factor
    if declared is not None:
        if spacing is not None and abs(spacing - declared) > UNIFORM * declared:
            raise LayoutError(
                f"[fields].d{role} = {declared:g} m, but {evidence} in {file.path} is {spacing:g} m apart; correct one "
                "of them (a non-dimensional file needs [fields.scales])."
            )
        spacing, evidence, how = declared, f"[fields].d{role}", "recipe"
    if spacing is None:
        stated = attribute_length(file.attrs, _SPACING[role], settings)
        if stated is not None:
            spacing, evidence = stated[0], f'attribute "{stated[1]}"'
        elif length is not None:
            spacing, evidence = length[0] / size, f'attribute "{length[1]}"'
    if spacing is None:
        raise LayoutError(
            f'{file.path}: the grid spacing along {role} (dimension "{dim}", {size} points) is not stated; write '
            f'[fields].d{role}, e.g. d{role} = "2.5 m".'
        )
    return HorizontalAxis(
        dim, size, float(spacing), positions, backward, evidence, how,  # type: ignore[arg-type]
        length[0] if length is not None else None,
    )


def offset_from_coordinates(own: HorizontalAxis, centre: HorizontalAxis) -> Literal["centre", "low_face", "high_face"] | None:
    """Where a component sits by the positions its own dimension states, None where they do not say."""
    if own.positions is None or centre.positions is None or own.dim == centre.dim:
        return None
    shift = (own.positions[0] - centre.positions[0]) / centre.spacing
    for name, expected in (("centre", 0.0), ("low_face", -0.5), ("high_face", 0.5)):
        if abs(shift - expected) < 0.05:
            return name  # type: ignore[return-value]
    return None


def repeats_first(values: np.ndarray, axis: int) -> bool | None:
    """Whether the last point along `axis` repeats the first; None if the field does not vary along it and cannot tell."""
    if values.shape[axis] < 3:
        return False
    moved = np.moveaxis(np.asarray(values, np.float64), axis, 0)
    size = float(np.max(np.abs(moved - np.mean(moved)))) if moved.size else 0.0
    step = float(np.sqrt(np.mean((moved[1] - moved[0]) ** 2)))
    if size == 0.0 or step <= 1e-6 * size:
        return None
    return bool(np.max(np.abs(moved[-1] - moved[0])) <= 1e-6 * size)
