"""What `lespost inspect` shows: the description of the files, put into lines and into a recipe.

The recipe writes down what was detected, so that a later run does not depend on detection, and what the files state of the
forcing, with a comment that says where each number was read.
"""

from __future__ import annotations

import os
import shlex
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from lespost.fields.describe import FieldsReport, describe_path, propose_settings
from lespost.findings import Hint
from lespost.pipeline.files import plain
from lespost.recipe.write import Entry, Section, recipe_text

#: Where a hint goes in the recipe: section, key, decimals kept.
_FORCING = {"friction_velocity": "friction_velocity", "stress": "stress", "wind_speed": "wind_speed",
            "stress_direction": "stress_direction", "surface_heat_flux": "surface_heat_flux",
            "surface_temperature_flux": "surface_temperature_flux", "coriolis_parameter": "coriolis_parameter",
            "latitude": "latitude", "thermal_expansion": "thermal_expansion", "gravity": "gravity",
            "reference_density": "reference_density", "specific_heat": "specific_heat"}
_STOKES = {"stokes_surface_speed": "surface_speed", "stokes_direction": "direction", "stokes_wavenumber": "wavenumber"}
#: Of several hints that say the same, the first found is written.
_SAME = (("friction_velocity", "stress", "wind_speed"), ("surface_heat_flux", "surface_temperature_flux"),
         ("coriolis_parameter", "latitude"))


@dataclass(frozen=True)
class Inspection:
    """A report and the recipe proposed from it."""

    report: FieldsReport
    recipe: str

    def to_dict(self) -> dict[str, Any]:
        """Plain values for JSON."""
        return {**plain(self.report.to_dict()), "recipe": self.recipe}

    def text(self, written: Path | None) -> str:
        """Lines for a reader."""
        report = self.report
        lines = [f"{', '.join(report.paths)}: {report.kind}, {report.files} file{'s' if report.files != 1 else ''}, "
                 f"{report.bytes / 1e6:.1f} MB"]
        if report.sizes:
            lines.append(f"  {report.snapshots} snapshots, {report.first_time:g} to {report.last_time:g} s"
                         + (f", every {report.interval:g} s" if np.isfinite(report.interval) else "")
                         + (f", from {report.origin}" if report.origin else ""))
            lines.append("  {nx} x {ny} x {nz} points, ".format(**report.sizes)
                         + "{Lx:g} m x {Ly:g} m x {depth:g} m, ".format(**report.lengths)
                         + "dx {dx:g} m, dy {dy:g} m, dz {dz_min:g} to {dz_max:g} m".format(**report.spacing))
        lines += ["", "fields"]
        for variable in report.variables:
            role = f"= {variable.ours}" if variable.ours else "not used"
            lines.append(f"  {variable.name:<14}{role:<12}{' x '.join(map(str, variable.shape)):<22}{variable.units or 'no unit':<10}"
                         f"{variable.why}")
        if report.decisions:
            lines += ["", "decided"]
            lines += [f"  {d.subject:<22}{d.choice}  [{d.how}: {d.evidence}]" for d in report.decisions
                      if not d.subject.startswith("name of")]
        if report.hints:
            lines += ["", "the files state"]
            lines += [f"  {key:<28}{_value(hint)} {hint.units}  [{hint.evidence}]" for key, hint in report.hints.items()]
        if report.findings:
            lines += ["", "checks"]
            lines += [f"  {f.severity}: {f.message}" for f in report.findings]
        if report.missing:
            lines += ["", "missing"]
            lines += [f"  {text}" for text in report.missing]
        lines.append("")
        if written is not None:
            lines.append(f"recipe written to {written}" + ("; fill in what is missing, then" if report.missing else ";")
                         + f" run it: lespost run {shlex.quote(str(written))}")
        else:
            lines += ["proposed recipe (save it with --write NAME.toml)", "", *(f"    {line}" for line in self.recipe.splitlines())]
        return "\n".join(lines)


def inspect_paths(paths: Sequence[str], folder: Path) -> Inspection:
    """Describes the fields at `paths` and proposes a recipe that will stand in `folder`. Raises DataError for foreign files."""
    report = describe_path(list(paths))
    return Inspection(report, _recipe(report, folder))


def _value(hint: Hint) -> str:
    array = np.asarray(hint.value, float)
    if array.ndim == 0 or array.min() == array.max():
        return f"{float(array.flat[0]):.6g}"
    return f"{array.min():.4g} to {array.max():.4g} over {', '.join(hint.dims)}"


