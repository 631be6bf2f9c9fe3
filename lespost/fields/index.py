"""The index of all files of a run: which headers there are, and how many snapshots at what times each file holds.

Thousands of files are opened once each, one at a time, and never kept open; what was learnt is remembered in a small cache
file keyed by path, size and time of change, so that opening the same run again costs one look at each file's status.
"""

from __future__ import annotations

import hashlib
import json
import os
import tempfile
from collections.abc import Iterator
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from lespost.errors import DataError, RecipeError
from lespost.fields import netcdf, raw, zarr_store
from lespost.fields.axes import coordinate_of, name_role, time_dimension
from lespost.fields.hint_table import differences
from lespost.fields.paths import Kind, expand, sniff
from lespost.fields.settings import FieldsSettings
from lespost.fields.variable import RawFile, RawVariable
from lespost.findings import Decision, Finding

#: Fewer files than this are not worth a cache file.
CACHE_FROM = 16
#: Cache files kept; the oldest go first.
CACHE_KEEP = 50


@dataclass(frozen=True)
class FileEntry:
    """One file. template: number of the header it shares. count: snapshots. numbers: its times as stored, or None."""

    path: Path
    template: int
    count: int
    numbers: tuple[float, ...] | None


@dataclass(frozen=True)
class Collection:
    """All files of a run."""

    kind: Kind
    templates: tuple[RawFile, ...]
    entries: tuple[FileEntry, ...]
    decisions: tuple[Decision, ...] = ()
    findings: tuple[Finding, ...] = ()

    def header(self, entry: FileEntry) -> RawFile:
        """The header that `entry` shares."""
        return self.templates[entry.template]

    def holders(self, name: str) -> list[FileEntry]:
        """Entries whose header has the variable `name`."""
        return [entry for entry in self.entries if name in self.header(entry).variables]

    def first_with(self, name: str) -> RawFile:
        """The first header that has the variable `name`."""
        return next(file for file in self.templates if name in file.variables)

    def variables(self) -> dict[str, RawVariable]:
        """Every variable once, from the first header that has it."""
        found: dict[str, RawVariable] = {}
        for file in self.templates:
            for name, variable in file.variables.items():
                found.setdefault(name, variable)
        return found

    def where(self) -> str:
        """The files in a few words, for messages."""
        first = self.entries[0].path
        return str(first) if len(self.entries) == 1 else f"{first} and {len(self.entries) - 1} more"


def time_name(file: RawFile, settings: FieldsSettings) -> str | None:
    """The variable that holds the times of `file`: a series along its time axis, or a scalar."""
    named = settings.names.get("time")
    if named is not None:
        return named if named in file.variables else None
    dim = time_dimension(file, settings)
    if dim is not None:
        found = coordinate_of(file, dim, "time", settings)
        return found.name if found is not None else None
    scalars = [v.name for v in file.variables.values() if v.shape in ((), (1,)) and name_role(v.name) == "time"]
    return scalars[0] if len(scalars) == 1 else None


def collect(settings: FieldsSettings, base: Path) -> Collection:
    """The index of every file that [fields] names. Raises DataError or RecipeError for files that cannot be used."""
    if settings.raw is not None and settings.format in ("auto", "raw"):
        return _collect_raw(settings, base)
    paths = expand(settings.paths, base)
    kinds = {path: sniff(path) for path in paths}
    if len(set(kinds.values())) > 1:
        examples = {kind: path for path, kind in reversed(kinds.items())}
        raise DataError(
            f"[fields].path names netCDF files and zarr stores together ({examples['netcdf']}, {examples['zarr']}); "
            "give one kind."
        )
    kind = next(iter(kinds.values()))
    if settings.format not in ("auto", kind):
        raise RecipeError(f'[fields].format = "{settings.format}", but {paths[0]} is {kind}; correct or drop the key.')
    return _collect_netcdf(paths, settings) if kind == "netcdf" else _collect_stores(paths, settings)


