"""From recorded components to velocities along the simulation's axes: compass or magnetic axes, speed and
direction.

`read.py` gathers the variables; the rotation formulas are in `series.py`. What cannot be rotated without
guessing is refused.
"""

from __future__ import annotations

import numpy as np

from lespost.errors import RecordError
from lespost.findings import Decision, Finding
from lespost.records.flags import worst
from lespost.records.gather import Gathered
from lespost.records.raw import RawRecord
from lespost.records.settings import RecordSettings
from lespost.series import compass_to_simulation, magnetic_to_true


def unit_mixture(record: RawRecord, gathered: dict[str, Gathered]) -> list[Finding]:
    """A finding where velocity components carry different units (each was converted from its own)."""
    units = {
        g.units for role, g in gathered.items() if role not in ("temperature", "salinity", "direction_to")
    }
    if len(units) < 2:
        return []
    text = ", ".join(
        f'{g.name} in "{g.units}"' for role, g in gathered.items() if role not in ("temperature", "salinity")
    )
    return [
        Finding(
            "units-mixed",
            "warning",
            f"{record.path.name}: velocity components have different units ({text}); each was converted.",
        )
    ]


def simulation_components(
    record: RawRecord,
    settings: RecordSettings,
    gathered: dict[str, Gathered],
    findings: list[Finding],
    decisions: list[Decision],
) -> tuple[dict[str, np.ndarray], dict[str, np.ndarray]]:
    """u, v, w and companions in the simulation's axes with their QARTOD flags."""
    file = record.path.name
    values: dict[str, np.ndarray] = {}
    flags: dict[str, np.ndarray] = {}
    pair: tuple[np.ndarray, np.ndarray] | None = None
    pair_flag: np.ndarray | None = None
    if "eastward" in gathered and "northward" in gathered:
        pair = gathered["eastward"].values, gathered["northward"].values
        pair_flag = worst(gathered["eastward"].flags, gathered["northward"].flags)
    elif "speed" in gathered and "direction_to" in gathered:
        towards = np.deg2rad(gathered["direction_to"].values)
        speed = gathered["speed"].values
        pair = speed * np.sin(towards), speed * np.cos(towards)
        pair_flag = worst(gathered["speed"].flags, gathered["direction_to"].flags)
    elif "x" in gathered and "y" in gathered:
        for role, name in (("x", "u"), ("y", "v")):
            values[name], flags[name] = gathered[role].values, gathered[role].flags
        decisions.append(
            Decision("horizontal axes", "already those of the simulation", "metadata", "x and y velocities")
        )
    elif {"eastward", "northward"} & set(gathered):
        one = "eastward" if "eastward" in gathered else "northward"
        name, component = _single_component(settings, gathered[one], one, file)
        values[name], flags[name] = component, gathered[one].flags
        decisions.append(
            Decision(
                "horizontal axes", f"{one} is {name}", "recipe", "x_axis_compass_bearing, 90 where absent"
            )
        )
        findings.append(Finding("one-component", "warning", f"{file}: only the {one} velocity is recorded."))
    if pair is not None and pair_flag is not None:
        declination = _declination(record, settings, gathered)
        if declination:
            pair = magnetic_to_true(*pair, declination)
            decisions.append(
                Decision("magnetic declination", f"{declination:g} degrees", "recipe", "magnetic_declination")
            )
        bearing = settings.x_axis_compass_bearing
        if bearing is None:
            bearing = 90.0
            decisions.append(
                Decision("x axis", "east", "default", "x_axis_compass_bearing is absent: 90 taken")
            )
            findings.append(
                Finding(
                    "x-axis-assumed", "warning",
                    f"{file}: x_axis_compass_bearing is not given; the simulation's x was taken to point "
                    "east.",
                )
            )  # fmt: skip
        else:
            decisions.append(Decision("x axis", f"bearing {bearing:g}", "recipe", "x_axis_compass_bearing"))
        first, second = compass_to_simulation(*pair, bearing)
        for name, component in (("u", first), ("v", second)):
            values[name], flags[name] = (
                component,
                np.where(np.isfinite(component), pair_flag, 9).astype(np.int8),
            )
    for role, sign in (("upward", 1.0), ("downward", -1.0)):
        if role in gathered and "w" not in values:
            values["w"], flags["w"] = sign * gathered[role].values, gathered[role].flags
    for role in ("error_velocity", "temperature", "salinity"):
        if role in gathered:
            values[role], flags[role] = gathered[role].values, gathered[role].flags
    if not {"u", "v", "w"} & set(values):
        raise RecordError(
            f"{file}: holds no complete velocity (a speed needs its direction, an x velocity its y velocity)."
        )
    return values, flags


def _single_component(
    settings: RecordSettings, item: Gathered, role: str, file: str
) -> tuple[str, np.ndarray]:
    """(u or v, its values) for a record of one component, allowed only where it lies along an axis of the
    simulation."""
    bearing = 90.0 if settings.x_axis_compass_bearing is None else settings.x_axis_compass_bearing
    if abs((bearing + 45.0) % 90.0 - 45.0) > 1e-6 or (settings.magnetic_declination or 0.0) != 0.0:
        raise RecordError(
            f"{file}: only the {role} velocity is recorded, which does not lie along an axis of the "
            "simulation."
        )
    still = np.zeros(item.values.shape)
    east, north = (item.values, still) if role == "eastward" else (still, item.values)
    u, v = compass_to_simulation(east, north, bearing)
    quarter_turns = round(bearing / 90.0) % 2
    along_x = quarter_turns == (1 if role == "eastward" else 0)
    return ("u", u) if along_x else ("v", v)


def _declination(record: RawRecord, settings: RecordSettings, gathered: dict[str, Gathered]) -> float:
    """Declination to apply [degree]; refuses a record that calls its axes magnetic while the recipe is
    silent."""
    if settings.magnetic_declination is not None:
        return settings.magnetic_declination
    texts = [
        str(record.variables[g.name].attributes.get("long_name", ""))
        for role, g in gathered.items()
        if role in ("eastward", "northward", "direction_to")
    ]
    magnetic = [t for t in texts if "magnetic" in t.lower()]
    if not magnetic:
        return 0.0
    stated = record.attributes.get("magnetic_declination")
    what = (
        f"; the file states {float(stated):.2f} degrees"
        if isinstance(stated, int | float | np.number)
        else ""
    )
    other = str(record.attributes.get("coordinate_system_source", ""))
    against = f' but also "{other}"' if "correct" in other.lower() else ""
    raise RecordError(
        f'{record.path.name}: the horizontal axes are magnetic ("{magnetic[0]}"){against}{what}. Write '
        "magnetic_declination in "
        "degrees (positive east) if it is still to be applied, or 0 if the components are already true."
    )
