"""Where is the top of the layer? Published definitions side by side, for measured and computed profiles alike.

There is no single mixing height (Seibert et al. 2000, Atmos. Environ. 34, 1001; Seidel et al. 2012, J. Geophys.
Res. 117, D17106), so every answer names its definition. Heights are metres above ground. Potential temperature and
humidity are taken as linear between levels; virtual potential temperature is computed from them.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import inf, isfinite, nan, sqrt
from typing import Final

import numpy as np
from numpy.typing import NDArray

from forcing.air import GRAVITY, KAPPA, P_REFERENCE, VIRTUAL
from forcing.sounding import Profile

Array = NDArray[np.float64]

TABLES_RISE: Final = 0.5
"""K above the minimum: the definition of the observed tables."""
SEARCH_TOP: Final = 4000.0
"""m: the observed tables look for the minimum below this height; gradients are sought below it too."""
GRID: Final = 10.0
"""m: step of the observed tables, which is also their resolution."""
CRITICAL_RICHARDSON: Final = 0.25
"""Common practice. Zhang et al. 2014 (Geosci. Model Dev. 7, 2599) fit 0.24 strongly stable, 0.31 weakly stable, 0.39
unstable."""
FITTED_RICHARDSON: Final = {"strongly stable": 0.24, "weakly stable": 0.31, "unstable": 0.39}
"""Zhang et al. 2014, Geosci. Model Dev. 7, 2599."""
STRESS_WEIGHT: Final = 100.0
"""Weight of the squared friction velocity in the bulk Richardson number (Vogelezang & Holtslag 1996, Boundary-Layer
Meteorol. 81, 245)."""
CALM: Final = 0.1
"""m/s: wind difference below which the bulk Richardson number would divide by nothing."""
MORNING_EXCESS: Final = 5.0
"""K added to the morning minimum (Holzworth's rule, EPA-454/R-99-005 section 6.5.1)."""
GRADIENT_SPAN: Final = 100.0
"""m: gradients are taken over this thickness, so that one noisy level cannot decide (our choice)."""
SURFACE_AIR: Final = 100.0
"""m: the moist or heated air next to the ground decides neither a gradient nor the mixing ratio (our choice)."""
ADIABATIC_SLACK: Final = 2.0
"""K/km of potential temperature, over ADIABATIC_SPAN, still read as dry adiabatic by the forecaster's rule."""
ADIABATIC_SPAN: Final = 200.0
"""m."""
MOISTURE_SLACK: Final = 0.10
"""Share of the mean mixing ratio below by which it may fall and still be read as constant ..."""
MOISTURE_FLOOR: Final = 0.5e-3
"""... but at least this much, kg/kg."""


@dataclass(frozen=True, slots=True)
class Top:
    """One definition's answer.

    Attributes
    ----------
    definition : str
        Its name.
    height : float
        m above ground; NaN where the profile cannot tell.
    detail : str
        What decided, or why there is no answer.
    """

    definition: str
    height: float
    detail: str


EXPLANATIONS: Final[dict[str, str]] = {
    "half a kelvin": "virtual potential temperature first 0.5 K over its minimum (below 4 km)",
    "parcel": "surface air lifted dry meets its own virtual temperature (Holzworth; EPA-454/R-99-005 6.5.1)",
    "parcel + 2 K": "the same with 2 K added at the surface (common practice)",
    "morning rule": "dry adiabat from the surface temperature + 5 K (EPA-454/R-99-005 6.5.1)",
    "virtual gradient": "steepest rise of virtual potential temperature, 100 m to 4 km",
    "humidity gradient": "steepest fall of specific humidity, 100 m to 4 km",
    "bulk richardson": "bulk Richardson number from the ground passes its critical value",
    "forecaster's rule": "lapse rate dry adiabatic and mixing ratio constant up to here",
}


def virtual_theta(theta: Array, humidity: Array) -> Array:
    """Virtual potential temperature [K] of arrays of any one shape; humidity is specific, kg/kg."""
    return np.asarray(theta * (1.0 + VIRTUAL * humidity), dtype=np.float64)


def _grid(profile: Profile, step: float, ceiling: float) -> tuple[Array, Array, Array]:
    """Heights at a fixed step from the ground [m], with potential temperature and humidity there."""
    top = min(float(profile.height[-1]), ceiling)
    z = np.arange(0.0, top + 1e-6, step)
    return z, np.interp(z, profile.height, profile.theta), np.interp(z, profile.height, profile.humidity)


def _first_above(height: Array, theta: Array, humidity: Array, target: float, start: int = 0) -> float:
    """First height [m] at or over level `start` where virtual theta passes `target` [K]; NaN if it never does.

    Within a segment both factors are linear, so the crossing is the root of a quadratic.
    """
    virtual = virtual_theta(theta, humidity)
    above = np.flatnonzero(virtual[start:] > target)
    if above.size == 0:
        return nan
    j = start + int(above[0])
    if j == start:
        return float(height[j])
    i = j - 1
    dt, dq, dz = theta[j] - theta[i], humidity[j] - humidity[i], height[j] - height[i]
    a = VIRTUAL * dt * dq
    b = dt * (1.0 + VIRTUAL * humidity[i]) + theta[i] * VIRTUAL * dq
    c = virtual[i] - target
    disc = b * b - 4.0 * a * c
    share = -2.0 * c / (b + sqrt(disc)) if disc >= 0.0 and b + sqrt(max(disc, 0.0)) > 0.0 else 1.0
    return float(height[i] + dz * min(max(share, 0.0), 1.0))


def tables_depth(profile: Profile, *, step: float = GRID, exponent: float = KAPPA) -> Top:
    """First height where virtual theta exceeds its minimum below 4 km by 0.5 K, looking up from that minimum.

    This is the definition of the observed tables, on their 10 m grid; every score applies it to both sides.

    Parameters
    ----------
    step : float
        Grid [m]; the answer is a multiple of it.
    exponent : float
        Ratio R/cp in the potential temperature. The observed tables used 0.2857.
    """
    name = "half a kelvin"
    z, theta, humidity = _grid(profile, step, inf)
    if exponent != KAPPA:
        pressure = np.exp(np.interp(z, profile.height, np.log(profile.pressure)))
        theta = theta * (pressure / P_REFERENCE) ** (KAPPA - exponent)
    virtual = virtual_theta(theta, humidity)
    lowest = int(np.argmin(virtual[z <= SEARCH_TOP]))
    over = np.flatnonzero(virtual[lowest:] > virtual[lowest] + TABLES_RISE)
    if over.size == 0:
        return Top(name, nan, f"no air 0.5 K warmer below the profile's end at {profile.height[-1]:.0f} m")
    height = float(z[lowest + int(over[0])])
    return Top(name, height, f"virtual potential temperature, minimum {virtual[lowest]:.2f} K at {z[lowest]:.0f} m")


def parcel(profile: Profile, *, excess: float = 0.0, surface_virtual_theta: float | None = None) -> Top:
    """Surface air lifted dry to its own virtual potential temperature (Holzworth; EPA-454/R-99-005 6.5.1).

    Parameters
    ----------
    excess : float
        K added to the surface value.
    surface_virtual_theta : float or None
        Start value [K]; the lowest level's where left out.
    """
    name = "parcel" if excess == 0.0 else f"parcel + {excess:g} K"
    own = float(virtual_theta(profile.theta[:1], profile.humidity[:1])[0])
    start = (own if surface_virtual_theta is None else surface_virtual_theta) + excess
    # the parcel leaves the ground first: the lowest level itself is never its top
    height = _first_above(profile.height, profile.theta, profile.humidity, start, start=0)
    if not isfinite(height):
        return Top(name, nan, f"still buoyant at the profile's end ({profile.height[-1]:.0f} m)")
    if height == 0.0:
        return Top(name, 0.0, "the air is warmer than the parcel from the ground up")
    return Top(name, height, f"starts at a virtual potential temperature of {start:.2f} K")


def adiabat(profile: Profile, *, surface_temperature: float, excess: float = 0.0) -> Top:
    """Dry adiabat from a surface temperature [K] plus an excess to the profile (EPA-454/R-99-005 6.5.1).

    The morning rule takes the minimum of 02-06 local time plus 5 K, the afternoon rule the maximum of 12-16 local
    time; both meet the morning profile. Plain, not virtual, as the rule is written.
    """
    name = "morning rule" if excess == MORNING_EXCESS else "dry adiabat"
    start = (surface_temperature + excess) * (P_REFERENCE / profile.surface_pressure) ** KAPPA
    height = _first_above(profile.height, profile.theta, np.zeros_like(profile.theta), start)
    if not isfinite(height):
        return Top(name, nan, f"still buoyant at the profile's end ({profile.height[-1]:.0f} m)")
    return Top(name, height, f"adiabat of potential temperature {start:.2f} K")


def _steepest(z: Array, values: Array, sign: float) -> tuple[float, float]:
    """Middle height [m] and size [per m] of the strongest gradient of the given sign over GRADIENT_SPAN."""
    n = round(GRADIENT_SPAN / GRID)
    slope = sign * (values[n:] - values[:-n]) / GRADIENT_SPAN
    lowest = round(SURFACE_AIR / GRID)
    best = lowest + int(np.argmax(slope[lowest:]))
    # within one thick layer between levels many spans tie: take the middle of the stretch that does
    end = best
    while end + 1 < slope.size and slope[end + 1] >= 0.999 * slope[best]:
        end += 1
    return float(0.5 * (z[best] + z[end]) + 0.5 * GRADIENT_SPAN), float(slope[best])


def gradient_top(profile: Profile) -> Top:
    """Height of the strongest rise of virtual potential temperature over 100 m, from 100 m to 4 km (Seidel et al. 2012)."""
    name = "virtual gradient"
    z, theta, humidity = _grid(profile, GRID, SEARCH_TOP)
    if z[-1] < SURFACE_AIR + 2.0 * GRADIENT_SPAN:
        return Top(name, nan, f"the profile ends at {profile.height[-1]:.0f} m")
    height, slope = _steepest(z, virtual_theta(theta, humidity), 1.0)
    if slope <= 0.0:
        return Top(name, nan, "virtual potential temperature rises nowhere")
    return Top(name, height, f"{100.0 * slope:.1f} K per 100 m")


def humidity_gradient_top(profile: Profile) -> Top:
    """Height of the strongest fall of specific humidity over 100 m, from 100 m to 4 km (Seidel et al. 2012)."""
    name = "humidity gradient"
    if not profile.humidity_known:
        return Top(name, nan, "no humidity in the profile")
    z, _, humidity = _grid(profile, GRID, SEARCH_TOP)
    if z[-1] < SURFACE_AIR + 2.0 * GRADIENT_SPAN:
        return Top(name, nan, f"the profile ends at {profile.height[-1]:.0f} m")
    height, slope = _steepest(z, humidity, -1.0)
    if slope <= 0.0:
        return Top(name, nan, "humidity falls nowhere")
    return Top(name, height, f"{-1e5 * slope:.1f} g/kg per 100 m")


def richardson_numbers(
    profile: Profile, *, friction_velocity: float | None = None, reference: float = 0.0
) -> tuple[Array, Array]:
    """Bulk Richardson number on the 10 m grid over a reference height.

    Parameters
    ----------
    friction_velocity : float or None
        m/s. Given: wind relative to the reference height plus 100 u*2 (Vogelezang & Holtslag 1996). Left out: the
        plain form, wind taken as zero at the ground.
    reference : float
        Reference height [m above ground]; Vogelezang & Holtslag used 20, 40 and 80 m.

    Returns
    -------
    height, number : ndarray, shape (n,)
        m above ground; dimensionless.
    """
    z, theta, humidity = _grid(profile, GRID, inf)
    virtual = virtual_theta(theta, humidity)
    u, v = np.interp(z, profile.height, profile.u), np.interp(z, profile.height, profile.v)
    base = float(np.interp(reference, z, virtual))
    if friction_velocity is None:
        square = u**2 + v**2
    else:
        du, dv = u - float(np.interp(reference, z, u)), v - float(np.interp(reference, z, v))
        square = du**2 + dv**2 + STRESS_WEIGHT * friction_velocity**2
    keep = z > reference
    number = GRAVITY / base * (virtual - base) * (z - reference) / np.maximum(square, CALM**2)
    return z[keep], number[keep]


def richardson_top(
    profile: Profile,
    *,
    critical: float = CRITICAL_RICHARDSON,
    friction_velocity: float | None = None,
    reference: float = 0.0,
) -> Top:
    """First height where the bulk Richardson number passes a critical value; see `richardson_numbers`."""
    name = "bulk richardson"
    if not profile.wind_known:
        return Top(name, nan, "no wind in the profile")
    z, number = richardson_numbers(profile, friction_velocity=friction_velocity, reference=reference)
    form = "plain form" if friction_velocity is None else "with friction velocity"
    over = np.flatnonzero(number > critical)
    if over.size == 0:
        return Top(name, nan, f"never passes {critical:g} below the profile's end ({profile.height[-1]:.0f} m)")
    j = int(over[0])
    z0, n0 = (float(z[j - 1]), float(number[j - 1])) if j else (reference, 0.0)
    share = (critical - n0) / (float(number[j]) - n0)
    return Top(name, z0 + share * (float(z[j]) - z0), f"critical number {critical:g}, {form}")


def _moist_to(z: Array, humidity: Array, start: float) -> float:
    """First grid height [m] where the mixing ratio lies under the mean of the air from `start` up; inf if none."""
    first = min(int(np.ceil(start / GRID)), z.size - 1)
    ratio = humidity[first:] / (1.0 - humidity[first:])
    mean = np.cumsum(ratio) / np.arange(1, ratio.size + 1)
    dry = np.flatnonzero(ratio < mean - np.maximum(MOISTURE_SLACK * mean, MOISTURE_FLOOR))
    return float(z[first + int(dry[0])]) if dry.size else inf


def forecasters_top(profile: Profile, *, start: float = 0.0) -> Top:
    """How high the lapse rate stays dry adiabatic and the mixing ratio constant (common practice).

    From `start` [m] (the top of a superadiabatic surface layer where there is one) upward. The lapse rate stops
    being dry adiabatic where potential temperature rises more than 2 K/km over the next 200 m; the mixing ratio
    stops being constant where it first lies 10 % (at least 0.5 g/kg) under the mean of the air below it and above the
    lowest 100 m. The top is the lower of the two; the detail gives both.
    """
    name = "forecaster's rule"
    z, theta, humidity = _grid(profile, GRID, inf)
    n = round(ADIABATIC_SPAN / GRID)
    first = min(int(np.ceil(start / GRID)), z.size - 1)
    if z.size <= first + n:
        return Top(name, nan, f"the profile ends at {profile.height[-1]:.0f} m")
    rise = theta[n:] - theta[:-n]
    stable = np.flatnonzero(rise[first:] > ADIABATIC_SLACK * ADIABATIC_SPAN / 1000.0)
    if stable.size == 0:
        return Top(name, nan, f"dry adiabatic to the profile's end ({profile.height[-1]:.0f} m)")
    low = first + int(stable[0])
    if low == first:
        return Top(name, 0.0, "not dry adiabatic from the ground up")
    # the span starts to feel the stable air before it reaches it: the layer ends where theta leaves the mean below
    limit = float(theta[first : low + 1].mean()) + ADIABATIC_SLACK * ADIABATIC_SPAN / 1000.0
    leave = np.flatnonzero(theta[low : low + n + 1] > limit)
    by_lapse = float(z[low + (int(leave[0]) if leave.size else n)])
    if not profile.humidity_known:
        return Top(name, by_lapse, f"lapse rate to {by_lapse:.0f} m; no humidity")
    by_moisture = _moist_to(z, humidity, max(start, SURFACE_AIR))
    dry = isfinite(by_moisture)
    moisture = f"to {by_moisture:.0f} m" if dry else "all the way up"
    return Top(name, min(by_lapse, by_moisture), f"lapse rate to {by_lapse:.0f} m, mixing ratio {moisture}")


def all_tops(profile: Profile, *, critical: float = CRITICAL_RICHARDSON, start: float = 0.0) -> tuple[Top, ...]:
    """Every definition on one profile, in the order of `EXPLANATIONS`.

    `start` [m] is the top of a superadiabatic surface layer, for the forecaster's rule.
    """
    surface = float(profile.theta[0] * (profile.pressure[0] / P_REFERENCE) ** KAPPA)
    return (
        tables_depth(profile),
        parcel(profile),
        parcel(profile, excess=2.0),
        adiabat(profile, surface_temperature=surface, excess=MORNING_EXCESS),
        gradient_top(profile),
        humidity_gradient_top(profile),
        richardson_top(profile, critical=critical),
        forecasters_top(profile, start=start),
    )
