"""Do the fields carry the flux that the forcing declares? Size, direction and the usual slips, each named.

The total flux (resolved plus subgrid) of the faces just below the surface, continued to z = 0 along a straight line, is what
the simulation was really driven by. A declared value that differs by a factor of 1000, of 1.2, or by 180 degrees tells which
slip was made. Other checks of profiles stand in `lespost.profiles.checks`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import xarray as xr

from lespost.constants import AIR_DENSITY, REFERENCE_DENSITY, SPECIFIC_HEAT_TEOS10
from lespost.findings import Finding

#: Faces below the surface face through which the line is laid; more would feel the curvature of the stress profile.
FACES = 4
#: Relative mismatch of a flux that closes; on six snapshots of two real runs 4 % were seen.
TOLERANCE = 0.15
#: Where the files hold no subgrid flux, the declared one may exceed the largest resolved one by this factor: near the
#: surface the subgrid part carries most of it (3.1 seen in sheared turbulence), and fall below it by no more than 2, since
#: entrainment can carry more heat than the surface does.
UNRESOLVED_FACTOR = 5.0
UNRESOLVED_LEAST = 0.5
#: Snapshots of a window that count as independent at most when their scatter judges a mismatch (common practice, no source).
INDEPENDENT = 3
#: A mismatch within so many standard errors of the sampled flux is chance.
CHANCE = 3.0
#: Largest angle between the declared and the found direction of the stress, degree (common practice, no source).
ANGLE = 30.0


@dataclass(frozen=True)
class Declared:
    """Forcing as stated by the recipe or the files, averaged over the snapshots at hand; NaN where unknown.

    friction_velocity m s-1; stress_direction, stokes_direction degree counter-clockwise from +x, towards;
    surface_temperature_flux K m s-1, upward; reference_density kg m-3; specific_heat J kg-1 K-1.
    misaligned: the recipe says itself that wind and waves differ in direction.
    """

    friction_velocity: float = math.nan
    stress_direction: float = math.nan
    surface_temperature_flux: float = math.nan
    stokes_direction: float = math.nan
    us0: float = math.nan
    reference_density: float = REFERENCE_DENSITY
    specific_heat: float = SPECIFIC_HEAT_TEOS10
    misaligned: bool = False


def surface_flux(profiles: xr.Dataset, name: str) -> tuple[float, bool]:
    """(flux at z = 0, whether its subgrid part is in it): time mean, continued from the faces below the surface.

    name: "uw", "vw" or "wtheta". NaN where the profiles hold no such flux on faces or the domain ends below the surface.
    """
    faces = profiles["z_face"].values
    total = f"{name}_total_face" in profiles
    label = f"{name}_total_face" if total else f"{name}_face"
    if label not in profiles or len(faces) < FACES + 2 or abs(faces[-1]) > (faces[-1] - faces[-2]):
        return math.nan, total
    values = profiles[label].values.mean(axis=0)[-1 - FACES : -1]
    if not np.isfinite(values).all():
        return math.nan, total
    return float(np.polyfit(faces[-1 - FACES : -1], values, 1)[1]), total


def surface_flux_error(profiles: xr.Dataset, *names: str) -> float:
    """Standard error of the flux at z = 0 from the scatter between snapshots, as the modulus over `names`; 0 for one snapshot.

    Snapshots closer than a turnover repeat each other, so the scatter is taken as that of a few independent ones.
    """
    count = profiles.sizes["time"]
    if count < 2:
        return 0.0
    variance = 0.0
    for name in names:
        singles = np.array([surface_flux(profiles.isel(time=[t]), name)[0] for t in range(count)])
        variance += float(singles.var(ddof=1)) / min(count, INDEPENDENT)
    return math.sqrt(variance)


def _largest(profiles: xr.Dataset, *names: str) -> float:
    """Largest time-mean resolved flux at any face, as the modulus over `names`."""
    squares = [profiles[f"{name}_face"].values.mean(axis=0) ** 2 for name in names]
    return float(np.sqrt(np.max(np.sum(squares, axis=0))))


def angle_between(a: float, b: float) -> float:
    """Smallest angle from direction b to direction a, degree in [-180, 180)."""
    return (a - b + 180.0) % 360.0 - 180.0


def named_factor(ratio: float, declared: Declared, heat: bool = False) -> str:
    """The slip that makes a declared flux `ratio` times the true one; empty where none is known."""
    density, heat_capacity = declared.reference_density, declared.reference_density * declared.specific_heat
    known = [
        (heat_capacity, "rho0 cp: a heat flux in W m-2 stands where a temperature flux in K m s-1 belongs"),
        (1.0 / heat_capacity, "1 / (rho0 cp): a temperature flux in K m s-1 was divided by rho0 cp once more"),
    ] if heat else [
        (density, "the density of water: a stress in N m-2 stands where one over density (m2 s-2) belongs"),
        (1.0 / density, "1 / density of water: the stress was divided by it once too often"),
        (density / AIR_DENSITY, "the ratio of densities: a friction velocity of the air side was given"),
        (AIR_DENSITY, "the density of air: it was left in or counted twice"),
        (1.0 / AIR_DENSITY, "1 / density of air: it was left out"),
    ]  # fmt: skip
    factor, words = min(known, key=lambda item: abs(math.log(abs(ratio) / item[0])))
    # factors near 1 must be told from scatter, large ones need only be of the right size
    if abs(abs(ratio) / factor - 1.0) < (0.04 if 0.5 < factor < 2.0 else 0.25):
        return f" The ratio is about {factor:.3g}, {words}."
    return ""


def check_momentum_flux(profiles: xr.Dataset, declared: Declared) -> list[Finding]:
    """Size of the surface stress against the declared friction velocity squared."""
    (fu, total), (fv, _) = surface_flux(profiles, "uw"), surface_flux(profiles, "vw")
    found, stated = math.hypot(fu, fv), declared.friction_velocity**2
    if not (math.isfinite(found) and math.isfinite(stated)) or found == 0.0 or stated == 0.0:
        return []
    statement = f"the declared friction velocity {declared.friction_velocity:.4g} m s-1 means a stress of {stated:.3g} m2 s-2"
    found = found if total else _largest(profiles, "uw", "vw")
    return _compare(
        "momentum-flux", statement, stated, found, "m2 s-2", total, named_factor(stated / found, declared), "Check [forcing].",
        surface_flux_error(profiles, "uw", "vw"),
    )


def check_temperature_flux(profiles: xr.Dataset, declared: Declared) -> list[Finding]:
    """Surface temperature flux against the declared one."""
    found, total = surface_flux(profiles, "wtheta")
    stated = declared.surface_temperature_flux
    if not (math.isfinite(found) and math.isfinite(stated)) or found == 0.0 or stated == 0.0:
        return []
    found = found if total else math.copysign(_largest(profiles, "wtheta"), found)
    return _compare(
        "temperature-flux", f"the declared surface temperature flux is {stated:.3g} K m s-1", stated, found, "K m s-1", total,
        named_factor(stated / found, declared, heat=True), "Check [forcing] and its sign (upward flux cools the water).",
        surface_flux_error(profiles, "wtheta"),
    )


def _compare(
    code: str, statement: str, stated: float, found: float, units: str, total: bool, named: str, remedy: str,
    error: float,
) -> list[Finding]:
    """error: standard error of `found` by sampling; a mismatch that chance explains is none."""
    ratio = stated / found
    if ratio > 0 and abs(stated - found) <= CHANCE * error:
        return []
    least, largest = (1.0 / (1.0 + TOLERANCE), 1.0 + TOLERANCE) if total else (UNRESOLVED_LEAST, UNRESOLVED_FACTOR)
    if least <= ratio <= largest:
        return []
    parts = "resolved and subgrid flux of the fields at the surface" if total else (
        "largest resolved flux in the fields (they hold no subgrid flux)")
    size = abs(ratio)
    times = f"{size:.3g} times less" if size >= 1.0 else f"{1.0 / size:.3g} times more"
    sign = ", of opposite sign" if ratio < 0 else ""
    grave = bool(named) or ratio < 0 or (total and not 0.5 < ratio < 2.0)
    message = f"{statement}, but the {parts} is {found:.3g} {units}, {times}{sign}.{named} {remedy}"
    return [Finding(code, "error" if grave else "warning", message, ratio, largest, "1")]


def check_stress_direction(profiles: xr.Dataset, declared: Declared) -> list[Finding]:
    """Declared direction of the stress against that of the momentum flux found near the surface."""
    (fu, _), (fv, _) = surface_flux(profiles, "uw"), surface_flux(profiles, "vw")
    if not (math.isfinite(fu) and math.isfinite(fv) and math.isfinite(declared.stress_direction)) or fu == fv == 0.0:
        return []
    if declared.friction_velocity == 0.0:
        return []
    found = math.degrees(math.atan2(-fv, -fu))
    off = angle_between(declared.stress_direction, found)
    if abs(off) <= ANGLE:
        return []
    slip = ""
    if abs(off) > 180.0 - ANGLE / 2:
        slip = " It points the other way: the direction the wind comes from was given instead of the one it blows towards."
    elif abs(angle_between(math.degrees(declared.stress_direction), found)) < ANGLE / 2 and abs(declared.stress_direction) < 6.3:
        slip = " Read as radians it fits: give degrees."
    elif abs(angle_between(90.0 - declared.stress_direction, found)) < ANGLE / 2:
        slip = " Read as a compass bearing (clockwise from north = +y) it fits: use the compass key."
    return [
        Finding(
            "stress-direction", "error",
            f"the declared direction of the stress is {declared.stress_direction:.1f} degree, but the momentum flux near the "
            f"surface points to {found % 360.0:.1f} degree (counter-clockwise from +x, towards).{slip} Check [forcing].",
            abs(off), ANGLE, "degree",
        )
    ]  # fmt: skip


def check_stokes_direction(declared: Declared) -> list[Finding]:
    """Wind and waves more than 30 degrees apart: possible, but more often a slip, so the recipe must say that it is meant."""
    off = angle_between(declared.stokes_direction, declared.stress_direction)
    if declared.misaligned or not math.isfinite(off) or abs(off) <= ANGLE or not declared.us0 > 0:
        return []
    return [
        Finding(
            "stokes-direction", "warning",
            f"the Stokes drift points to {declared.stokes_direction:.1f} degree, the stress to {declared.stress_direction:.1f} "
            "degree: if wind and waves are misaligned on purpose, all is well; else check the directions in [forcing] and "
            "[stokes].",
            abs(off), ANGLE, "degree",
        )
    ]  # fmt: skip
