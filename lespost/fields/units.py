"""Units of the fields: what the file or recipe states, what it becomes, and the numbers that turn one into the other."""

from __future__ import annotations

from lespost.errors import UnitError
from lespost.fields.settings import FieldsSettings
from lespost.fields.stack import StackedVariable
from lespost.findings import Decision
from lespost.units import conversion, convertible

#: Canonical units; temperature stays K or degC as it is.
UNITS = {
    "u": "m s-1", "v": "m s-1", "w": "m s-1", "salinity": "g kg-1", "p": "m2 s-2", "tke_sgs": "m2 s-2", "nu_sgs": "m2 s-1",
}  # fmt: skip


def scale_of(name: str, settings: FieldsSettings) -> float:
    """Value of one non-dimensional unit of field `name`, from [fields.scales]."""
    scales = settings.scales
    if scales is None:
        return 1.0
    if name in ("u", "v", "w"):
        return scales.velocity
    if name == "theta":
        return scales.temperature
    if name in ("p", "tke_sgs"):
        return scales.velocity**2
    if name == "nu_sgs":
        return scales.velocity * scales.length
    return 1.0


def unit_of(name: str, field: StackedVariable, settings: FieldsSettings) -> tuple[str, float, float, Decision | None]:
    """(canonical unit, factor, offset, decision): canonical = factor * stored + offset.

    Raises UnitError for a unit that does not convert.
    """
    declared = settings.units.get(name)
    text = (declared if declared is not None else field.units or "").strip()
    where = f'[fields].units.{name}' if declared is not None else field.describe()
    plain = text.lower() in ("", "1", "-", "none", "nondimensional", "non-dimensional", "dimensionless")
    if settings.scales is not None and plain:
        unit = "K" if name == "theta" else UNITS.get(name, "1")
        factor = scale_of(name, settings)
        return unit, factor, 0.0, Decision(f"scale of {name}", f"{factor:.6g} {unit}", "recipe", "[fields.scales]")
    if name == "theta":
        if plain:
            return "K", 1.0, 0.0, Decision("unit of theta", "K", "default", "no unit stated")
        if text in ("K", "kelvin", "Kelvin"):
            return "K", 1.0, 0.0, None
        return "degC", *_convert(text, "degC", where), None
    target = UNITS.get(name)
    if target is None:
        return (text or "1"), 1.0, 0.0, None
    if name == "salinity" and (plain or text.lower() in ("psu", "pss-78", "pss", "1e-3", "g/kg")):
        return target, 1.0, 0.0, None
    if name == "p" and not plain and convertible(text, "Pa"):
        return "Pa", *_convert(text, "Pa", where), None
    if plain:
        return target, 1.0, 0.0, Decision(f"unit of {name}", target, "default", "no unit stated")
    factor, offset = _convert(text, target, where)
    changed = factor != 1.0 or offset != 0.0
    how = Decision(f"unit of {name}", f"{text} to {target}", "recipe" if declared else "metadata", where)
    return target, factor, offset, how if changed else None


def _convert(text: str, target: str, where: str) -> tuple[float, float]:
    try:
        return conversion(text, target, where)
    except UnitError:
        raise UnitError(
            f'{where}: unit "{text}" does not convert to {target}; if the unit in the file is wrong, write the right one in '
            "[fields].units."
        ) from None
