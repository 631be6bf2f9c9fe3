"""Random solenoidal fields whose variances, spectrum, cell spacing, axis and memory are prescribed.

Three families of Fourier modes are superposed: overturning cells (they carry w, and horizontal velocity along their
wavevector), and two families of horizontal eddies without w, one with wavevectors across the axis (streaks: velocity along
the axis), one with wavevectors along the axis (velocity across it). Their strengths are solved for so that the three
column-mean variances come out as asked: exactly in every snapshot, or in the ensemble mean. Every mode amplitude is an
Ornstein-Uhlenbeck process, so correlations in time fall as exp(-lag / integral time).

Horizontal spectrum E(k), k the modulus of the horizontal wavenumber, peak at 2 pi / spacing:
    E ~ (k / k0)^rise below the peak, (k / k0)^slope above.
Vertical structure: sin(n pi z / depth) for w and cosines for u, v, n = 1 ... vertical_modes with weights 1 / n², so that w
vanishes at the surface and the floor.

Velocities are free of divergence to round-off on the arrangement asked for (see closed_form.layout).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
import xarray as xr

from toy_fields.closed_form import layout
from toy_fields.errors import ToyRequestError
from toy_fields.solver.grid import Grid


@dataclass(frozen=True)
class RandomPlan:
    """What is prescribed.

    variance_along, variance_across, variance_vertical [m2 s-2]: column means, along and across `axis`
    [degree counter-clockwise from +x, direction of the streaks]; spacing [m] between successive convergence lines;
    slope and rise of the spectrum; alignment p: modes are weighted with cos²ᵖ of their angle to the direction across the
    axis (0: no preferred direction of the cells); integral_time [s]; vertical_modes; tracer: log-standard deviation s of a
    streak tracer (0: none), its correlation with the surface convergence and its e-folding depth [m].
    """

    grid: Grid
    variance_along: float
    variance_across: float
    variance_vertical: float
    spacing: float
    axis: float = 0.0
    slope: float = -5.0 / 3.0
    rise: float = 4.0
    alignment: float = 2.0
    integral_time: float = 600.0
    vertical_modes: int = 3
    exact: bool = True
    arrangement: layout.Arrangement = "spectral"
    tracer: float = 0.0
    tracer_correlation: float = 0.8
    tracer_depth: float = 3.0
    seed: int = 1

    def __post_init__(self) -> None:
        layout.check_arrangement(self.arrangement)
        if min(self.variance_along, self.variance_across) < 0 or self.variance_vertical <= 0:
            raise ToyRequestError("random fields: variances must not be negative, and the vertical one must be positive.")
        shortest = 3.0 * max(self.grid.dx, self.grid.dy)
        if not shortest <= self.spacing <= min(self.grid.length_x, self.grid.length_y):
            raise ToyRequestError(
                f"random fields: spacing {self.spacing:g} m in a box {self.grid.length_x:g} m by {self.grid.length_y:g} m: "
                f"give {shortest:g} m (three cells) to the box's length."
            )
        if not 0 <= self.tracer_correlation <= 1 or self.integral_time <= 0 or not 1 <= self.vertical_modes < self.grid.nz:
            raise ToyRequestError(
                "random fields: tracer_correlation between 0 and 1, integral_time > 0, 1 <= vertical_modes < nz."
            )


def energy_spectrum(plan: RandomPlan, wavenumber: np.ndarray) -> np.ndarray:
    """Shape of the horizontal spectrum E(k), 1 at its peak, for k in rad m-1; 0 at k = 0."""
    ratio = np.asarray(wavenumber) * plan.spacing / (2 * np.pi)
    with np.errstate(divide="ignore", over="ignore"):
        above = np.where(ratio > 0, ratio, np.inf) ** plan.slope
    return np.where(ratio < 1, ratio**plan.rise, above)


@dataclass
class RandomField:
    """Draws the snapshots of a plan; successive ones are correlated. Same seed, same numbers."""

    plan: RandomPlan
    strengths: np.ndarray = field(init=False)

    def __post_init__(self) -> None:
        plan, grid = self.plan, self.plan.grid
        self._random = np.random.default_rng(plan.seed)
        self._kx = 2 * np.pi * np.fft.rfftfreq(grid.nx, grid.dx)[None, :]
        self._ky = 2 * np.pi * np.fft.fftfreq(grid.ny, grid.dy)[:, None]
        # Two-cell differences do not see the Nyquist wave, nor do real transforms know its phase.
        self._kept = (np.abs(self._kx) < np.pi / grid.dx * 0.999) & (np.abs(self._ky) < np.pi / grid.dy * 0.999)
        self._kept[0, 0] = False
        self._vertical = np.pi / grid.depth * np.arange(1, plan.vertical_modes + 1)
        weights = 1.0 / np.arange(1, plan.vertical_modes + 1) ** 2
        levels = grid.z if plan.arrangement == "collocated" else grid.z_face
        self._sine = np.sin(self._vertical[:, None] * levels)
        self._cosine = np.cos(self._vertical[:, None] * grid.z)
        # The column mean of w² over the nz cells, half of either boundary face (where w is 0) included.
        self._weights = weights / np.sqrt(np.sum(weights**2 * np.sum(self._sine**2, axis=1) / grid.nz))
        self._responses = self._family_responses()
        self._noise: np.ndarray | None = None
        self._time = 0.0
        self._tracer_noise: np.ndarray | None = None
        self.strengths = self._expected_strengths()

    def snapshots(self, times: Sequence[float], dtype: Literal["float32", "float64"] = "float64") -> xr.Dataset:
        """The canonical dataset at `times` [s], which must not decrease."""
        drawn = [self.draw(float(t)) for t in times]
        plan, grid = self.plan, self.plan.grid
        staggered = plan.arrangement == "staggered"
        # A flow that does not move lends its coordinates and attributes.
        frame = layout.dataset(_Rest(), grid, plan.arrangement, times, dtype, **self._truth())
        for name in ("u", "v", "w"):
            frame[name] = frame[name].copy(data=np.stack([d[name] for d in drawn]).astype(dtype))
        if plan.tracer > 0:
            values = np.stack([d["tracer"] for d in drawn]).astype(dtype)
            attributes = {"units": "1", "long_name": "tracer in streaks over the surface convergence"}
            frame["tracer_streaks"] = (("time", "z", "y", "x"), values, attributes)
            if staggered:
                frame["tracer_streaks"].attrs["position"] = "cell centres"
        return frame

    def draw(self, time: float) -> dict[str, np.ndarray]:
        """u, v, w (and tracer) at `time` [s], each (z, y, x), where the arrangement puts them."""
        self._advance(time)
        assert self._noise is not None
        parts = [self._family(n, self._noise[n]) for n in range(3)]
        strengths = self._exact_strengths(parts) if self.plan.exact else self.strengths
        result = {
            name: sum(s * part[name] for s, part in zip(strengths, parts, strict=True)) for name in ("u", "v", "w")
        }
        if self.plan.tracer > 0:
            result["tracer"] = self._streaks(strengths[0] * parts[0]["convergence"])
        return result

    def expected_variances(self) -> tuple[float, float, float]:
        """Ensemble means of the column-mean variances along, across, vertical [m2 s-2]: those asked for."""
        along, across = self._expected_horizontal()
        squares = self.strengths**2
        return float(along @ squares), float(across @ squares), float(squares[0])

    def expected_correlation(self, lag: float) -> float:
        """Correlation of any mode with itself after `lag` [s] (1 at 0; its integral is integral_time)."""
        return float(np.exp(-abs(lag) / self.plan.integral_time))

    # ---- what follows is the making

    def _effective(self, wavenumber: np.ndarray, spacing: float) -> np.ndarray:
        if self.plan.arrangement == "collocated":
            return np.sin(wavenumber * spacing) / spacing
        return wavenumber if self.plan.arrangement == "spectral" else 2 * np.sin(0.5 * wavenumber * spacing) / spacing

    def _family_responses(self) -> list[dict[str, np.ndarray]]:
        """Per family the factors from white noise to modes of u, v (both / cos) and w (/ sin), for each vertical mode."""
        plan, grid = self.plan, self.plan.grid
        kx, ky = self._effective(self._kx, grid.dx), self._effective(self._ky, grid.dy)
        square = np.where(self._kept & (kx**2 + ky**2 > 0), kx**2 + ky**2, np.inf)
        modulus = np.hypot(self._kx, self._ky)
        density = np.where(self._kept, energy_spectrum(plan, modulus) / np.where(modulus > 0, modulus, np.inf), 0.0)
        across = np.deg2rad(plan.axis + 90.0)
        angle = np.arctan2(self._ky, self._kx) - across
        m = np.array([layout.effective_wavenumber(v, grid.dz, plan.arrangement, "vertical") for v in self._vertical])
        families = []
        for kind, direction in (("cells", np.cos(angle)), ("eddies", np.cos(angle)), ("eddies", np.sin(angle))):
            sharpness = plan.alignment if kind == "cells" else max(plan.alignment, 2.0)
            shape = np.sqrt(density * np.abs(direction) ** (2 * sharpness))
            shape = shape / np.sqrt(_mean_square(shape, grid))
            zero = np.zeros_like(shape)
            if kind == "cells":
                u = [1j * kx / square * n * shape for n in m]
                v = [1j * ky / square * n * shape for n in m]
                families.append({"u": np.array(u), "v": np.array(v), "w": np.array([shape] * len(m))})
            else:
                length = np.sqrt(square)
                u, v = [-1j * ky / length * shape] * len(m), [1j * kx / length * shape] * len(m)
                families.append({"u": np.array(u), "v": np.array(v), "w": np.array([zero] * len(m))})
        return families

    def _expected_horizontal(self) -> tuple[np.ndarray, np.ndarray]:
        """Variance along and across the axis that each family has at strength 1, (3,) each [1]."""
        plan, grid = self.plan, self.plan.grid
        c, s = np.cos(np.deg2rad(plan.axis)), np.sin(np.deg2rad(plan.axis))
        vertical = self._weights**2 * np.mean(self._cosine**2, axis=1)
        along, across = np.zeros(3), np.zeros(3)
        for n, family in enumerate(self._responses):
            for mode, weight in enumerate(vertical):
                along[n] += weight * _mean_square(c * family["u"][mode] + s * family["v"][mode], grid)
                across[n] += weight * _mean_square(-s * family["u"][mode] + c * family["v"][mode], grid)
        return along, across

    def _expected_strengths(self) -> np.ndarray:
        plan = self.plan
        along, across = self._expected_horizontal()
        cells = plan.variance_vertical
        rest = np.array([plan.variance_along - cells * along[0], plan.variance_across - cells * across[0]])
        squares = np.linalg.solve(np.array([along[1:], across[1:]]), rest)
        if np.any(squares < -1e-12 * cells):
            raise ToyRequestError(
                f"random fields: cells {plan.spacing:g} m apart with a vertical variance of {cells:.3g} m2 s-2 carry "
                f"{cells * along[0]:.3g} along and {cells * across[0]:.3g} m2 s-2 across the axis by continuity alone, and "
                f"eddies add to both; {plan.variance_along:.3g} and {plan.variance_across:.3g} cannot be met. Ask for more "
                "horizontal variance, a smaller spacing or another alignment."
            )
        return np.sqrt(np.concatenate([[cells], np.clip(squares, 0.0, None)]))

    def _advance(self, time: float) -> None:
        plan, grid = self.plan, self.plan.grid
        shape = (3, plan.vertical_modes, grid.ny, grid.nx)
        if self._noise is None:
            self._noise = self._random.standard_normal(shape)
            self._tracer_noise = self._random.standard_normal(shape[2:])
        else:
            if time < self._time:
                raise ToyRequestError(f"random fields: time {time:g} s comes before {self._time:g} s; give rising times.")
            keep = self.expected_correlation(time - self._time)
            fresh = np.sqrt(1 - keep**2)
            self._noise = keep * self._noise + fresh * self._random.standard_normal(shape)
            assert self._tracer_noise is not None
            self._tracer_noise = keep * self._tracer_noise + fresh * self._random.standard_normal(shape[2:])
        self._time = time

    def _family(self, n: int, noise: np.ndarray) -> dict[str, np.ndarray]:
        grid, responses = self.plan.grid, self._responses[n]
        modes = np.fft.rfft2(noise) * self._weights[:, None, None]
        shift = {"u": 1.0, "v": 1.0, "w": 1.0}
        if self.plan.arrangement == "staggered":
            # The low side of a cell lies half a spacing before its centre.
            shift = {"u": np.exp(-0.5j * self._kx * grid.dx), "v": np.exp(-0.5j * self._ky * grid.dy), "w": 1.0}
        size = (grid.ny, grid.nx)
        planes = {name: np.fft.irfft2(modes * responses[name] * shift[name], size) for name in ("u", "v", "w")}
        result = {
            "u": np.einsum("nz,nyx->zyx", self._cosine, planes["u"]),
            "v": np.einsum("nz,nyx->zyx", self._cosine, planes["v"]),
            "w": np.einsum("nz,nyx->zyx", self._sine, planes["w"]),
        }
        if n == 0:
            # At the surface -(u_x + v_y) = dw/dz: positive where water just below (z < 0, w = z dw/dz) sinks.
            result["convergence"] = np.einsum("n,nyx->yx", self._vertical, planes["w"])
        return result

    def _exact_strengths(self, parts: list[dict[str, np.ndarray]]) -> np.ndarray:
        """Strengths with which this very snapshot has the column-mean variances asked for."""
        plan, grid = self.plan, self.plan.grid
        c, s = np.cos(np.deg2rad(plan.axis)), np.sin(np.deg2rad(plan.axis))
        cells = np.sqrt(plan.variance_vertical / (np.sum(parts[0]["w"] ** 2) / (grid.nx * grid.ny * grid.nz)))
        along, across = _grams([_rotated(part, c, s) for part in parts])
        strengths = np.array([cells, self.strengths[1], self.strengths[2]])
        target = np.array([plan.variance_along, plan.variance_across])
        for _ in range(50):
            found = np.array([strengths @ along @ strengths, strengths @ across @ strengths])
            if np.all(np.abs(found - target) <= 1e-13 * target.max()):
                return strengths
            jacobian = 2 * np.array([(along @ strengths)[1:], (across @ strengths)[1:]])
            step = np.linalg.lstsq(jacobian, target - found, rcond=None)[0]
            strengths[1:] += step
        raise ToyRequestError(
            "random fields: this draw cannot meet the variances exactly, for they are close to what the cells alone carry; "
            "ask for more horizontal variance, or for the ensemble mean (exact = false)."
        )

    def _streaks(self, convergence: np.ndarray) -> np.ndarray:
        """Lognormal tracer (z, y, x) of mean 1 at the surface, decaying downward, high over convergence."""
        plan, grid = self.plan, self.plan.grid
        assert self._tracer_noise is not None
        smooth = np.fft.irfft2(np.fft.rfft2(self._tracer_noise) * self._responses[0]["w"][0], (grid.ny, grid.nx))
        tied = _standardised(convergence)
        free = _standardised(smooth)
        free = _standardised(free - np.mean(free * tied) * tied)
        r, spread = plan.tracer_correlation, plan.tracer
        surface = np.exp(spread * (r * tied + np.sqrt(1 - r**2) * free) - 0.5 * spread**2)
        return np.exp(grid.z / plan.tracer_depth)[:, None, None] * surface

    def _truth(self) -> dict[str, str | float]:
        plan = self.plan
        return {
            "title": "random solenoidal field", "source": "toy_fields: random field of prescribed statistics",
            "true_variance_along": plan.variance_along, "true_variance_across": plan.variance_across,
            "true_variance_vertical": plan.variance_vertical, "true_spacing": plan.spacing, "true_axis": plan.axis,
            "true_integral_time": plan.integral_time, "spectral_slope": plan.slope, "seed": plan.seed,
        }


class _Rest:
    """No motion at all."""

    def u(self, x: np.ndarray, y: np.ndarray, z: np.ndarray, time: float) -> np.ndarray:
        return 0.0 * (x + y + z)

    v = w = u


def _mean_square(modes: np.ndarray, grid: Grid) -> float:
    """Mean of |modes|² over all modes of the full transform, from the half that is stored."""
    weight = np.full(modes.shape[-1], 2.0)
    weight[0] = weight[-1] = 1.0
    return float(np.sum(weight * np.abs(modes) ** 2) / (grid.nx * grid.ny))


def _rotated(part: dict[str, np.ndarray], c: float, s: float) -> tuple[np.ndarray, np.ndarray]:
    return c * part["u"] + s * part["v"], -s * part["u"] + c * part["v"]


def _grams(rotated: list[tuple[np.ndarray, np.ndarray]]) -> tuple[np.ndarray, np.ndarray]:
    """Mean products of the families' velocities along and across, (3, 3) each."""
    along, across = np.empty((3, 3)), np.empty((3, 3))
    for i in range(3):
        for j in range(3):
            along[i, j] = np.mean(rotated[i][0] * rotated[j][0])
            across[i, j] = np.mean(rotated[i][1] * rotated[j][1])
    return along, across


def _standardised(values: np.ndarray) -> np.ndarray:
    departure = values - values.mean()
    return departure / departure.std()
