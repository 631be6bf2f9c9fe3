"""The regime of each window and depth band: regime.csv.

Three witnesses are heard. The component variances (orderings.py) give the answer and its probability. Production of turbulence
in the band and the forcing (Belcher et al. 2012) are asked independently; they do not vote, but where both contradict a
definite answer in one voice, the answer is "mixed"; so it is where the variances lie between convection and Langmuir
turbulence, whose orderings overlap. Variances that cannot be told apart give "undetermined".
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
import xarray as xr

from lespost.forcing import regimes
from lespost.forcing.buoyancy import absorbed_in_layer
from lespost.forcing.resolve import mean_direction
from lespost.forcing.scales import Scales, scales
from lespost.profiles.depths import LayerDepth, layer_depth
from lespost.profiles.production import layer_shares
from lespost.profiles.windows import Window, average_windows
from lespost.regime.frames import Axis, choose_axis, director, rotate
from lespost.regime.orderings import OrderingProbabilities, ordering_probabilities
from lespost.regime.settings import RegimeSettings
from lespost.statistics.bootstrap import resample_snapshots_and_tiles

COLUMNS = ("window", "t_start", "t_end", "z_bottom", "z_top", "regime", "p_shear", "p_convective", "p_langmuir",
           "fraction_along", "fraction_cross", "fraction_vertical", "axis_deg", "axis_kind", "ustar", "wstar", "us0", "la_t",
           "la_sl", "la_proj", "hoenikker", "h", "h_over_l_langmuir", "forcing_regime", "agreement", "note")
#: Share of the positive production above which one production speaks for a regime; common practice, no source.
SPEAKING_SHARE = 0.6
_TENSOR = ("uu", "vv", "ww", "uv")
_PRODUCTION_REGIME = {"shear": "shear", "stokes": "langmuir", "buoyancy": "convective"}


@dataclass(frozen=True)
class WindowState:
    """What a window is classified from: window means, mean forcing, depth of the layer, scales."""

    mean: xr.Dataset
    forcing: xr.Dataset
    depth: LayerDepth
    scales: Scales


def classify(profiles: xr.Dataset, forcing: xr.Dataset, windows: Sequence[Window], settings: RegimeSettings) -> pd.DataFrame:
    """The table regime.csv (columns `COLUMNS`), a row per window and band, the upper mixed layer first.

    profiles: of every snapshot, with tiles and production terms; forcing: as `lespost.forcing.resolve` makes it. Variances
    include 2/3 of the subgrid energy where it is known; the vertical one is taken at its native faces where w is staggered.
    NaN (an empty cell) where a number cannot be known.
    """
    rng = np.random.default_rng(settings.seed)
    averaged = average_windows(profiles, windows)
    rows = []
    for number, window in enumerate(windows):
        members = window.members(profiles["time"].values)
        state = window_state(averaged.isel(window=number), forcing.isel(time=members), settings)
        inside = profiles.isel(time=members)
        for top, bottom in settings.bands:
            rows.append(_row(window, state, inside, top, bottom, settings, rng))
    return pd.DataFrame(rows, columns=list(COLUMNS))


def window_state(mean: xr.Dataset, forcing: xr.Dataset, settings: RegimeSettings) -> WindowState:
    """Depth and scales of one window. mean: window means; forcing: the window's snapshots."""
    driving = forcing.mean("time", keep_attrs=True)
    for name in ("stress_direction", "stokes_direction"):
        driving[name] = mean_direction(forcing[name].values)
    ustar = float(driving["friction_velocity"])
    given = float(forcing.attrs.get("mixed_layer_depth", np.nan))
    if np.isfinite(given):
        depth = LayerDepth(given, "the recipe")
    else:
        depth = layer_depth(mean, ustar, float(driving["thermal_expansion"]), float(driving["gravity"]), settings.depth_method)
    return WindowState(mean, driving, depth, _scales(driving, depth.depth, ustar))


