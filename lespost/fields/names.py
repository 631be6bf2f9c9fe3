"""Which variable of the files is u, v, w, theta, ...: the recipe first, then CF standard names, then common spellings.

Spellings are compared without case, blanks, hyphens and underscores. Two variables that claim one name on the same
evidence are an error: the recipe must say which one is meant.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from lespost.errors import DataError, LayoutError
from lespost.fields.settings import FIELD_NAMES, FieldsSettings
from lespost.fields.variable import RawVariable
from lespost.findings import Decision


@dataclass(frozen=True)
class Entry:
    """How one quantity may be called: CF standard names, then spellings in order of trust (a tuple per tier)."""

    standard_names: tuple[str, ...]
    tiers: tuple[tuple[str, ...], ...]


def _velocity(letter: str, axis: str, number: str, standard: tuple[str, ...]) -> Entry:
    # not uu: that is a variance
    spellings = (
        f"{letter}a", f"{letter}vel", f"vel{letter}", f"{letter}velocity", f"velocity{letter}", f"{axis}velocity",
        f"velocity{axis}", f"vel{axis}", f"{axis}vel", f"u{number}", f"velocity{number}", f"vel{number}",
        f"{letter}component", f"{letter}resolved", f"u{axis}",
    )  # fmt: skip
    return Entry(standard, ((letter,), tuple(dict.fromkeys(spellings))))


TABLE: Mapping[str, Entry] = {
    "u": _velocity("u", "x", "1", (
        "sea_water_x_velocity", "eastward_sea_water_velocity", "x_wind",
    )),
    "v": _velocity("v", "y", "2", ("sea_water_y_velocity", "northward_sea_water_velocity", "y_wind")),
    "w": _velocity("w", "z", "3", ("upward_sea_water_velocity", "upward_air_velocity")),
    "theta": Entry(
        ("sea_water_potential_temperature", "sea_water_conservative_temperature"),
        (
            ("theta", "potentialtemperature", "pottemp", "conservativetemperature", "thetao", "pt", "th"),
            ("t", "temp", "temperature", "tem", "seawatertemperature"),
        ),
    ),
    "salinity": Entry(
        ("sea_water_absolute_salinity", "sea_water_salinity", "sea_water_practical_salinity"),
        (("salinity", "salt", "sal", "absolutesalinity", "sa", "so"), ("s",)),
    ),
    "p": Entry((), (("p", "pressure", "pres", "dynamicpressure", "modifiedpressure", "pprime", "kinematicpressure"),)),
    "tke_sgs": Entry((), (("tkesgs", "sgstke", "esgs", "sgse", "subgridtke", "subgridscaletke"), ("e", "tke"))),
    "nu_sgs": Entry((), (
        ("nusgs", "sgsnu", "nut", "nuturb", "eddyviscosity", "sgsviscosity", "subgridviscosity", "nue", "visct"),
        ("km", "nu"),
    )),
}  # fmt: skip

_TRACER = re.compile(r"^(?:tracer|dye|passive_?(?:scalar|tracer)|scalar)[_-]?(.*)$", re.IGNORECASE)


def normalised(text: str) -> str:
    """Lower case without blanks, hyphens, underscores; of a name in groups, the last part."""
    return re.sub(r"[\s_\-]+", "", text.rsplit("/", 1)[-1]).casefold()


@dataclass(frozen=True)
class Choice:
    """variables: our name -> the file's name. decisions: one for each."""

    variables: dict[str, str]
    decisions: tuple[Decision, ...]


def choose(candidates: Iterable[RawVariable], settings: FieldsSettings, where: str) -> Choice:
    """Names of the fields among `candidates` (variables with three axes in space).

    Raises LayoutError for a clash, DataError if u, v or w is nowhere or a name of the recipe is not in the files.
    """
    pool = {variable.name: variable for variable in candidates}
    chosen: dict[str, str] = {}
    decisions: list[Decision] = []
    for ours, theirs in settings.names.items():
        if ours not in FIELD_NAMES and not ours.startswith("tracer_"):
            continue
        match = theirs if theirs in pool else next((n for n in pool if n.rsplit("/", 1)[-1] == theirs), None)
        if match is None:
            raise DataError(
                f'{where}: [fields].names.{ours} = "{theirs}", but no field has that name; the files hold '
                f"{', '.join(sorted(pool)) or 'no field with three axes in space'}."
            )
        chosen[ours] = match
        decisions.append(Decision(f"name of {ours}", match, "recipe", f'[fields].names.{ours} = "{theirs}"'))
    taken = set(chosen.values())
    for ours, entry in TABLE.items():
        if ours in chosen:
            continue
        found = _best(entry, [v for n, v in pool.items() if n not in taken])
        if found is None:
            continue
        names, evidence = found
        if len(names) > 1:
            raise LayoutError(
                f"{where}: {' and '.join(names)} both look like {ours} ({evidence}); write [fields].names = "
                f'{{{ours} = "{names[0]}"}} with the one that is meant.'
            )
        chosen[ours] = names[0]
        taken.add(names[0])
        decisions.append(Decision(f"name of {ours}", names[0], "metadata", evidence))
    for name in pool:
        match_tracer = _TRACER.match(name.rsplit("/", 1)[-1])
        if match_tracer and name not in taken:
            ours = f"tracer_{match_tracer.group(1) or '1'}"
            if ours not in chosen:
                chosen[ours] = name
                decisions.append(Decision(f"name of {ours}", name, "metadata", "spelling of the name"))
    missing = [name for name in ("u", "v", "w") if name not in chosen]
    if missing:
        unused = sorted(set(pool) - set(chosen.values()))
        held = f"the files hold {', '.join(unused)}" if unused else "the files hold no other field with three axes in space"
        raise DataError(
            f"{where}: no variable was recognised as {' or '.join(missing)}; {held}. Write [fields].names = "
            f'{{{missing[0]} = "<name in the file>"}}, or add the files that hold it to [fields].path.'
        )
    return Choice(chosen, tuple(decisions))


def _best(entry: Entry, pool: list[RawVariable]) -> tuple[list[str], str] | None:
    standard = [v.name for v in pool if str(v.attrs.get("standard_name", "")).strip() in entry.standard_names]
    if standard:
        return standard, "CF standard_name"
    for tier in entry.tiers:
        spelled = [v.name for v in pool if normalised(v.name) in tier]
        if spelled:
            return spelled, "spelling of the name"
    return None


def match_name(wanted: Mapping[str, tuple[str, ...]], names: Iterable[str]) -> dict[str, str]:
    """For each key of `wanted`, the first of `names` whose spelling is listed: used for attributes and series."""
    spelled: dict[str, str] = {}
    for name in names:
        spelled.setdefault(normalised(name), name)
    return {
        key: spelled[s] for key, spellings in wanted.items() if (s := next((t for t in spellings if t in spelled), None))
    }
