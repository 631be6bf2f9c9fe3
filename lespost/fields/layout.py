"""From evidence to a layout: which stored axis becomes which canonical one, in what direction, on what grid.

This module samples the fields, asks `lespost.fields.detect` for what is open, and returns the plan by which
`lespost.fields.canonical` reads. Files are only read here for the sample: a few levels where the vertical axis is known.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass, replace
from typing import Literal, cast

import numpy as np

from lespost.errors import DataError, LayoutError
from lespost.fields import vertical
from lespost.fields.axes import Axes, Role
from lespost.fields.continuity import WOffset, offsets_of, rounding_error, scores, w_terms
from lespost.fields.detect import Candidate, Pins, Verdict, choose, w_position
from lespost.fields.horizontal import HorizontalAxis, offset_from_coordinates, read_axis, repeats_first
from lespost.fields.settings import FieldsSettings
from lespost.fields.stack import StackedVariable
from lespost.fields.variable import RawFile
from lespost.findings import Decision, Finding

#: Numbers per component in one slab of the sample, and its largest number of cells in the vertical.
SAMPLE_POINTS, SAMPLE_CELLS = 1 << 20, 8
#: A whole snapshot (needed only where the vertical axis is open) must not be larger than this many bytes.
WHOLE_LIMIT = 4 << 30
VELOCITY = ("u", "v", "w")


@dataclass(frozen=True)
class Layout:
    """How the files are arranged.

    roles: of the axes in space of every field, file order. x, y: the horizontal axes at cell centres; nx, ny: points used.
    u_x, v_y: the axes that u and v have along their own direction. u_dim, w_dim, w_levels: vertical dimensions of u and w.
    grid: vertical. verdict: of continuity.
    """

    roles: dict[str, tuple[Role, ...]]
    x: HorizontalAxis
    y: HorizontalAxis
    nx: int
    ny: int
    u_x: HorizontalAxis
    v_y: HorizontalAxis
    u_dim: str
    w_dim: str
    w_levels: int
    grid: vertical.VerticalGrid
    verdict: Verdict
    decisions: tuple[Decision, ...]
    findings: tuple[Finding, ...]


@dataclass(frozen=True)
class _Setting:
    """One assignment of roles with the axes and vertical evidence that follow from it."""

    roles: dict[str, tuple[Role, ...]]
    x: HorizontalAxis
    y: HorizontalAxis
    u_x: HorizontalAxis
    v_y: HorizontalAxis
    found: vertical.VerticalEvidence


class _Sample:
    """Reads u, v, w of one snapshot as (z, y, x) in the file's directions; whole snapshots are read once and kept."""

    def __init__(self, fields: dict[str, StackedVariable], t: int, whole: bool) -> None:
        self.fields, self.t, self.whole = fields, t, whole
        self._kept: dict[str, np.ndarray] = {}

    def get(self, name: str, roles: tuple[Role, ...], z0: int, z1: int) -> np.ndarray:
        """Levels z0 .. z1 - 1 of the file."""
        field = self.fields[name]
        order = tuple(roles.index(r) for r in ("z", "y", "x"))
        slices = [slice(0, n) for n in field.shape[1:]]
        time = slice(self.t, self.t + 1)
        if self.whole:
            if name not in self._kept:
                self._kept[name] = field.read((time, *slices))[0]
            return self._kept[name].transpose(order)[z0:z1]
        slices[roles.index("z")] = slice(z0, z1)
        return field.read((time, *slices))[0].transpose(order)