def _scales(forcing: xr.Dataset, depth: float, ustar: float) -> Scales:
    us0 = float(forcing["us0"])
    b0 = float(forcing["surface_buoyancy_flux"])
    sunlight = float(forcing["shortwave"])
    if sunlight > 0 and np.isfinite(depth):
        kept = float(absorbed_in_layer(sunlight, depth, str(forcing.attrs.get("water_type", "I"))))
        b0 -= float(forcing["gravity"] * forcing["thermal_expansion"]) * kept / float(
            forcing["reference_density"] * forcing["specific_heat"])
    turn = float(forcing["stokes_direction"]) - float(forcing["stress_direction"])
    return scales(
        friction_velocity=ustar, buoyancy_flux=b0, surface_stokes_drift=us0, stokes_depth=float(forcing["stokes_depth"]),
        surface_layer_drift=_surface_layer_drift(forcing, depth), layer_depth=depth,
        misalignment=turn if np.isfinite(turn) else 0.0, wave_height=_wave_height(forcing, us0),
    )


def _wave_height(forcing: xr.Dataset, us0: float) -> float:
    """The stated significant wave height, else that of the single deep-water wave with this drift and depth scale."""
    stated = float(forcing["significant_wave_height"])
    stokes_depth = float(forcing["stokes_depth"])
    if np.isfinite(stated) or not (us0 > 0 and stokes_depth > 0):
        return stated
    k = 1 / (2 * stokes_depth)
    return float(2 * np.sqrt(us0 / (np.sqrt(float(forcing["gravity"]) * k) * k)))


def _surface_layer_drift(forcing: xr.Dataset, depth: float) -> float:
    """Modulus of the mean drift over the upper fifth of the layer, from cell means [m s-1]; NaN if the depth is unknown."""
    if not np.isfinite(depth):
        return float("nan")
    faces = forcing["z_face"].values
    covered = np.clip(np.minimum(faces[1:], 0.0) - np.maximum(faces[:-1], -0.2 * depth), 0.0, None)
    u, v = (float((forcing[name].values * covered).sum() / covered.sum()) for name in ("stokes_u", "stokes_v"))
    return float(np.hypot(u, v))


def band_limits(z: np.ndarray, z_face: np.ndarray, depth: float, top: float, bottom: float) -> tuple[float, float]:
    """(bottom, top) [m] of a band given as fractions of the layer depth; the top is at least three levels down.

    Without a layer depth the whole water column stands in.
    """
    layer = depth if np.isfinite(depth) else float(-z_face[0])
    third = -float(z_face[-1] - z_face[max(z_face.size - 4, 0)])
    high = min(-top * layer, third)
    return max(-bottom * layer, float(z_face[0])), high


def _row(window: Window, state: WindowState, profiles: xr.Dataset, top: float, bottom: float, settings: RegimeSettings,
         rng: np.random.Generator) -> dict[str, Any]:
    z = profiles["z"].values
    low, high = band_limits(z, profiles["z_face"].values, state.depth.depth, top, bottom)
    axis = choose_axis(settings.frame, state.mean, state.forcing, low, high, near_surface=top < 0.3)
    production = layer_shares(state.mean, low, high)
    draws, center, notes = _variances(profiles, low, high, axis, settings, rng)
    probabilities = None if draws is None else ordering_probabilities(*draws, production["stokes"], production["buoyancy"])
    notes += _circumstances(state, production, profiles)
    regime, agreement, more = _decide(probabilities, production, state.scales, settings)
    scale = state.scales
    total = float(center.sum())
    shares = center / total if total > 0 else np.full(3, np.nan)
    unknown = OrderingProbabilities(np.nan, np.nan, np.nan)
    found = probabilities or unknown
    return {
        "window": window.name, "t_start": window.start, "t_end": window.end, "z_bottom": low, "z_top": high, "regime": regime,
        "p_shear": found.shear, "p_convective": found.convective, "p_langmuir": found.langmuir, "fraction_along": shares[0],
        "fraction_cross": shares[1], "fraction_vertical": shares[2],
        "axis_deg": director(axis.angle) if axis.kind == "cell" else axis.angle, "axis_kind": axis.kind, "ustar": scale.ustar,
        "wstar": scale.wstar, "us0": scale.us0, "la_t": scale.la_t, "la_sl": scale.la_sl, "la_proj": scale.la_proj,
        "hoenikker": scale.hoenikker if scale.b0 >= 0 else np.nan, "h": state.depth.depth,
        "h_over_l_langmuir": scale.h_over_l_langmuir, "forcing_regime": scale.forcing_regime, "agreement": agreement,
        "note": "; ".join([*more, *notes]),
    }