def _entry(path: Path, template: int, file: RawFile, settings: FieldsSettings) -> FileEntry:
    dim = time_dimension(file, settings)
    count = 1
    for variable in file.variables.values():
        if dim in variable.dims and len(variable.dims) >= 3:
            count = variable.shape[variable.dims.index(dim)]
            break
    name = time_name(file, settings)
    numbers: tuple[float, ...] | None = None
    if name is not None:
        numbers = tuple(float(t) for t in np.ravel(file.values(name)))
    elif dim is None and isinstance(file.attrs.get("time"), int | float):
        numbers = (float(file.attrs["time"]),)
    if numbers is not None and len(numbers) != count:
        raise DataError(f'{path}: its time variable "{name}" has {len(numbers)} values for {count} snapshots.')
    return FileEntry(path, template, count, numbers)


def _signature(file: RawFile, settings: FieldsSettings) -> tuple[object, ...]:
    """What files that share a header have in common: everything but the number of snapshots and per-file packing."""
    dim = time_dimension(file, settings)
    return tuple(
        (v.name, v.dims, tuple(n for d, n in zip(v.dims, v.shape, strict=True) if d != dim), str(v.stored), v.units)
        for v in file.variables.values()
    )


def _collect_netcdf(paths: list[Path], settings: FieldsSettings) -> Collection:
    cache = _cache_file(paths, settings) if len(paths) >= CACHE_FROM else None
    known = _load(cache, paths)
    if known is not None:
        return known
    templates: list[RawFile] = []
    signatures: dict[tuple[object, ...], int] = {}
    entries: list[FileEntry] = []
    findings: list[Finding] = []
    wanted: set[str] | None = None
    other_run: Finding | None = None
    for path in paths:
        try:
            file = netcdf.read_header(path, wanted)
            signature = _signature(file, settings)
            if signature not in signatures:
                if wanted is not None:  # a header not met before: its coordinates are needed as well
                    file = netcdf.read_header(path)
                signatures[signature] = len(templates)
                templates.append(file)
            entries.append(_entry(path, signatures[signature], file, settings))
            note = _two_runs(templates[0], file) if not other_run else None
            other_run = other_run or note
        except DataError as error:
            if not settings.allow_gaps:
                raise DataError(f"{error}{_last_good(entries)}") from None
            findings.append(Finding("file-left-out", "warning", f"Left out, as allow_gaps allows: {error}"))
            continue
        wanted = {name for template in templates if (name := time_name(template, settings)) is not None}
    if not entries:
        raise DataError(f"{paths[0]}: none of the {len(paths)} files can be read; see the messages above each.")
    complete = not findings
    findings += [other_run] if other_run is not None else []
    collection = Collection("netcdf", tuple(templates), tuple(entries), (), tuple(findings))
    if complete:
        _save(cache, collection)
    return collection


def _two_runs(first: RawFile, other: RawFile) -> Finding | None:
    """A warning if two files state different forcing."""
    different = differences(first, other)
    if not different:
        return None
    return Finding(
        "files-differ", "warning",
        f"the files state different forcing ({', '.join(different)}): if they are two runs, give each its own recipe; if the "
        "forcing changes within the run, state it in [forcing].",
        float(len(different)), 0.0, "attributes",
    )  # fmt: skip


def _last_good(entries: list[FileEntry]) -> str:
    if not entries:
        return ""
    last = entries[-1]
    when = f" (time {last.numbers[-1]:.10g} in its own unit)" if last.numbers else ""
    return f" The last good snapshot before it is in {last.path.name}{when}."


def _collect_stores(paths: list[Path], settings: FieldsSettings) -> Collection:
    templates: list[RawFile] = []
    entries: list[FileEntry] = []
    for path in paths:
        file = zarr_store.read_header(path)
        if not file.variables:
            raise DataError(f"{path}: the zarr store holds no numeric array; give the store (or group) that holds u, v, w.")
        entries.append(_entry(path, len(templates), file, settings))
        templates.append(file)
    notes = [note for file in templates[1:] if (note := _two_runs(templates[0], file)) is not None]
    return Collection("zarr", tuple(templates), tuple(entries), (), tuple(notes[:1]))


