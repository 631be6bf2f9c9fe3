"""The vertical grid: heights of centres and faces (z <= 0, upward), and which end of the files is the surface.

What the files say is collected first (`evidence`); where they do not say which end is up, `lespost.fields.detect` asks
continuity; then the grid is built (`build`).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from lespost.errors import LayoutError
from lespost.fields.axes import coordinate_of
from lespost.fields.continuity import WOffset
from lespost.fields.horizontal import attribute_length, length_factor
from lespost.fields.settings import FieldsSettings
from lespost.fields.variable import RawFile, RawVariable
from lespost.findings import Decision

How = Literal["recipe", "metadata", "detected", "default"]
_SPACING = ("dz", "deltaz", "zspacing")
_DEPTH = ("h", "lz", "lengthz", "depth", "domaindepth", "waterdepth")


@dataclass(frozen=True)
class VerticalEvidence:
    """What recipe and files say, in the order of the file and in m.

    cells: number of cells. centres, faces: coordinate values or None. sense: whether they are heights or depths, None if
    open. surface_first: None if open. thickness: of the cells, as well as known before the direction is.
    w_offset: where w's own coordinate puts it, None if open.
    """

    cells: int
    centres: np.ndarray | None
    faces: np.ndarray | None
    sense: Literal["up", "depth"] | None
    surface_first: bool | None
    thickness: np.ndarray
    w_offset: WOffset | None
    how: How
    text: str


@dataclass(frozen=True)
class VerticalGrid:
    """z: cell centres, z_face: faces, ascending, m, surface last. surface_first: the file runs downward."""

    z: np.ndarray
    z_face: np.ndarray
    surface_first: bool
    decisions: tuple[Decision, ...] = ()


def evidence(
    file: RawFile, w_file: RawFile, dim: str, w_dim: str, cells: int, w_levels: int, settings: FieldsSettings
) -> VerticalEvidence:
    """Collect what is known. Raises LayoutError for contradictions and where no spacing is known at all."""
    centre_variable = coordinate_of(file, dim, "z", settings)
    face_variable = coordinate_of(w_file, w_dim, "z", settings) if w_dim != dim else None
    centres = _values(file, centre_variable, cells, settings, "z")
    own = _values(w_file, face_variable, w_levels, settings, "z_face" if "z_face" in settings.units else "z")
    how: How = "metadata"
    text = f'coordinate "{centre_variable.name}"' if centre_variable is not None and centres is not None else ""
    if settings.z or settings.z_face:
        how, text = "recipe", "[fields].z" if settings.z else "[fields].z_face"
        if settings.z:
            centres = _declared(settings.z, cells, "z", dim)
        if settings.z_face:
            own = _declared(settings.z_face, cells + 1, "z_face", dim)
    sense, sense_how, sense_text = _sense(centres, own, centre_variable, face_variable, settings)
    if sense is None and centres is None and own is None and settings.surface == "auto":
        sense_text = ""
    offset, faces = _w_offset(centres, own, cells, w_levels, settings)
    if centres is None and faces is not None and len(faces) == cells + 1:
        centres = 0.5 * (faces[1:] + faces[:-1])
        text = text or "faces of w"
    if centres is None:
        spacing, text, how = _uniform(file, cells, settings, dim)
        thickness = np.full(cells, spacing)
    else:
        _monotone(centres, file, dim)
        thickness = _thickness(centres, faces, sense)
    surface_first = _surface_first(centres, sense, settings, file)
    return VerticalEvidence(
        cells, centres, faces, sense, surface_first, thickness, offset,
        how if centres is None or sense_how == "metadata" else sense_how, "; ".join(t for t in (text, sense_text) if t),
    )


def _values(
    file: RawFile, variable: RawVariable | None, size: int, settings: FieldsSettings, key: str
) -> np.ndarray | None:
    if variable is None or variable.shape != (size,):
        return None
    numbers = np.asarray(file.values(variable.name), np.float64)
    counts = variable.units is None and size > 1 and np.allclose(np.abs(np.diff(numbers)), 1.0)
    if counts and (settings.dz is not None or settings.z or settings.z_face):
        return None
    return numbers * length_factor(variable.units, settings, key, variable.describe())


def _declared(values: tuple[float, ...], size: int, key: str, dim: str) -> np.ndarray:
    if len(values) != size:
        raise LayoutError(f'[fields].{key} lists {len(values)} heights, but dimension "{dim}" needs {size}.')
    return np.asarray(values, np.float64)


def _monotone(values: np.ndarray, file: RawFile, dim: str) -> None:
    steps = np.diff(values)
    if len(steps) and not ((steps > 0).all() or (steps < 0).all()):
        raise LayoutError(f'{file.path}: the vertical coordinate of dimension "{dim}" is not monotonic; write [fields].z.')


def _sense(
    centres: np.ndarray | None, own: np.ndarray | None, centre_variable: RawVariable | None,
    face_variable: RawVariable | None, settings: FieldsSettings,
) -> tuple[Literal["up", "depth"] | None, How, str]:
    """Heights or depths. A label that contradicts the sign of the values leaves it open, for continuity to decide."""
    known = centres if centres is not None else own
    if known is None:
        return (None, "detected", "") if settings.z_sense == "auto" else (settings.z_sense, "recipe", "[fields].z_sense")
    low, high = float(np.min(known)), float(np.max(known))
    if settings.z_sense != "auto":
        if settings.z_sense == "depth" and high <= 0 and low < 0:
            raise LayoutError(
                f'[fields].z_sense = "depth", but the vertical coordinate runs from {low:g} to {high:g} m: depths are '
                'positive. Write z_sense = "up".'
            )
        return settings.z_sense, "recipe", f'[fields].z_sense = "{settings.z_sense}"'
    if settings.z or settings.z_face:
        return "up", "recipe", "heights of the recipe"
    variable = centre_variable if centres is not None else face_variable
    label: Literal["up", "depth"] | None = None
    words = ""
    if variable is not None:
        positive = str(variable.attrs.get("positive", "")).strip().lower()
        standard = str(variable.attrs.get("standard_name", "")).strip()
        if positive in ("up", "down"):
            label, words = ("up" if positive == "up" else "depth"), f'positive = "{positive}"'
        elif standard in ("depth", "height", "altitude"):
            label, words = ("depth" if standard == "depth" else "up"), f'standard_name = "{standard}"'
        elif "dep" in variable.name.lower() and low >= 0:
            label, words = "depth", f'name "{variable.name}"'
    if low < 0 and high <= 0:
        if label == "depth":
            return None, "detected", f"{words} contradicts the negative values"
        return "up", "metadata", words or "negative values"
    return label, ("metadata" if label else "detected"), words


def _w_offset(
    centres: np.ndarray | None, own: np.ndarray | None, cells: int, w_levels: int, settings: FieldsSettings
) -> tuple[WOffset | None, np.ndarray | None]:
    """Where w sits by its coordinate or number of levels, and the faces that this gives (in file order, maybe partial)."""
    if own is not None and len(own) == cells + 1:
        return ("faces" if w_levels == cells + 1 else None), own
    if w_levels == cells + 1:
        return "faces", None
    if w_levels == cells - 1:
        return "interior", None
    if own is None or centres is None or len(own) != cells or cells < 2:
        return None, None
    step = float(np.median(np.diff(centres)))
    shift = float(np.median((own - centres) / step))
    if abs(shift) < 0.02:
        return "centre", None
    offset: WOffset = "low" if shift < 0 else "high"
    missing = 2.0 * (centres[-1] if offset == "low" else centres[0]) - (own[-1] if offset == "low" else own[0])
    return offset, np.append(own, missing) if offset == "low" else np.insert(own, 0, missing)


def _uniform(file: RawFile, cells: int, settings: FieldsSettings, dim: str) -> tuple[float, str, How]:
    if settings.dz is not None:
        return settings.dz, "[fields].dz", "recipe"
    stated = attribute_length(file.attrs, _SPACING, settings)
    if stated is not None:
        return stated[0], f'attribute "{stated[1]}"', "metadata"
    depth = attribute_length(file.attrs, _DEPTH, settings)
    if depth is not None:
        return depth[0] / cells, f'attribute "{depth[1]}" over {cells} levels', "metadata"
    raise LayoutError(
        f'{file.path}: the vertical grid (dimension "{dim}", {cells} levels) is not stated; write [fields].dz, e.g. dz = '
        '"1.25 m", or the heights [fields].z = [...].'
    )


def _thickness(centres: np.ndarray, faces: np.ndarray | None, sense: Literal["up", "depth"] | None) -> np.ndarray:
    """Cell thicknesses in file order, from the faces or, without them, from the centres as `build` will do it."""
    if faces is not None and len(faces) == len(centres) + 1:
        return np.abs(np.diff(faces))
    heights = -centres if sense == "depth" else centres
    backward = len(heights) > 1 and bool(heights[-1] < heights[0])
    ascending = heights[::-1] if backward else heights
    if sense is not None and ascending[-1] <= 0.0 and not is_uniform(centres):
        exact = recursive_faces(ascending, 0.0)
        if exact is not None:
            return np.diff(exact)[::-1] if backward else np.diff(exact)
    return np.abs(np.diff(midpoint_faces(centres)))


def is_uniform(centres: np.ndarray) -> bool:
    """Whether the levels are evenly spaced (within what single-precision coordinates allow)."""
    return len(centres) < 3 or bool(np.ptp(np.diff(centres)) <= 1e-4 * np.abs(np.mean(np.diff(centres))))


def midpoint_faces(centres: np.ndarray) -> np.ndarray:
    """Faces halfway between centres; the outer ones as far beyond the last centre as the next face is before it."""
    if len(centres) == 1:
        return np.array([2.0 * centres[0], 0.0]) if centres[0] < 0 else np.array([0.0, 2.0 * centres[0]])
    middle = 0.5 * (centres[1:] + centres[:-1])
    return np.concatenate([[2 * centres[0] - middle[0]], middle, [2 * centres[-1] - middle[-1]]])


def recursive_faces(centres: np.ndarray, top: float) -> np.ndarray | None:
    """Faces for which every centre lies halfway, from the uppermost face `top` down; None if they would cross.

    centres: ascending. This is exact for grids whose centres are the middles of their cells.
    """
    faces = np.empty(len(centres) + 1)
    faces[-1] = top
    for k in range(len(centres) - 1, -1, -1):
        faces[k] = 2.0 * centres[k] - faces[k + 1]
    thickness = np.diff(faces)
    if (thickness <= 0).any():
        return None
    ratio = thickness[1:] / thickness[:-1]
    return faces if ((ratio > 0.5) & (ratio < 2.0)).all() else None


def _surface_first(
    centres: np.ndarray | None, sense: Literal["up", "depth"] | None, settings: FieldsSettings, file: RawFile
) -> bool | None:
    declared = None if settings.surface == "auto" else settings.surface == "first"
    if centres is None or sense is None or len(centres) < 2:
        return declared
    ascending = bool(centres[-1] > centres[0])
    implied = ascending if sense == "depth" else not ascending
    if declared is not None and declared != implied:
        raise LayoutError(
            f'{file.path}: [fields].surface = "{settings.surface}", but the vertical coordinate ({centres[0]:g} to '
            f'{centres[-1]:g} m, {sense}) puts the surface {"first" if implied else "last"}; correct surface or z_sense.'
        )
    return implied


def build(found: VerticalEvidence, surface_first: bool, settings: FieldsSettings, where: str) -> VerticalGrid:
    """Centres and faces, ascending, 0 at the mean surface. Raises LayoutError where the surface's height is open."""
    ascending = None
    if found.centres is not None and len(found.centres) > 1:
        ascending = bool(found.centres[-1] > found.centres[0])
    sense = found.sense
    if sense is None and ascending is not None:
        sense = "depth" if ascending == surface_first else "up"
    if found.centres is None:
        height = np.cumsum(np.concatenate([[0.0], found.thickness[::-1]]))
        faces = -height[::-1]
        return VerticalGrid(0.5 * (faces[1:] + faces[:-1]), faces, surface_first)
    sign = -1.0 if sense == "depth" else 1.0
    centres = sign * found.centres
    known = sign * found.faces if found.faces is not None and len(found.faces) == found.cells + 1 else None
    if surface_first:
        centres, known = centres[::-1], known[::-1] if known is not None else None
    faces = known if known is not None else midpoint_faces(centres)
    datum, text = _datum(centres, faces, sense, settings, where)
    if known is None and not is_uniform(centres):
        exact = recursive_faces(centres, datum)
        faces = exact if exact is not None else faces
    centres, faces = centres - datum, faces - datum
    if abs(faces[-1]) < 1e-3 * (faces[-1] - faces[-2]):
        faces[-1] = 0.0
    if faces[-1] > 0.02 * (faces[-1] - faces[-2]) or centres[-1] > 0:
        raise LayoutError(
            f"{where}: the highest level ({centres[-1]:.6g} m, upper face {faces[-1]:.6g} m) lies above the mean surface; "
            "write [fields].surface_height, the file's vertical coordinate at the surface."
        )
    decision = Decision("height of the surface", f"{datum:g} m in the file's upward coordinate", *text)
    return VerticalGrid(centres, faces, surface_first, (decision,))


def _datum(
    centres: np.ndarray, faces: np.ndarray, sense: str | None, settings: FieldsSettings, where: str
) -> tuple[float, tuple[How, str]]:
    if settings.surface_height is not None:
        return settings.surface_height, ("recipe", "[fields].surface_height")
    if sense == "depth" or centres[-1] <= 0.0:
        return 0.0, ("metadata", "depths count from it" if sense == "depth" else "all heights are negative")
    if centres[0] >= 0.0:
        return float(faces[-1]), ("metadata", "heights count from the bottom; the surface is the highest face")
    raise LayoutError(
        f"{where}: heights run from {centres[0]:g} to {centres[-1]:g} m; write [fields].surface_height, the value at the "
        "mean surface."
    )