def _variances(profiles: xr.Dataset, low: float, high: float, axis: Axis, settings: RegimeSettings, rng: np.random.Generator
               ) -> tuple[tuple[np.ndarray, np.ndarray, np.ndarray] | None, np.ndarray, list[str]]:
    """(replicates of along, cross, vertical; their centre; notes) of a band; None for a band without turbulence or levels."""
    inside = (profiles["z"].values >= low) & (profiles["z"].values <= high)
    if not inside.any():
        return None, np.full(3, np.nan), ["the band holds no level of the grid"]
    notes = []
    if all(f"{name}_tile" in profiles for name in _TENSOR):
        samples = np.stack([_banded(profiles, f"{name}_tile", inside) for name in _TENSOR], axis=-1)
    else:
        samples = np.stack([_banded(profiles, name, inside) for name in _TENSOR], axis=-1)[:, None, None, :]
        notes.append("no tiles: the probabilities rest on the scatter between snapshots alone")
    native, subgrid = _vertical_gain(profiles, inside), _subgrid(profiles, inside)
    samples[..., 2] *= native
    samples[..., :3] += subgrid
    if not np.isfinite(samples).all() or not samples[..., :3].sum() > 0:
        return None, np.full(3, np.nan), [*notes, "no turbulence in the band"]
    if samples.shape[0] * samples.shape[1] * samples.shape[2] < 2:
        return None, _rotated(samples.mean(axis=(0, 1, 2))[None], axis)[0], [*notes, "one sample: no probability can be given"]
    draws = resample_snapshots_and_tiles(samples, settings.bootstrap_samples, rng)
    turned = _rotated(draws, axis)
    if profiles.sizes["time"] == 1:
        notes.append("one snapshot: one realisation, probabilities from its spatial scatter")
    return (turned[:, 0], turned[:, 1], turned[:, 2]), _rotated(samples.mean(axis=(0, 1, 2))[None], axis)[0], notes


def _rotated(tensors: np.ndarray, axis: Axis) -> np.ndarray:
    along, cross, _ = rotate(tensors[:, 0], tensors[:, 1], tensors[:, 3], axis.angle)
    return np.stack([along, cross, tensors[:, 2]], axis=-1)


def _banded(profiles: xr.Dataset, name: str, inside: np.ndarray) -> np.ndarray:
    """Thickness-weighted mean over the levels `inside`, axis 1 of the variable."""
    weights = np.diff(profiles["z_face"].values)[inside]
    return np.asarray(np.tensordot(profiles[name].values[:, inside], weights / weights.sum(), axes=([1], [0])))


def _vertical_gain(profiles: xr.Dataset, inside: np.ndarray) -> float:
    """Native vertical variance over that of w averaged to centres, in the band: what centring lost."""
    if "ww_face" not in profiles:
        return 1.0
    faces = profiles["ww_face"].values.mean(axis=0)
    centred = profiles["ww"].values.mean(axis=0)
    native = 0.5 * (faces[1:] + faces[:-1])
    lost = centred[inside].sum()
    return float(native[inside].sum() / lost) if lost > 0 else 1.0