def decide(
    fields: dict[str, StackedVariable], axes: dict[str, Axes], files: dict[str, RawFile], settings: FieldsSettings, where: str
) -> Layout:
    """The layout of the velocity and, following it, of every other field.

    fields: ours -> stacked variable. axes: roles of the axes in space. files: the header each field is described in.
    Raises LayoutError where evidence is missing or contradictory, DataError where the sample holds NaN.
    """
    decided = all(axes[name].decided for name in VELOCITY)
    if decided:
        options = [_setting({n: cast(tuple[Role, ...], axes[n].roles) for n in VELOCITY}, fields, files, settings)]
    else:
        options = _open_settings(fields, axes, files, settings, where)
    sample_time = fields["u"].shape[0] - 1
    chosen: tuple[Verdict, _Setting, dict[str, bool]] | None = None
    for t in dict.fromkeys((sample_time, sample_time // 2, 0)):
        sample = _Sample(fields, t, whole=not decided)
        candidates: list[Candidate] = []
        pins: list[Pins] = []
        repeated: list[dict[str, bool]] = []
        for option in list(options):
            try:
                repeats = _repeats(option, sample, settings)
                candidates += _candidates(option, sample, repeats, settings, swap=decided)
            except LayoutError:  # one of several assignments of open axes does not fit the sizes
                if len(options) == 1:
                    raise
                options.remove(option)
                continue
            repeated.append(repeats)
            pins.append(_pins(option, settings, decided))
        if any(math.isfinite(c.score.residual) for c in candidates) or t == 0:
            verdict = _choose(candidates, options, pins, where, decided)
            which = next(
                (i for i, o in enumerate(options) if o.roles["u"] == verdict.candidate.roles), 0
            )
            chosen = (verdict, options[which], repeated[which])
            break
    assert chosen is not None
    return _finish(chosen, fields, axes, settings, where, decided)


def _choose(
    candidates: list[Candidate], options: list[_Setting], pins: list[Pins], where: str, decided: bool
) -> Verdict:
    if decided:
        return choose(candidates, pins[0], where)
    # every open assignment has its own pins (its coordinates may fix direction or stagger): keep what they allow
    own = {option.roles["u"]: pin for option, pin in zip(options, pins, strict=True)}
    return choose([c for c in candidates if own[c.roles].allow(c)], Pins(), where)


def _open_settings(
    fields: dict[str, StackedVariable], axes: dict[str, Axes], files: dict[str, RawFile], settings: FieldsSettings, where: str
) -> list[_Setting]:
    """Every assignment of x, y, z to open axes that sizes and coordinates allow."""
    total = sum(math.prod(fields[n].shape[1:]) * fields[n].dtype.itemsize for n in VELOCITY)
    if total > WHOLE_LIMIT:
        raise LayoutError(
            f"{where}: neither names nor attributes say which axis is which, and one snapshot ({total / 1e9:.1f} GB) is too "
            'large to try all; write [fields].axes, e.g. axes = ["time", "z", "y", "x"].'
        )
    options: list[_Setting] = []
    reasons: list[str] = []
    for order in itertools.permutations(cast(tuple[Role, ...], ("z", "y", "x"))):
        if any(known is not None and known != role for n in VELOCITY for known, role in zip(axes[n].roles, order, strict=True)):
            continue
        try:
            options.append(_setting(dict.fromkeys(VELOCITY, order), fields, files, settings))
        except LayoutError as error:
            reasons.append(str(error))
    if not options:
        raise LayoutError(reasons[0] if reasons else f"{where}: the axes of u, v and w disagree; write [fields].axes.")
    return options


def _setting(
    roles: dict[str, tuple[Role, ...]], fields: dict[str, StackedVariable], files: dict[str, RawFile], settings: FieldsSettings
) -> _Setting:
    def axis(name: str, role: Literal["x", "y"]) -> HorizontalAxis:
        position = roles[name].index(role) + 1
        return read_axis(files[name], fields[name].dims[position], fields[name].shape[position], role, settings)

    def along_z(name: str) -> tuple[str, int]:
        position = roles[name].index("z") + 1
        return fields[name].dims[position], fields[name].shape[position]

    (dim, cells), (w_dim, levels) = along_z("u"), along_z("w")
    if along_z("v")[1] != cells or not offsets_of(levels, cells):
        raise LayoutError(
            f"{files['u'].path}: u has {cells} levels, v {along_z('v')[1]}, w {levels}; w must have as many as u, one more "
            "(all faces) or one less (interior faces). Check [fields].names and axes."
        )
    found = vertical.evidence(files["u"], files["w"], dim, w_dim, cells, levels, settings)
    x, y = axis("w", "x"), axis("w", "y")
    u_x = replace(axis("u", "x"), spacing=x.spacing)
    v_y = replace(axis("v", "y"), spacing=y.spacing)
    for own, centre in ((u_x, x), (v_y, y)):
        if abs(own.size - centre.size) > 1:
            raise LayoutError(
                f'{files["u"].path}: dimensions "{own.dim}" ({own.size}) and "{centre.dim}" ({centre.size}) differ by more '
                "than one point; write [fields].axes."
            )
    return _Setting(roles, x, y, u_x, v_y, found)


def _repeats(option: _Setting, sample: _Sample, settings: FieldsSettings) -> dict[str, bool]:
    """For x, y and the own axes of u and v: whether the last stored point repeats the first."""
    middle = option.found.cells // 2
    out: dict[str, bool] = {}
    planes = {n: sample.get(n, option.roles[n], middle, middle + 1) for n in VELOCITY}
    for role, centre, own, mover, axis in (("x", option.x, option.u_x, "u", 2), ("y", option.y, option.v_y, "v", 1)):
        same = own.dim == centre.dim
        told = [repeats_first(planes[n], axis) for n in VELOCITY if same or n != mover]
        certain = [t for t in told if t is not None]
        if settings.periodic_column != "auto":
            repeated = settings.periodic_column in (role, "both")
        elif certain:
            repeated = all(certain)
        else:  # nothing varies along this axis: the stated length of the domain may tell
            length = centre.length or math.inf
            repeated = abs(centre.spacing * (centre.size - 1) - length) < 1e-3 * length
        out[role] = repeated
        count = centre.size - repeated
        out[f"{mover}_{role}"] = repeated if same else own.size == count + 1
    return out


def _prepared(values: np.ndarray, x: HorizontalAxis, y: HorizontalAxis, drop_x: bool, drop_y: bool) -> np.ndarray:
    """Repeated points left out, x and y ascending."""
    values = values[:, : values.shape[1] - drop_y, : values.shape[2] - drop_x]
    return values[:, :: -1 if y.reversed else 1, :: -1 if x.reversed else 1]


def _spacing(axis: HorizontalAxis, repeated: bool) -> float:
    """The spacing, where it came from a length over all points: without the repeated one."""
    if repeated and axis.length is not None and math.isclose(axis.spacing * axis.size, axis.length):
        return axis.length / (axis.size - 1)
    return axis.spacing


def _slabs(cells: int, plane: int) -> list[tuple[int, int]]:
    """(first cell, number of cells) of the sample: near both ends, since either may be the quiet one."""
    if cells < 4:
        return [(0, cells)]
    count = max(1, min(SAMPLE_CELLS, SAMPLE_POINTS // max(plane, 1), cells - 2))
    low = max(1, min(cells // 8, cells - 1 - count))
    high = max(1, cells - 1 - count - max(0, cells // 8 - 1))
    return [(low, count)] if low == high else [(low, count), (high, count)]


def _candidates(
    option: _Setting, sample: _Sample, repeats: dict[str, bool], settings: FieldsSettings, swap: bool
) -> list[Candidate]:
    roles, found = option.roles, option.found
    levels = sample.fields["w"].shape[1 + roles["w"].index("z")]
    sign = -1.0 if settings.w_positive == "down" else 1.0
    dx, dy = _spacing(option.x, repeats["x"]), _spacing(option.y, repeats["y"])
    offsets: tuple[WOffset, ...] = (found.w_offset,) if found.w_offset else offsets_of(levels, found.cells)
    best: list[Candidate] = []
    strength = -1.0
    for k0, count in _slabs(found.cells, option.x.size * option.y.size):
        first, last = max(0, k0 - 1), min(levels, k0 + count + 1)
        w = _prepared(sample.get("w", roles["w"], first, last), option.x, option.y, repeats["x"], repeats["y"])
        u = _prepared(
            sample.get("u", roles["u"], k0, k0 + count), option.u_x, option.y, repeats["u_x"], repeats["y"]
        )
        v = _prepared(
            sample.get("v", roles["v"], k0, k0 + count), option.x, option.v_y, repeats["x"], repeats["v_y"]
        )
        for name, values in (("u", u), ("v", v), ("w", w)):
            if not np.isfinite(values).all():
                _refuse_nan(name, values, sample, first if name == "w" else k0)
        energy = float(np.mean(np.square(w, dtype=np.float64)))
        if energy <= strength or u.shape != v.shape or u.shape[1:] != w.shape[1:]:
            continue
        strength = energy
        terms = w_terms(sign * np.asarray(w, np.float64), first, k0, count, found.thickness, offsets)
        if not terms:
            continue
        dz = float(np.mean(found.thickness))
        error = rounding_error(w)
        best = [Candidate(roles["u"], s) for s in scores(u, v, terms, error, dx, dy, dz)]
        if swap:
            exchanged = cast(tuple[Role, ...], tuple({"x": "y", "y": "x"}.get(r, r) for r in roles["u"]))
            turned = {key: term.swapaxes(1, 2) for key, term in terms.items()}
            best += [
                Candidate(exchanged, s)
                for s in scores(u.swapaxes(1, 2), v.swapaxes(1, 2), turned, error, dy, dx, dz)
            ]
    if not best:
        raise LayoutError(
            f"{sample.fields['u'].path}: u {sample.fields['u'].shape[1:]}, v {sample.fields['v'].shape[1:]} and w "
            f"{sample.fields['w'].shape[1:]} do not fit on one grid; check [fields].names, axes and periodic_column."
        )
    return best


def _refuse_nan(name: str, values: np.ndarray, sample: _Sample, first: int) -> None:
    bad = ~np.isfinite(values)
    level = first + int(np.flatnonzero(bad.any(axis=(1, 2)))[0])
    path, index = sample.fields[name].snapshot_source(sample.t)
    raise DataError(
        f"{path}: {name} holds {int(bad.sum())} values that are not numbers in a sample of {bad.size} (snapshot {index + 1}, "
        f"from level {level + 1} on). Statistics over them would be wrong: write the snapshot again or take it out of "
        "[fields].path."
    )


def _pins(option: _Setting, settings: FieldsSettings, decided: bool) -> Pins:
    def horizontal(declared: str, own: HorizontalAxis, centre: HorizontalAxis) -> str | None:
        return offset_from_coordinates(own, centre) if declared == "auto" else declared

    found = option.found
    z_sign = None if found.surface_first is None else (-1 if found.surface_first else 1)
    return Pins(
        roles=option.roles["u"] if decided else None,
        z_sign=z_sign,
        w_offsets=frozenset({found.w_offset} if found.w_offset and settings.w_position == "auto" else ()),
        w_position=None if settings.w_position == "auto" else settings.w_position,
        u_position=horizontal(settings.u_position, option.u_x, option.x),  # type: ignore[arg-type]
        v_position=horizontal(settings.v_position, option.v_y, option.y),  # type: ignore[arg-type]
        scheme=None if settings.horizontal_scheme == "auto" else settings.horizontal_scheme,
    )


def _finish(
    chosen: tuple[Verdict, _Setting, dict[str, bool]], fields: dict[str, StackedVariable], axes: dict[str, Axes],
    settings: FieldsSettings, where: str, decided: bool,
) -> Layout:
    verdict, option, repeats = chosen
    score = verdict.candidate.score
    surface_first = score.z_sign < 0
    grid = vertical.build(option.found, surface_first, settings, where)
    x = replace(option.x, spacing=_spacing(option.x, repeats["x"]))
    y = replace(option.y, spacing=_spacing(option.y, repeats["y"]))
    roles = {n: cast(tuple[Role, ...], a.roles) for n, a in axes.items() if a.decided}
    for name in fields:
        if name not in roles:  # open axes follow those of the velocity
            roles[name] = option.roles["u"]
    roles.update(option.roles)
    position = w_position(score.w_offset, score.z_sign)
    pinned_w = option.found.w_offset is not None or settings.w_position != "auto"
    pinned_u = settings.u_position != "auto" or offset_from_coordinates(option.u_x, option.x) is not None
    pinned_v = settings.v_position != "auto" or offset_from_coordinates(option.v_y, option.y) is not None
    decisions = [
        verdict.decision("order of axes", ", ".join(option.roles["u"]), decided, axes["u"].evidence),
        verdict.decision(
            "surface", "first level" if surface_first else "last level", option.found.surface_first is not None,
            option.found.text,
        ),
        verdict.decision("w position", position, pinned_w, "levels and coordinate of w, or recipe"),
        verdict.decision("u position", score.u_position, pinned_u, "coordinate of u, or recipe", True),
        verdict.decision("v position", score.v_position, pinned_v, "coordinate of v, or recipe", True),
        verdict.decision("horizontal scheme", score.scheme, settings.horizontal_scheme != "auto", "recipe", True),
        Decision("x spacing", f"{x.spacing:.8g} m", x.how, x.evidence),
        Decision("y spacing", f"{y.spacing:.8g} m", y.how, y.evidence),
        Decision("vertical grid", f"{option.found.cells} levels, {grid.z_face[0]:.6g} to {grid.z_face[-1]:.6g} m",
                 option.found.how, option.found.text),
        *grid.decisions,
    ]  # fmt: skip
    for role in ("x", "y"):
        if repeats[role]:
            decisions.append(Decision(
                f"repeated {role} column", "left out",
                "detected" if settings.periodic_column == "auto" else "recipe", "the last point repeats the first",
            ))  # fmt: skip
    u_z, w_z = option.roles["u"].index("z") + 1, option.roles["w"].index("z") + 1
    return Layout(
        roles, x, y, x.size - repeats["x"], y.size - repeats["y"], option.u_x, option.v_y,
        fields["u"].dims[u_z], fields["w"].dims[w_z], fields["w"].shape[w_z], grid, verdict,
        tuple(decisions), verdict.findings,
    )
