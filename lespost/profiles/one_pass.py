"""The one pass: moments, fluxes, gradients and checks of every level of every snapshot, from a single reading of the bytes.

`block_statistics` turns a block into named arrays (pure; small enough to be journalled); `assemble` puts the arrays of all
blocks together as the profiles dataset; `profile_statistics` does both in this process. Reading is done in
`lespost.profiles.blocks`, subgrid parts in `lespost.profiles.sgs`, units and names in `lespost.profiles.attributes`.

Departures are from the horizontal mean of the snapshot at that level, all components at cell centres; on z_face, w is where
the model has it. Fluxes are kinematic, positive upward.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping

import numpy as np
import xarray as xr

from lespost.errors import DataError
from lespost.kernels.block import block_pass, scalar_pass
from lespost.kernels.sums import HIGHER, SCALAR_SECOND, SCALAR_THIRD, SECOND
from lespost.profiles.attributes import describe
from lespost.profiles.blocks import Block, SlabReader, plan_blocks, snapshot_block
from lespost.profiles.layout import Layout, layout_of, tile_counts
from lespost.profiles.names import scalar_names
from lespost.profiles.settings import ProfilesSettings
from lespost.profiles.sgs import subgrid_statistics, with_totals

#: Memory of a block when the caller names no budget, bytes.
DEFAULT_BLOCK_MEMORY = 500 * 10**6


def block_statistics(block: Block) -> dict[str, np.ndarray]:
    """All statistics of a block's cells (n = z1 - z0) and of the faces below them (and the topmost face of the domain).

    Returns arrays by the name of the profiles variable: (n,), (n, tiles_y, tiles_x) for `_tile`, (m,) for `_face`; and
    "extent", the integers (time index, z0, z1, first face, last face + 1).
    Raises DataError if a variance comes out negative, which no field of numbers can give.
    """
    layout, n = block.layout, block.z1 - block.z0
    points = layout.ny * layout.nx
    tiles = tile_counts(layout, block.settings.tiles)
    # faces owned: the ones below the cells, and the top of the domain
    faces = np.arange(block.z0, block.z1 + (block.z1 == layout.nz)) if layout.w_on_faces else np.arange(0)
    geometry = _positions(block, faces)
    work = _Results(block, n, len(faces), tiles)
    u, v, w = (block.arrays[name] for name in ("u", "v", "w"))
    first = layout.scalars[0] if layout.scalars else None
    block_pass(
        u, v, w, u if first is None else block.arrays[first], first is not None, block.settings.higher_moments,
        layout.u_arrangement, layout.v_arrangement, geometry["centre"], geometry["w_of_centre"], geometry["across"],
        geometry["height"], layout.dx, layout.dy, geometry["face"], geometry["below"], geometry["above"],
        work.mean["u"], work.mean["v"], work.mean["w"], work.mean["c"], work.span["u"], work.span["v"], work.span["w"],
        work.span["c"], work.moments, work.scalar_moments, work.tiles, work.scalar_tiles, work.structure, work.divergence,
        work.native, work.faces,
    )
    out = {"extent": np.array([block.time_index, block.z0, block.z1, block.z0, block.z0 + len(faces)], np.int64)}
    out |= _velocity_results(block, work, geometry, points)
    for position, name in enumerate(layout.scalars):
        if position > 0:
            c = block.arrays[name]
            scalar_pass(
                u, v, w, c, block.settings.higher_moments, layout.u_arrangement, layout.v_arrangement, geometry["centre"],
                geometry["w_of_centre"], geometry["face"], geometry["below"], geometry["above"], work.mean["u"],
                work.mean["v"], work.mean["w"], work.mean["c"], work.span["c"], work.scalar_moments, work.scalar_tiles,
                work.faces,
            )
        out |= _scalar_results(name, block, work, geometry, points)
    out |= subgrid_statistics(block)
    _refuse_negative(out, block)
    return out


class _Results:
    """Arrays that the kernels fill, one set per block."""

    def __init__(self, block: Block, n: int, faces: int, tiles: tuple[int, int]) -> None:
        levels = {name: block.count(name) for name in ("u", "v", "w")} | {"c": block.count("u")}
        self.mean = {name: np.zeros((count, 2)) for name, count in levels.items()}
        self.span = {name: np.zeros((count, 3)) for name, count in levels.items()}
        self.moments = np.zeros((n, len(SECOND) + len(HIGHER)))
        self.scalar_moments = np.zeros((n, len(SCALAR_SECOND) + len(SCALAR_THIRD)))
        self.tiles = np.zeros((n, *tiles, len(SECOND)))
        self.scalar_tiles = np.zeros((n, *tiles, 2))
        self.structure = np.zeros((n, 5))
        self.divergence = np.zeros((n, 2))
        self.native = np.zeros((n, 2))
        self.faces = np.zeros((faces, 4))


def _positions(block: Block, faces: np.ndarray) -> dict[str, np.ndarray]:
    """Where in the block's arrays the kernels find each cell's levels, and each face's."""
    layout = block.layout
    k = np.arange(block.z0, block.z1)
    if layout.w_on_faces:
        pair = np.stack([k, k + 1], axis=1)
        across, height = pair, layout.dz[k]
    else:
        pair = np.stack([k, k], axis=1)
        across = np.stack([np.maximum(k - 1, 0), np.minimum(k + 1, layout.nz - 1)], axis=1)
        height = layout.z[across[:, 1]] - layout.z[across[:, 0]] if layout.nz > 1 else np.ones(len(k))
    low = block.first["u"]
    return {
        "centre": k - low, "w_of_centre": pair - block.first["w"], "across": across - block.first["w"],
        "height": np.asarray(height, np.float64), "face": faces - block.first["w"],
        "below": np.maximum(faces - 1, 0) - low, "above": np.minimum(faces, layout.nz - 1) - low,
    }