def _subgrid(profiles: xr.Dataset, inside: np.ndarray) -> float:
    if "uu_sgs" not in profiles:
        return 0.0
    value = float(_banded(profiles, "uu_sgs", inside).mean())
    return value if np.isfinite(value) else 0.0


def _circumstances(state: WindowState, production: Mapping[str, float], profiles: xr.Dataset) -> list[str]:
    notes = [f"h from {state.depth.method}"]
    scale = state.scales
    if np.isfinite(scale.b0) and scale.b0 < 0:
        notes.append(f"stabilising surface flux, -h/L = {-state.depth.depth / scale.obukhov:.2g}")
    if production["stokes"] < 0 and scale.us0 > 0:
        notes.append("waves take energy from the turbulence here (opposing)")
    if not scale.ustar > 1e-4:
        notes.append("hardly any wind: Langmuir numbers mean little")
    energy = sum(profiles[name].values for name in ("uu", "vv", "ww")) / 2
    layer = profiles["z"].values >= -state.depth.depth if np.isfinite(state.depth.depth) else slice(None)
    time = profiles["time"].values
    if time.size >= 4:
        series = np.asarray(energy)[:, layer].mean(axis=1)
        slope = np.polyfit(time, series, 1)[0]
        terms = ("shear", "stokes", "buoyancy")
        source = sum(float(np.nan_to_num(profiles[f"tke_{term}"].values[:, layer]).mean()) for term in terms)
        if slope < 0 and abs(slope) > 0.2 * abs(source):
            notes.append(f"decaying: turbulent energy falls by {abs(slope) / series.mean() * 3600:.0%} an hour")
    return notes


def production_regime(production: Mapping[str, float]) -> str:
    """The regime of the production that makes most of the positive production; "mixed" if none does; "" if unknown."""
    if any(np.isnan(value) for value in production.values()):
        return ""
    positive = {name: max(value, 0.0) for name, value in production.items()}
    total = sum(positive.values())
    if not total > 0:
        return ""
    name = max(positive, key=lambda key: positive[key])
    return _PRODUCTION_REGIME[name] if positive[name] / total >= SPEAKING_SHARE else "mixed"


def _decide(probabilities: OrderingProbabilities | None, production: Mapping[str, float], scale: Scales,
            settings: RegimeSettings) -> tuple[str, str, list[str]]:
    """(regime, agreement, notes)."""
    fed, driven = production_regime(production), scale.forcing_regime
    told = {"production": fed, "forcing": "" if driven == "undetermined" else driven}
    if probabilities is None:
        return "undetermined", _agreement("undetermined", told), []
    name, probability = probabilities.best()
    both = probabilities.convective + probabilities.langmuir
    if probability < settings.confidence <= both and name != "shear":
        # Both have the vertical raised; the variances show that, and lie between the two in what tells them apart.
        pair = f"convective ({probabilities.convective:.2f}) and langmuir ({probabilities.langmuir:.2f})"
        return "mixed", _agreement("between convective and langmuir", told), [f"the variances lie between {pair}"]
    if probability < settings.confidence:
        why = f"no ordering of the variances is sure (best: {name}, {probability:.2f})"
        return "undetermined", _agreement("undetermined", told), [why]
    if fed and fed == driven and fed != name and fed != "mixed":
        return "mixed", _agreement(name, told), [f"variances say {name} ({probability:.2f}), production and forcing say {fed}"]
    return name, _agreement(name, told), []


def _agreement(variances: str, told: Mapping[str, str]) -> str:
    return "; ".join([f"variances {variances}", *(f"{witness} {word or 'unknown'}" for witness, word in told.items())])


def dividing_lines(ratios: np.ndarray) -> dict[str, np.ndarray]:
    """La_t of the lines in the regime plane where one production makes nine tenths of the estimate, over h / L_L."""
    return {kind: regimes.dividing_line(kind, ratios) for kind in ("shear", "langmuir", "convective")}
