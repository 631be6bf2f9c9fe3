"""What the one pass must know of the fields before it reads any: sizes, positions on the grid, spacings, scalars.

Everything comes from the canonical dataset's coordinates; `lespost.profiles.blocks` reads, `lespost.profiles.one_pass` sums.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import xarray as xr

from lespost.errors import DataError
from lespost.fields.geometry import level_thickness, on_faces, spacing
from lespost.kernels.rows import ALONG_X, ALONG_Y, CENTRED

#: Fields besides velocity and scalars that the pass reads where they exist.
SUBGRID_FIELDS = ("nu_sgs", "tke_sgs")


@dataclass(frozen=True, eq=False)
class Layout:
    """Sizes and positions. z, dz: (nz,) m, z_face: (nz + 1,) m, all upward with the surface last; dx, dy in m.

    u_arrangement, v_arrangement: where they sit in the horizontal (see `lespost.kernels.rows`). on_z_faces: names of the
    fields that sit on z faces. scalars: names, theta first. names: all fields that the pass reads. divergence: how it is
    formed, in words.
    """

    nz: int
    ny: int
    nx: int
    dx: float
    dy: float
    z: np.ndarray
    z_face: np.ndarray
    dz: np.ndarray
    u_arrangement: int
    v_arrangement: int
    on_z_faces: frozenset[str]
    scalars: tuple[str, ...]
    names: tuple[str, ...]
    itemsize: int
    divergence: str
    prandtl_number: float | None

    @property
    def w_on_faces(self) -> bool:
        """Whether w sits on z faces (staggered in the vertical)."""
        return "w" in self.on_z_faces

    @property
    def fully_staggered(self) -> bool:
        """Whether u, v, w all sit on the faces of the cells, so that the discrete divergence is the model's own."""
        return self.w_on_faces and self.u_arrangement == ALONG_X and self.v_arrangement == ALONG_Y

    def levels(self, name: str) -> int:
        """Number of levels of a field."""
        return self.nz + 1 if name in self.on_z_faces else self.nz

    def level_bytes(self, name: str) -> int:
        """Bytes of one level of a field in memory."""
        return self.ny * self.nx * self.itemsize


def layout_of(fields: xr.Dataset, prandtl_number: float | None = None) -> Layout:
    """The layout of a canonical dataset.

    prandtl_number: overrides the dataset's attribute of that name.
    Raises DataError if u, v or w is missing or a field sits where it cannot be used.
    """
    missing = [name for name in ("u", "v", "w") if name not in fields]
    if missing:
        raise DataError(f"the fields hold no {', '.join(missing)}: the profiles need all three velocity components.")
    scalars = [str(name) for name in ("theta", "salinity") if name in fields]
    scalars += sorted(str(name) for name in fields.data_vars if str(name).startswith("tracer_") and fields[name].ndim == 4)
    names = ("u", "v", "w", *scalars, *(name for name in SUBGRID_FIELDS if name in fields))
    positions = {name: on_faces(fields, name) for name in names}
    for name, (z, y, x) in positions.items():
        allowed = (name in ("w", *SUBGRID_FIELDS) or not z) and (name == "v" or not y) and (name == "u" or not x)
        if not allowed:
            raise DataError(f'"{name}" sits on {fields[name].dims}: only u may sit on x faces, v on y faces, w on z faces.')
    dx, dy = spacing(fields)
    stated = fields.attrs.get("prandtl_number")
    return Layout(
        nz=fields.sizes["z"], ny=fields.sizes["y"], nx=fields.sizes["x"], dx=dx, dy=dy,
        z=np.asarray(fields["z"].values, np.float64), z_face=np.asarray(fields["z_face"].values, np.float64),
        dz=np.asarray(level_thickness(fields), np.float64),
        u_arrangement=ALONG_X if positions["u"][2] else CENTRED,
        v_arrangement=ALONG_Y if positions["v"][1] else CENTRED,
        on_z_faces=frozenset(name for name, (z, _, _) in positions.items() if z),
        scalars=tuple(scalars), names=names,
        itemsize=max(fields[name].dtype.itemsize for name in names),
        divergence=_divergence_in_words(positions, str(fields.attrs.get("horizontal_scheme", ""))),
        prandtl_number=prandtl_number if prandtl_number is not None else None if stated is None else float(stated),
    )


def _divergence_in_words(positions: dict[str, tuple[bool, bool, bool]], scheme: str) -> str:
    x, y, z = positions["u"][2], positions["v"][1], positions["w"][0]
    if x and y and z:
        return "differences over one cell between its faces, the divergence of the staggered grid itself"
    words = "one cell between its faces" if z else "two levels"
    text = f"central differences over two cells in the horizontal, over {words} in the vertical"
    if scheme == "spectral":
        text += "; the model's own horizontal derivative is spectral, so what remains at small scales is no fault"
    return text


def tile_counts(layout: Layout, wanted: int) -> tuple[int, int]:
    """(tiles along y, tiles along x): for each axis the divisor nearest to `wanted` (the larger of two equally near).

    An axis with no divisor between half and twice `wanted` (a prime number of points, say) is not divided at all.
    """
    counts = []
    for points in (layout.ny, layout.nx):
        divisors = [n for n in range(1, points + 1) if points % n == 0 and wanted / 2 <= n <= 2 * wanted]
        counts.append(min(divisors, key=lambda n: (abs(n - wanted), -n), default=1) if wanted > 1 else 1)
    return counts[0], counts[1]
