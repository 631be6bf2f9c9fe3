"""Near-surface plan views of w: one level of the last snapshot of each window, read as one plane."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import xarray as xr

from lespost.profiles.windows import Window

#: Depth of the plan view as a fraction of the layer depth; about where downwelling jets are strongest in Langmuir turbulence.
RELATIVE_DEPTH = 0.1


def plan_views(fields: xr.Dataset, windows: Sequence[Window], layer_depths: dict[str, float]) -> xr.Dataset | None:
    """w [m s-1] near the surface: dims (window, y, x), coords depth [m] and view_time [s] per window.

    layer_depths: boundary-layer depth [m] by window name, NaN where unknown (a tenth of the water column is used then).
    Returns None if the fields hold no w.
    """
    if "w" not in fields:
        return None
    axis = "z_face" if "z_face" in fields["w"].dims else "z"
    heights = fields[axis].values
    times = fields["time"].values
    planes, depths, moments, names = [], [], [], []
    for window in windows:
        inside = np.flatnonzero((times >= window.start) & (times <= window.end))
        if not inside.size:
            continue
        layer = layer_depths.get(window.name, float("nan"))
        target = RELATIVE_DEPTH * (layer if np.isfinite(layer) else float(-heights.min()))
        level = int(np.argmin(np.abs(heights + target)))
        planes.append(np.asarray(fields["w"][int(inside[-1]), level].values, dtype=np.float32))
        depths.append(float(-heights[level]))
        moments.append(float(times[inside[-1]]))
        names.append(window.name)
    if not planes:
        return None
    units = {"units": "m", "positive": "down"}
    return xr.Dataset(
        {"w": (("window", "y", "x"), np.stack(planes), {"units": "m s-1", "long_name": "upward velocity"})},
        coords={"window": names, "x": fields["x"].values, "y": fields["y"].values,
                "depth": ("window", depths, {**units, "long_name": "depth of the plane"}),
                "view_time": ("window", moments, {"units": "s", "long_name": "time of the snapshot"})},
    )