def _velocity_results(block: Block, work: _Results, geometry: Mapping[str, np.ndarray], points: int) -> dict[str, np.ndarray]:
    layout, centre, pair = block.layout, geometry["centre"], geometry["w_of_centre"]
    w_mean = work.mean["w"].sum(axis=1)
    out = {"u": work.mean["u"][centre].sum(axis=1), "v": work.mean["v"][centre].sum(axis=1), "w": w_mean[pair].mean(axis=1)}
    wanted = (*SECOND, *HIGHER) if block.settings.higher_moments else SECOND
    out |= {name: work.moments[:, m] / points for m, name in enumerate(wanted)}
    in_tile = points // (work.tiles.shape[1] * work.tiles.shape[2])
    if block.settings.tiles > 1:
        out |= {f"{name}_tile": work.tiles[..., m] / in_tile for m, name in enumerate(SECOND)}
    if layout.u_arrangement:
        out["uu_native"] = work.native[:, 0] / points
    if layout.v_arrangement:
        out["vv_native"] = work.native[:, 1] / points
    out |= {name: work.structure[:, m] / points for m, name in enumerate(("dwdx_dwdx", "dwdx_dwdy", "dwdy_dwdy"))}
    steps = work.structure[:, 3] + work.structure[:, 4]
    out["w_grid_scale_share"] = _ratio(steps, 8.0 * work.moments[:, SECOND.index("ww")])
    out["divergence_rms"] = np.sqrt(work.divergence[:, 0] / points)
    out["divergence_scale"] = np.sqrt(work.divergence[:, 1] / points)
    for name in ("u", "v"):
        out[f"{name}_min"], out[f"{name}_max"] = work.span[name][centre, 0], work.span[name][centre, 1]
    out["w_min"] = work.span["w"][pair, 0].min(axis=1)
    out["w_max"] = work.span["w"][pair, 1].max(axis=1)
    bad = work.span["u"][centre, 2] + work.span["v"][centre, 2] + work.span["w"][pair[:, 0], 2]
    if layout.w_on_faces and block.z1 == layout.nz:
        bad[-1] += work.span["w"][pair[-1, 1], 2]
    out["nan_count"] = bad
    if layout.w_on_faces:
        out["w_face"] = w_mean[geometry["face"]]
        out |= {f"{name}_face": work.faces[:, m] / points for m, name in enumerate(("ww", "uw", "vw"))}
    return out