def _collect_raw(settings: FieldsSettings, base: Path) -> Collection:
    description = settings.raw
    assert description is not None
    templates: list[RawFile] = []
    entries: list[FileEntry] = []
    findings: list[Finding] = []
    for pattern, names in raw.split_names(description).items():
        if pattern:
            paths = expand([str(Path(path) / pattern) for path in settings.paths], base, raw=True)
        else:
            paths = expand(settings.paths, base, raw=True)
        for path in paths:
            try:
                file = raw.read_header(path, description, names)
            except DataError as error:
                if not settings.allow_gaps:
                    raise
                findings.append(Finding("file-left-out", "warning", f"Left out, as allow_gaps allows: {error}"))
                continue
            count = next(iter(file.variables.values())).shape[0]
            entries.append(FileEntry(path, len(templates), count, None))
            templates.append(file)
    if not entries:
        raise DataError(f"{settings.paths[0]}: none of the raw files can be used; {findings[0].message}")
    decision = Decision("format", "raw binary", "recipe", "[fields.raw]")
    return Collection("raw", tuple(templates), tuple(entries), (decision,), tuple(findings))


def cache_folder() -> Path | None:
    """Where small caches go: $LESPOST_CACHE, the user's cache folder, or $TMPDIR where the home is not writable."""
    home = os.environ.get("LESPOST_CACHE") or os.environ.get("XDG_CACHE_HOME")
    choices = [Path(home) / "lespost"] if home else []
    with suppress(RuntimeError):
        choices.append(Path.home() / ".cache" / "lespost")
    choices.append(Path(tempfile.gettempdir()) / f"lespost-{os.getuid() if hasattr(os, 'getuid') else 'user'}")
    for choice in choices:
        with suppress(OSError):
            choice.mkdir(parents=True, exist_ok=True)
            if os.access(choice, os.W_OK):
                return choice
    return None


def _cache_file(paths: list[Path], settings: FieldsSettings) -> Path | None:
    folder = cache_folder()
    if folder is None:
        return None
    digest = hashlib.sha256(repr((settings.names.get("time"), settings.axes)).encode())
    try:
        for path in paths:
            status = path.stat()
            digest.update(f"{path}\0{status.st_size}\0{status.st_mtime_ns}\n".encode())
    except OSError:
        return None
    return folder / f"fields-index-{digest.hexdigest()[:32]}.json"


def _load(cache: Path | None, paths: list[Path]) -> Collection | None:
    if cache is None or not cache.exists():
        return None
    try:
        stored = json.loads(cache.read_text())
        templates = tuple(netcdf.read_header(paths[i]) for i in stored["templates"])
        entries = tuple(
            FileEntry(paths[i], template, count, None if numbers is None else tuple(numbers))
            for i, (template, count, numbers) in enumerate(stored["entries"])
        )
        findings = tuple(Finding(**finding) for finding in stored["findings"])
        if len(entries) != len(paths):
            return None
    except (ValueError, KeyError, TypeError, IndexError, OSError):
        return None  # a damaged cache is only a lost cache: the files are indexed again
    return Collection("netcdf", templates, entries, (), findings)


def _save(cache: Path | None, collection: Collection) -> None:
    if cache is None:
        return
    first = {entry.template: i for i, entry in reversed(list(enumerate(collection.entries)))}
    stored = {
        "templates": [first[i] for i in range(len(collection.templates))],
        "entries": [(e.template, e.count, e.numbers) for e in collection.entries],
        "findings": [finding.to_dict() for finding in collection.findings],
    }
    with suppress(OSError):
        partial = cache.with_suffix(f".{os.getpid()}")
        partial.write_text(json.dumps(stored))
        partial.replace(cache)
        for old in sorted(_caches(cache.parent), key=lambda p: p.stat().st_mtime)[:-CACHE_KEEP]:
            old.unlink(missing_ok=True)


def _caches(folder: Path) -> Iterator[Path]:
    return folder.glob("fields-index-*.json")
