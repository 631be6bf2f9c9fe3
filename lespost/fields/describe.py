"""What `lespost inspect` says of fields: what the files hold, what was recognised and why, what is missing, what it costs.

The same steps as `lespost.fields.open` are taken one by one, so that a file that cannot be opened is still described up
to the step that failed, with the recipe lines that would help.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import xarray as xr

from lespost.errors import DataError, LayoutError, LespostError, RecipeError
from lespost.fields.checks import read_ratio
from lespost.fields.index import Collection, collect
from lespost.fields.names import Choice
from lespost.fields.open import OpenedFields, assemble, field_variables, recognise
from lespost.fields.settings import FieldsSettings
from lespost.findings import Decision, Finding, Hint


@dataclass(frozen=True)
class VariableReport:
    """One field of the files. ours: our name, "" if not used. bytes_per_snapshot: in memory, decoded."""

    name: str
    ours: str
    dims: tuple[str, ...]
    shape: tuple[int, ...]
    dtype: str
    units: str
    chunks: tuple[int, ...] | None
    bytes_per_snapshot: int
    why: str


@dataclass(frozen=True)
class ReadCost:
    """ratio: bytes decoded / bytes needed for one planned product, by the stored chunks."""

    product: str
    ratio: float


@dataclass(frozen=True)
class FieldsReport:
    """All that `lespost inspect` prints about fields.

    kind: netcdf, zarr or raw. files, bytes: number and size on disk. sizes: nx, ny, nz; spacing: dx, dy, dz_min, dz_max
    [m]; lengths: Lx, Ly, depth [m]; all empty where the layout is open. times: seconds; origin: ISO text or "".
    missing: what must be written into the recipe before the files can be used; empty if they can be as they are.
    """

    paths: tuple[str, ...]
    kind: str
    files: int
    bytes: int
    variables: tuple[VariableReport, ...]
    snapshots: int = 0
    first_time: float = math.nan
    last_time: float = math.nan
    interval: float = math.nan
    origin: str = ""
    sizes: dict[str, int] = field(default_factory=dict)
    spacing: dict[str, float] = field(default_factory=dict)
    lengths: dict[str, float] = field(default_factory=dict)
    decisions: tuple[Decision, ...] = ()
    findings: tuple[Finding, ...] = ()
    hints: dict[str, Hint] = field(default_factory=dict)
    costs: tuple[ReadCost, ...] = ()
    missing: tuple[str, ...] = ()
    attributes: dict[str, Any] = field(default_factory=dict)
    settings: FieldsSettings | None = None
    layout: dict[str, Any] = field(default_factory=dict)

    @property
    def usable(self) -> bool:
        """Whether the files can be used as they are."""
        return not self.missing

    def to_dict(self) -> dict[str, Any]:
        """Plain values for JSON; arrays as lists."""
        return {
            "paths": list(self.paths), "kind": self.kind, "files": self.files, "bytes": self.bytes,
            "variables": [asdict(v) for v in self.variables], "snapshots": self.snapshots,
            "first_time": self.first_time, "last_time": self.last_time, "interval": self.interval, "origin": self.origin,
            "sizes": self.sizes, "spacing": self.spacing, "lengths": self.lengths,
            "decisions": [d.to_dict() for d in self.decisions], "findings": [f.to_dict() for f in self.findings],
            "hints": {
                key: {"value": np.asarray(h.value).tolist(), "units": h.units, "evidence": h.evidence, "dims": list(h.dims)}
                for key, h in self.hints.items()
            },
            "costs": [asdict(c) for c in self.costs], "missing": list(self.missing),
        }  # fmt: skip


def describe_path(
    paths: Sequence[str | Path], settings: FieldsSettings | None = None, base: Path | None = None
) -> FieldsReport:
    """Describe the fields at `paths` (files, stores, folders, patterns), opened with `settings` where given.

    Raises DataError where there is nothing to describe: no such path, a foreign, empty or damaged file.
    """
    texts = tuple(str(path) for path in paths)
    base = base or Path.cwd()
    chosen = settings or FieldsSettings.model_validate({"path": texts if len(texts) > 1 else texts[0]})
    collection = collect(chosen, base)
    size = sum(_disk_bytes(entry.path) for entry in collection.entries)
    attributes = dict(collection.templates[0].attrs)
    common: dict[str, Any] = {
        "paths": texts, "kind": collection.kind, "files": len(collection.entries), "bytes": size,
        "attributes": attributes, "settings": chosen,
    }  # fmt: skip
    try:
        choice = recognise(collection, chosen)
    except (LayoutError, DataError) as error:
        return FieldsReport(
            **common, variables=_variables(collection, chosen, None), missing=(str(error),), findings=collection.findings,
            snapshots=sum(entry.count for entry in collection.entries),
        )  # fmt: skip
    variables = _variables(collection, chosen, choice)
    try:
        opened = assemble(collection, choice, chosen)
    except (LayoutError, DataError, RecipeError) as error:
        return FieldsReport(
            **common, variables=variables, missing=(str(error),), decisions=choice.decisions, findings=collection.findings,
            snapshots=sum(entry.count for entry in collection.holders(choice.variables["u"])),
        )  # fmt: skip
    return FieldsReport(**common, variables=variables, **_opened(opened))


def _opened(opened: OpenedFields) -> dict[str, Any]:
    data = opened.dataset
    time = data["time"].values
    thickness = np.diff(data["z_face"].values)
    score = {d.subject: d for d in opened.decisions}
    return {
        "snapshots": len(time),
        "first_time": float(time[0]),
        "last_time": float(time[-1]),
        "interval": float(np.median(np.diff(time))) if len(time) > 1 else math.nan,
        "origin": str(data.attrs.get("time_origin", "")),
        "sizes": {"nx": data.sizes["x"], "ny": data.sizes["y"], "nz": data.sizes["z"]},
        "spacing": {
            "dx": data.attrs["Lx"] / data.sizes["x"], "dy": data.attrs["Ly"] / data.sizes["y"],
            "dz_min": float(thickness.min()), "dz_max": float(thickness.max()),
        },
        "lengths": {
            "Lx": float(data.attrs["Lx"]), "Ly": float(data.attrs["Ly"]),
            "depth": float(data["z_face"].values[-1] - data["z_face"].values[0]),
        },
        "decisions": opened.decisions,
        "findings": opened.findings,
        "hints": opened.hints,
        "costs": read_costs(data),
        "layout": {
            "axes": _common_axes(data),
            "surface": score["surface"].choice.split(" ")[0],
            "w_position": score["w position"].choice,
            "u_position": score["u position"].choice,
            "v_position": score["v position"].choice,
            "horizontal_scheme": score["horizontal scheme"].choice,
            "velocity_kind": data.attrs["velocity_kind"],
        },
    }  # fmt: skip


def read_costs(data: xr.Dataset) -> tuple[ReadCost, ...]:
    """Bytes decoded over bytes needed for the products that are read differently, by the chunks of u."""
    u = data["u"]
    x = str(u.dims[3])
    plans = (
        ("statistics of a whole snapshot", {"time": 1}),
        ("one level of one snapshot", {"time": 1, "z": 1}),
        ("a slab of 8 levels", {"time": 1, "z": 8}),
        ("a vertical section along y", {"time": 1, x: 1}),
    )
    return tuple(ReadCost(product, read_ratio(u, wanted)) for product, wanted in plans)


def _variables(collection: Collection, settings: FieldsSettings, choice: Choice | None) -> tuple[VariableReport, ...]:
    ours = {theirs: name for name, theirs in choice.variables.items()} if choice is not None else {}
    why = {d.choice: f"{d.how}: {d.evidence}" for d in choice.decisions} if choice is not None else {}
    found = []
    for v in field_variables(collection, settings):
        space = math.prod(v.shape[-3:]) if len(v.shape) == 3 else math.prod(v.shape) // max(1, _times(collection, v.name))
        found.append(VariableReport(
            v.name, ours.get(v.name, ""), v.dims, v.shape, str(v.stored), v.units or "", v.chunks,
            space * v.dtype.itemsize, why.get(v.name, "not used"),
        ))  # fmt: skip
    return tuple(found)


def _times(collection: Collection, name: str) -> int:
    return next(entry.count for entry in collection.entries if name in collection.header(entry).variables)


def _disk_bytes(path: Path) -> int:
    if path.is_file():
        return path.stat().st_size
    return sum(p.stat().st_size for p in path.rglob("*") if p.is_file())


def propose_settings(report: FieldsReport) -> dict[str, Any]:
    """Keys of [fields] that say explicitly what was recognised, so that the recipe no longer depends on detection.

    Paths are those of the report. Where something is missing, only what is known is proposed. Raises LespostError if the
    proposal would not be accepted as a recipe.
    """
    keys: dict[str, Any] = {"path": report.paths[0] if len(report.paths) == 1 else list(report.paths)}
    given = report.settings.model_dump(exclude_defaults=True, exclude={"path"}) if report.settings is not None else {}
    keys.update(_lists(given))
    names = {v.ours: v.name for v in report.variables if v.ours}
    if names:
        keys["names"] = {**keys.get("names", {}), **names}
    if report.layout:
        layout = dict(report.layout)
        axes = layout.pop("axes")
        order = next((d for d in report.decisions if d.subject == "order of axes"), None)
        if axes and order is not None and order.how == "detected":
            keys["axes"] = axes
        keys.update(layout)
    try:
        FieldsSettings.model_validate(keys)
    except ValueError as error:
        raise LespostError(f"the proposed [fields] table is not valid ({error}); this is a fault of the program.") from None
    return keys


def _common_axes(data: xr.Dataset) -> list[str]:
    """The stored order of axes, empty where the fields differ in it (one line of axes cannot stand for them)."""
    orders = {str(field.attrs["source_axes"]) for field in data.data_vars.values()}
    return orders.pop().split() if len(orders) == 1 else []


def _lists(value: Any) -> Any:
    """Tuples as lists, as TOML has them."""
    if isinstance(value, dict):
        return {key: _lists(item) for key, item in value.items()}
    if isinstance(value, tuple | list):
        return [_lists(item) for item in value]
    return value
