"""How a run starts: the first turbulent layer, and the temperature of the ground below it."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from forcing.air import CP_DRY, GRAVITY, KAPPA, P_REFERENCE, STEFAN_BOLTZMANN, VIRTUAL, vapour_pressure
from forcing.emissivity import prata_emissivity
from forcing.scenario_types import Scenario
from forcing.sun import solar_position
from forcing.surface import Ground, energy_balance, periodic_soil, screen, soil_layers
from forcing.table import anthropogenic_heat, shortwave
from slab.column import Aloft, as_numbers, mass_of
from slab.growth import encroached_mass

Array = NDArray[np.float64]

CRITICAL_RICHARDSON = 0.25  # common practice for the top of a turbulent layer (fitted values 0.24 to 0.39, Zhang et al. 2014)
SHALLOWEST, DEEPEST = 20.0, 300.0  # [m] bounds of the first layer: stable layers are seen from tens to a few hundred m
STRATIFIED = 0.2  # [K] our choice
SOIL_DAYS = 4
SOIL_STEP = 3600.0  # [s]
YESTERDAY_HEIGHT = 1000.0  # [m] where the residual layer's theta is read
DAILY_RANGE = 12.0  # [K] assumed between last night and this afternoon where the release itself is an afternoon one
HOTTEST_SOLAR_HOUR = 15.0
CALM_DAY = 2.0  # [m s-1] least wind of the days before
MOST_SHIFT = 6.0  # [K]
MIXED_DEPTH, SCREEN_HEIGHT, WIND_HEIGHT = 500.0, 2.0, 20.0  # [m] depth for their gusts, where air and wind are read (assumed)


@dataclass(frozen=True, slots=True)
class GroundStart:
    """Soil layer temperatures from the top [K] (6,), skin temperature [K], the deep temperature they rest on [K], the coldest
    and warmest air they were spun up with [K], and by how much they were then shifted to meet the screen temperature [K]."""

    soil: tuple[float, ...]
    skin: float
    deep: float
    coldest: float
    warmest: float
    shift: float


def turbulent_depth(height: Array, theta_v: Array, speed: Array) -> float:
    """Depth [m] of the layer that shear keeps turbulent: lowest bulk Richardson number over 0.25, 20 to 300 m.

    Parameters
    ----------
    height, theta_v, speed : ndarray, shape (n,)
        m above ground, K, m s-1.
    """
    shear = np.maximum(speed, 0.1) ** 2
    richardson = GRAVITY / theta_v[0] * (theta_v - theta_v[0]) * height / shear
    over = np.nonzero((richardson > CRITICAL_RICHARDSON) & (height > 0.0))[0]
    depth = float(height[over[0]]) if over.size else DEEPEST
    return min(max(depth, SHALLOWEST), DEEPEST)


def mixed_mass(air: Aloft) -> float:
    """Mass [kg m-2] of the layer that convection has mixed, 20 m or more.

    It ends where virtual potential temperature passes the mean of the air below by `STRATIFIED`: measured and computed
    mixed layers are never neutral to the last tenth of a kelvin.
    """
    mass = np.asarray(air.mass)
    virtual = np.asarray(air.theta) * (1.0 + VIRTUAL * np.asarray(air.humidity))
    running = np.concatenate(([0.0], np.cumsum(np.diff(mass) * 0.5 * (virtual[1:] + virtual[:-1]))))
    below = running[1:] / mass[1:]
    over = np.flatnonzero((virtual[1:] > below + STRATIFIED) & (np.asarray(air.height)[1:] >= SHALLOWEST))
    return float(mass[int(over[0]) + 1]) if over.size else float(mass[-1])


def sheared_mass(air: Aloft) -> float:
    """Mass [kg m-2] of a first slab that shear keeps turbulent, or deeper where mixing it would leave it unstable."""
    height, theta = np.asarray(air.height), np.asarray(air.theta)
    theta_v = theta * (1.0 + VIRTUAL * np.asarray(air.humidity))
    depth = turbulent_depth(height, theta_v, np.hypot(np.asarray(air.u), np.asarray(air.v)))
    return encroached_mass(air, air, 0.0, 0.0, 0.0, 0.0, mass_of(air, depth))


def _solar_hour(scenario: Scenario, time: Array) -> Array:
    hour_angle = solar_position(time, scenario.site.latitude, scenario.site.longitude).hour_angle
    return np.asarray(12.0 + hour_angle * 12.0 / math.pi) % 24.0


def yesterday(scenario: Scenario) -> tuple[float, float]:
    """Coldest and warmest air at the ground [K] of a day like this one, from what the hour of the release can tell.

    A dawn sounding holds both: the surface air, and the residual layer brought dry-adiabatically to the ground. A release
    by day holds the warm end, best in the afternoon; the cold end is then assumed 12 K lower. A release in the evening holds
    the warm end in the residual layer, and the night has still to cool its surface air by as much again as it has done.
    """
    profile = scenario.profile
    exner = (profile.surface_pressure / P_REFERENCE) ** KAPPA
    surface = float(profile.theta[0]) * exner
    above = float(np.interp(YESTERDAY_HEIGHT, profile.height, profile.theta)) * exner
    hour = float(_solar_hour(scenario, np.array([profile.valid.timestamp()]))[0])
    if 9.0 < hour < 20.0:
        warmest = max(surface, min(above, surface + (2.0 if hour > HOTTEST_SOLAR_HOUR else DAILY_RANGE)))
        return min(surface, warmest - DAILY_RANGE), warmest
    warmest = min(max(above, surface + 1.0), surface + 25.0)
    if hour >= 20.0:
        return surface - min(warmest - surface, 0.5 * DAILY_RANGE), warmest
    return surface, warmest


def ground_start(scenario: Scenario, ground: Ground) -> GroundStart:
    """Soil temperatures after days of the same forcing, skin free (see `forcing.surface.periodic_soil`).

    The deep temperature is the mean of the coldest and warmest air; air temperature is a sine between them.
    """
    coldest, warmest = yesterday(scenario)
    deep = 0.5 * (coldest + warmest)
    profile = scenario.profile
    time = profile.valid.timestamp() + np.arange(0.0, 86400.0, SOIL_STEP)
    hour = _solar_hour(scenario, time)
    air = deep + 0.5 * (warmest - coldest) * np.cos((hour - HOTTEST_SOLAR_HOUR) * math.pi / 12.0)
    humidity = np.full(time.shape, float(np.mean(profile.humidity[profile.height <= 500.0])))
    vapour = vapour_pressure(float(humidity[0]), profile.surface_pressure)
    cloud = scenario.weather.sample("cloud_fraction", time)
    clear = np.array([prata_emissivity(vapour, float(t)) * STEFAN_BOLTZMANN * t**4 for t in air])
    longwave = clear + cloud * (1.0 - clear / (STEFAN_BOLTZMANN * air**4)) * STEFAN_BOLTZMANN * air**4
    speed = float(np.mean(np.hypot(profile.u, profile.v)[profile.height <= 300.0]))
    out = as_numbers(np.zeros(len(soil_layers(ground))))
    skin = periodic_soil(
        ground,
        soil_layers(ground),
        as_numbers(shortwave(scenario, time)),
        as_numbers(longwave),
        as_numbers(air),
        as_numbers(humidity),
        as_numbers(np.full(time.shape, max(speed, CALM_DAY))),
        as_numbers(np.full(time.shape, MIXED_DEPTH)),
        as_numbers(anthropogenic_heat(scenario, time)),
        SCREEN_HEIGHT,
        WIND_HEIGHT,
        profile.surface_pressure,
        deep,
        SOIL_STEP,
        SOIL_DAYS,
        out,
    )
    shift, under_release = screen_shift(scenario, ground, out[0], float(longwave[0]))
    soil = tuple(float(x) + shift for x in out)
    return GroundStart(soil, float(skin) if math.isnan(under_release) else under_release, deep, coldest, warmest, shift)


def screen_shift(scenario: Scenario, ground: Ground, soil: float, longwave: float) -> tuple[float, float]:
    """Kelvin by which the ground must start warmer for the screen temperature to come out as the release measured it, and
    the skin temperature [K] that goes with it.

    Only where the release found stable air over the lowest 20 m: similarity between the skin and the air there then gives
    a screen temperature that the ground decides. At most `MOST_SHIFT` either way; 0 and NaN where 20 m are not stable.
    """
    profile = scenario.profile
    exner = (profile.surface_pressure / P_REFERENCE) ** KAPPA
    measured = float(profile.theta[0]) * exner
    over = float(np.interp(WIND_HEIGHT, profile.height, profile.theta)) * exner
    if over <= measured + GRAVITY / CP_DRY * WIND_HEIGHT:
        return 0.0, math.nan
    humidity = float(np.interp(WIND_HEIGHT, profile.height, profile.humidity))
    wind = float(np.interp(WIND_HEIGHT, profile.height, np.hypot(profile.u, profile.v)))
    sun = float(shortwave(scenario, np.array([profile.valid.timestamp()]))[0])
    half = 2.0 * ground.soil_conductivity / soil_layers(ground)[0]

    def screen_at(shift: float) -> tuple[float, float]:
        exchange = energy_balance(
            ground, sun, longwave, over, humidity, WIND_HEIGHT, wind, WIND_HEIGHT, SHALLOWEST, profile.surface_pressure,
            soil + shift, half, 0.0, soil + shift, 0.0,
        )  # fmt: skip
        air = screen(ground, exchange, over, humidity, WIND_HEIGHT, wind, WIND_HEIGHT, profile.surface_pressure,
                     SCREEN_HEIGHT)  # fmt: skip
        return air.temperature, exchange.skin_temperature

    low, high = -MOST_SHIFT, MOST_SHIFT
    for _ in range(12):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if screen_at(middle)[0] < measured else (low, middle)
    shift = 0.5 * (low + high)
    return shift, screen_at(shift)[1]