def _relative(path: str, folder: Path) -> str:
    """`path` as seen from the recipe's folder; as it is where that cannot be said."""
    absolute = Path(path).absolute()
    try:
        relative = os.path.relpath(absolute, folder.absolute())
    except ValueError:  # another drive
        return str(absolute)
    return relative if relative.count("..") <= 3 else str(absolute)


def _recipe(report: FieldsReport, folder: Path) -> str:
    keys = propose_settings(report)
    path = keys["path"]
    keys["path"] = _relative(path, folder) if isinstance(path, str) else [_relative(item, folder) for item in path]
    tables = {key: value for key, value in keys.items() if isinstance(value, Mapping)}
    sections = [Section("run", [Entry("title", Path(report.paths[0]).stem.replace("_", " "))]),
                Section("fields", [Entry(key, value) for key, value in keys.items() if key not in tables])]
    sections += [Section(f"fields.{name}", [Entry(key, value) for key, value in table.items()]) for name, table in tables.items()]
    if report.missing:
        sections[1] = Section("fields", sections[1].entries, "MISSING: " + "\n".join(report.missing))
    sections += [_forcing(report.hints), _stokes(report.hints), _windows(report)]
    heading = "Proposed by `lespost inspect`. Paths are relative to this file; keys left out take their defaults."
    return recipe_text(sections, heading)


def _constant(hint: Hint) -> float | None:
    array = np.asarray(hint.value, float)
    return float(array.flat[0]) if array.size and array.min() == array.max() else None


def _entries(hints: Mapping[str, Hint], table: Mapping[str, str]) -> tuple[list[Entry], list[str]]:
    """(entries of what is constant, comments on what varies and is taken from the files as it is)."""
    dropped = {name for group in _SAME for name in [key for key in group if key in hints][1:]}
    entries, comments = [], []
    for key, name in table.items():
        if key not in hints or key in dropped:
            continue
        value = _constant(hints[key])
        if value is None:
            comments.append(f"{name}: varies, taken from the files ({hints[key].evidence})")
        else:
            entries.append(Entry(name, value, f"{hints[key].units}, {hints[key].evidence}"))
    return entries, comments


def _forcing(hints: Mapping[str, Hint]) -> Section:
    entries, comments = _entries(hints, _FORCING)
    known = set(hints)
    if not known & {"friction_velocity", "stress", "wind_speed"}:
        entries.append(Entry("friction_velocity", None, "m s-1; or stress (N m-2), or wind_speed (m s-1)", "0.006"))
    if not known & {"surface_heat_flux", "surface_temperature_flux"}:
        entries.append(Entry("surface_heat_flux", None, "W m-2 into the ocean; cooling is negative", "-50.0"))
    if "stress_direction" not in known:
        entries.append(Entry("stress_direction", None, "degrees counter-clockwise from +x, towards; taken as 0", "0.0"))
    if "thermal_expansion" not in known:
        entries.append(Entry("temperature", None, "degC at the surface, for TEOS-10", "15.0"))
    return Section("forcing", entries, "\n".join(comments))


def _stokes(hints: Mapping[str, Hint]) -> Section:
    entries, comments = _entries(hints, _STOKES)
    profile = [key for key in ("stokes_profile_u", "stokes_profile_v", "stokes_profile_shape") if key in hints]
    if profile:
        # A wavenumber in the recipe would win over the stored cell means, which are what the run really had.
        entries = [entry for entry in entries if entry.key != "wavenumber"]
        if "stokes_profile_shape" not in hints:
            entries = [entry for entry in entries if entry.key != "surface_speed"]
        comments += [f"profile as stored ({hints[key].evidence})" for key in profile]
    if "stokes_surface_speed" not in hints and not profile:
        entries.append(Entry("surface_speed", None, 'm s-1, with wavenumber (m-1); or kind = "none" for a run without waves', "0.07"))
        entries.append(Entry("wavenumber", None, "m-1; the drift decays as exp(2 k z)", "0.1"))
    return Section("stokes", entries, "\n".join(comments))


def _windows(report: FieldsReport) -> Section:
    return Section("windows", [Entry("spin_up", None, "run time before which snapshots are left out", '"2 h"'),
                               Entry("length", None, "length of the averaging windows; default one over all", '"1 h"')])