def _scalar_results(
    name: str, block: Block, work: _Results, geometry: Mapping[str, np.ndarray], points: int
) -> dict[str, np.ndarray]:
    """Statistics of one scalar. Its missing values are counted by its own `_nan_count`, merged by `assemble`."""
    names, centre = scalar_names(name), geometry["centre"]
    out = {names.mean: work.mean["c"][centre].sum(axis=1)}
    for m, moment in enumerate((*SCALAR_SECOND, *SCALAR_THIRD)):
        label = names.moment(moment)
        if label is not None and (m < len(SCALAR_SECOND) or block.settings.higher_moments):
            out[label] = work.scalar_moments[:, m] / points
    if names.tiles and block.settings.tiles > 1:
        in_tile = points // (work.tiles.shape[1] * work.tiles.shape[2])
        out |= {f"{names.moment(moment)}_tile": work.scalar_tiles[..., m] / in_tile for m, moment in enumerate(SCALAR_SECOND[:2])}
    out[f"{name}_min"], out[f"{name}_max"] = work.span["c"][centre, 0], work.span["c"][centre, 1]
    out[f"{name}_nan_count"] = work.span["c"][centre, 2]
    if block.layout.w_on_faces:
        out[f"{names.moment('wc')}_face"] = work.faces[:, 3] / points
    return {key: value.copy() for key, value in out.items()}


def _ratio(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """a / b, NaN where b is zero."""
    out = np.full(a.shape, np.nan)
    np.divide(a, b, out=out, where=b != 0)
    return out


def _refuse_negative(out: Mapping[str, np.ndarray], block: Block) -> None:
    """A negative mean square means that arithmetic or memory failed: nothing after it can be trusted."""
    for name, values in out.items():
        if name in ("uu", "vv", "ww", "ww_face", "thetatheta") and (values < 0).any():
            k = int(np.argmin(values))
            raise DataError(
                f"negative variance: {name} = {values[k]:.3g} in snapshot {block.time_index + 1}, level {block.z0 + k + 1}. "
                "A mean square cannot be negative; please report this with the output of `lespost --version`."
            )


def assemble(fields: xr.Dataset, results: Iterable[Mapping[str, np.ndarray]], settings: ProfilesSettings) -> xr.Dataset:
    """The profiles dataset from the results of all blocks, in any order.

    fields: the canonical dataset (coordinates and attributes are used, no field is read). Returns dims (time, z) and
    (time, z_face), with units, long_name, cell_methods; see `lespost.profiles.attributes` for the list.
    Raises DataError if a block is missing or counted twice.
    """
    layout = layout_of(fields, settings.prandtl_number)
    times = fields.sizes["time"]
    data: dict[str, np.ndarray] = {}
    filled = np.zeros((times, layout.nz), np.int8)
    for result in results:
        t, z0, z1, f0, f1 = (int(i) for i in result["extent"])
        filled[t, z0:z1] += 1
        for name, values in result.items():
            if name == "extent":
                continue
            face = name.endswith("_face")
            if name not in data:
                data[name] = np.full((times, layout.nz + face, *values.shape[1:]), np.nan)
            data[name][t, slice(f0, f1) if face else slice(z0, z1)] = values
    if (filled != 1).any():
        t, k = (int(i) for i in np.argwhere(filled != 1)[0])
        raise DataError(f"profiles cannot be put together: snapshot {t + 1}, level {k + 1} was computed {filled[t, k]} times.")
    for name in [name for name in data if name.endswith("_nan_count")]:
        data["nan_count"] = data["nan_count"] + data.pop(name)
    data = with_totals(data, layout)
    return describe(data, fields, layout, settings)


def profile_statistics(
    fields: xr.Dataset, settings: ProfilesSettings, block_memory: int = DEFAULT_BLOCK_MEMORY
) -> xr.Dataset:
    """The profiles of a canonical dataset, computed here and now.

    block_memory: bytes that one block may take. Raises what `snapshot_block`, `block_statistics` and `assemble` raise.
    """
    layout: Layout = layout_of(fields, settings.prandtl_number)
    results = []
    reader: SlabReader | None = None
    time_index = -1
    for plan in plan_blocks(fields, settings, block_memory, layout=layout):
        if plan.time_index != time_index:
            time_index, reader = plan.time_index, SlabReader(fields, layout, plan.time_index)
        block = snapshot_block(fields, plan.time_index, plan.z0, plan.z1, settings, layout, reader)
        results.append(block_statistics(block))
    return assemble(fields, results, settings)
