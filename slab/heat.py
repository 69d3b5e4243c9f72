"""How much heat the morning needs: to break the inversion, and to reach cumulus; and the cloud levels themselves.

The heat to bring the air below a level to one dry adiabat (the area method) is

    cp * (p_s / 1000 hPa)**KAPPA * integral over 0..top of density * (target - theta) dz      [J m-2],

mass-weighted with the profile's own hydrostatic density. It is in the currency of the day's slab, which receives
the theta flux H / (cp (p_s / 1000 hPa)**KAPPA): the layer reaches the level when the summed sensible heat reaches
this number, if nothing is entrained and no air is advected.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import isfinite, nan
from typing import Final

import numpy as np
from numpy.typing import NDArray

from forcing.air import CP_DRY, GRAVITY, condensation_level, each, exner, saturation_humidity, temperature
from forcing.sounding import Profile
from slab.column import distinct
from slab.inversions import Inversion

Array = NDArray[np.float64]

MEAN_LAYER: Final = 1.0e4
"""Pa: thickness of the mean layer whose parcel gives the better cloud base (Craven et al. 2002, Weather Forecast. 17,
885)."""
STEP: Final = 10.0
"""m: spacing of the integrals and of the search for the condensation level."""


@dataclass(frozen=True, slots=True)
class CloudLevels:
    """Condensation levels and what cumulus needs; NaN where the profile cannot tell.

    Attributes
    ----------
    surface_parcel, mean_parcel : float
        Condensation level of the lowest level's air and of the lowest 100 hPa mixed, m above ground.
    mean_theta, mean_humidity : float
        Of the lowest 100 hPa, mass-weighted: K, kg/kg.
    convective_level : float
        Height where the profile's own air would be saturated with the mean humidity, m above ground.
    convective_temperature : float
        Surface temperature whose dry adiabat meets the profile there, K.
    convective_heat : float
        Heat to warm the air below to that adiabat, J m-2, not negative.
    """

    surface_parcel: float
    mean_parcel: float
    mean_theta: float
    mean_humidity: float
    convective_level: float
    convective_temperature: float
    convective_heat: float


@dataclass(frozen=True, slots=True)
class _Column:
    """The profile on a fine grid that keeps every level: m, Pa, K, kg/kg, each shape (n,)."""

    height: Array
    pressure: Array
    theta: Array
    humidity: Array


def _fine(profile: Profile, top: float) -> _Column:
    """Levels up to `top` [m], with steps of 10 m between them; pressure is exponential between levels."""
    steps = np.arange(0.0, top, STEP)
    z = distinct(np.concatenate([steps, profile.height[profile.height < top], [top]]))
    pressure = np.exp(np.interp(z, profile.height, np.log(profile.pressure)))
    theta = np.interp(z, profile.height, profile.theta)
    return _Column(z, pressure, theta, np.interp(z, profile.height, profile.humidity))


def _over_mass(pressure: Array, values: Array) -> float:
    """Integral of values over the air's mass, hydrostatically: [values] kg m-2."""
    return float(np.sum(0.5 * (values[1:] + values[:-1]) * (pressure[:-1] - pressure[1:]))) / GRAVITY


def area_below(height: Array, theta: Array, top: float, *, target: float | None = None) -> float:
    """Area between a dry adiabat and a profile, from the ground to a level [K m].

    Parameters
    ----------
    height, theta : ndarray, shape (n,)
        m above ground, K; linear between levels.
    top : float
        The level, m above ground.
    target : float or None
        The adiabat [K]; the profile's own value at `top` where left out.
    """
    z = np.concatenate([height[height < top], [top]])
    values = np.interp(z, height, theta)
    goal = float(values[-1]) if target is None else target
    return float(np.sum((goal - 0.5 * (values[1:] + values[:-1])) * np.diff(z)))


def heat_to_adiabat(profile: Profile, top: float, *, target: float | None = None) -> float:
    """Heat to bring the air below `top` [m] to one dry adiabat [J m-2]; NaN above the profile.

    `target` is the adiabat [K]; the profile's own potential temperature at `top` where left out. Air warmer than
    the adiabat counts against the need, so the result can be negative.
    """
    if not (0.0 <= top <= profile.height[-1]):
        return nan
    column = _fine(profile, top)
    goal = float(column.theta[-1]) if target is None else target
    return CP_DRY * exner(profile.surface_pressure) * _over_mass(column.pressure, goal - column.theta)


def heat_to_break(profile: Profile, inversion: Inversion) -> float:
    """Heat to warm all air below an inversion's top to the dry adiabat through it [J m-2]; 0 without one."""
    return heat_to_adiabat(profile, inversion.top) if inversion.present else 0.0


def mean_layer(profile: Profile, *, thickness: float = MEAN_LAYER) -> tuple[float, float]:
    """Mass-weighted potential temperature [K] and specific humidity [kg/kg] of the lowest `thickness` [Pa]."""
    lowest = max(profile.surface_pressure - thickness, float(profile.pressure[-1]))
    top = float(np.interp(-np.log(lowest), -np.log(profile.pressure), profile.height))
    column = _fine(profile, top)
    mass = _over_mass(column.pressure, np.ones_like(column.theta))
    return _over_mass(column.pressure, column.theta) / mass, _over_mass(column.pressure, column.humidity) / mass


def _convective_level(profile: Profile, humidity: float) -> tuple[float, float]:
    """First height [m] where the profile would be saturated with `humidity`, and its theta [K]; NaN if none."""
    column = _fine(profile, float(min(profile.height[-1], 12000.0)))
    held = each(saturation_humidity, each(temperature, column.theta, column.pressure), column.pressure)
    wet = np.flatnonzero(held <= humidity)
    if wet.size == 0:
        return nan, nan
    j = int(wet[0])
    if j == 0:
        return 0.0, float(column.theta[0])
    share = float((held[j - 1] - humidity) / (held[j - 1] - held[j]))
    height = float(column.height[j - 1] + share * (column.height[j] - column.height[j - 1]))
    return height, float(np.interp(height, column.height, column.theta))


def cloud_levels(profile: Profile) -> CloudLevels:
    """Condensation levels, convective temperature and the heat to reach it; see `CloudLevels`."""
    theta, humidity = mean_layer(profile)
    if not profile.humidity_known or humidity <= 0.0 or profile.humidity[0] <= 0.0:
        return CloudLevels(nan, nan, theta, nan, nan, nan, nan)
    pressure = profile.surface_pressure
    surface = condensation_level(float(profile.temperature[0]), float(profile.humidity[0]), pressure)
    mean = condensation_level(temperature(theta, pressure), humidity, pressure)
    level, adiabat = _convective_level(profile, humidity)
    if not isfinite(level):
        return CloudLevels(surface, mean, theta, humidity, nan, nan, nan)
    heat = max(0.0, heat_to_adiabat(profile, level, target=adiabat))
    return CloudLevels(surface, mean, theta, humidity, level, temperature(adiabat, pressure), heat)
