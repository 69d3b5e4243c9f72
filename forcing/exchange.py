"""What passes between ground and air: the types, stomata and bare soil, imposed fluxes, values at screen height.

Signs: sensible and latent heat are positive upward, ground heat positive into the ground, net radiation positive downward.
"""

from __future__ import annotations

import math
from typing import NamedTuple

from forcing.air import (
    CP_DRY,
    GRAVITY,
    KARMAN,
    VIRTUAL,
    density,
    latent_heat,
    saturation_vapour_pressure,
    vapour_pressure,
    virtual,
)
from forcing.similarity import heat_span, momentum_span
from forcing.speed import kernel
from forcing.transfer import CALM_WIND, GUSTINESS, ZETA_MAX, Geometry, friction_for

STOMATA_MAX = 5000.0  # s m-1, Noilhan & Planton 1989 (Mon. Weather Rev. 117, 536)
DEFICIT_MIN = 200.0  # Pa, common practice
NO_EVAPORATION = 1e9  # s m-1, stands for a surface without water


class Ground(NamedTuple):
    """One ground as the kernels need it; built by `forcing.cover.ground`."""

    albedo: float
    emissivity: float
    roughness_momentum: float  # m
    roughness_heat: float  # m
    displacement: float  # m
    skin_conductance: float  # W m-2 K-1, skin to the top of the soil
    vegetation_fraction: float
    leaf_area: float  # m2 of leaf per m2 of vegetated ground
    stomatal_resistance_min: float  # s m-1 of a leaf
    soil_moisture: float  # 0 wilting point .. 1 field capacity
    soil_conductivity: float  # W m-1 K-1
    soil_heat_capacity: float  # J m-3 K-1
    sky_view: float  # share of the sky seen by the whole surface, 0..1
    anthropogenic_heat: float  # W m-2, mean of the day
    snow: float  # 1: snow on the ground
    stomatal_radiation: float  # W m-2 of sunlight that opens the stomata half way or so
    stomatal_slope: float  # kPa^0.5, how much dry air closes the stomata (less slope, more closing)
    bare_fraction: float  # share of soil or snow open to the air
    bare_resistance: float  # s m-1 of that soil to vapour


class Exchange(NamedTuple):
    """Fluxes and state of the surface. NaN where imposed fluxes leave a term unknown."""

    skin_temperature: float  # K
    sensible: float  # W m-2, positive upward
    latent: float  # W m-2, positive upward
    ground: float  # W m-2, positive into the ground
    net_radiation: float  # W m-2, positive downward
    friction_velocity: float  # m s-1
    inverse_obukhov: float  # m-1
    aerodynamic_resistance: float  # s m-1
    surface_resistance: float  # s m-1
    melt: float  # W m-2 spent on melting snow
    anthropogenic: float  # W m-2 released now
    evaporation: float  # kg m-2 s-1, positive upward
    skin_humidity: float  # kg/kg of the air at the roughness length of heat


class Air(NamedTuple):
    """Air at one height: temperature [K], specific humidity [kg/kg], wind [m/s]."""

    temperature: float
    humidity: float
    wind: float


@kernel
def surface_resistance(
    ground: Ground, shortwave_down: float, air_temperature: float, humidity: float, pressure: float
) -> float:
    """Resistance [s m-1] of stomata and soil in parallel to the loss of vapour.

    Stomata: factors of radiation, temperature and soil moisture of Noilhan & Planton 1989 (Eqs 34 to 37, after Jarvis 1976),
    and the optimal response to the vapour pressure deficit of Medlyn et al. 2011 (Glob. Change Biol. 17, 2134).
    """
    conductance = 0.0
    if ground.vegetation_fraction > 0.0 and ground.leaf_area > 0.0:
        lowest = ground.stomatal_resistance_min
        light = 1.1 * max(shortwave_down, 0.0) / (ground.stomatal_radiation * ground.leaf_area)
        radiation = (light + lowest / STOMATA_MAX) / (1.0 + light)
        water = min(1.0, max(0.0, ground.soil_moisture))
        off = 298.0 - air_temperature
        warmth = max(0.02, 1.0 - 0.0016 * off * off)
        deficit = max(0.0, saturation_vapour_pressure(air_temperature) - vapour_pressure(humidity, pressure))
        slope = ground.stomatal_slope
        # relative to 1 kPa, the deficit at which the resistances of the table are meant; leaf air is never quite saturated
        dryness = (1.0 + slope / math.sqrt(max(deficit, DEFICIT_MIN) / 1000.0)) / (1.0 + slope)
        opening = max(radiation * water * warmth * dryness, lowest / STOMATA_MAX)
        conductance = ground.vegetation_fraction * ground.leaf_area * opening / lowest
    conductance += ground.bare_fraction / max(ground.bare_resistance, 1e-3)
    if conductance < 1.0 / NO_EVAPORATION:
        return NO_EVAPORATION
    return 1.0 / conductance


@kernel
def geometry_of(ground: Ground, temperature_height: float, wind_height: float) -> Geometry:
    zm = max(wind_height, 1.5 * ground.roughness_momentum)
    zh = max(temperature_height, 1.5 * ground.roughness_momentum)
    return Geometry(
        zm, zh, ground.roughness_momentum, ground.roughness_heat,
        math.log(zm / ground.roughness_momentum), math.log(zh / ground.roughness_heat),
    )  # fmt: skip


@kernel
def imposed_fluxes(
    ground: Ground,
    sensible: float,
    latent: float,
    air_temperature: float,
    humidity: float,
    temperature_height: float,
    wind_speed: float,
    wind_height: float,
    depth: float,
    pressure: float,
    friction_velocity: float,
    guess_inverse_obukhov: float,
) -> Exchange:
    """Exchange where the fluxes [W m-2, positive upward] are given; ``friction_velocity`` may be NaN.

    Skin temperature and humidity follow by similarity. Net radiation, ground heat and melt are unknown and NaN.
    """
    rho = density(pressure, air_temperature, humidity)
    heat = latent_heat(air_temperature)
    kinematic = sensible / (rho * CP_DRY)
    vapour = latent / (rho * heat)
    virtual_air = virtual(air_temperature, humidity)
    buoyancy = GRAVITY / virtual_air * (kinematic * (1.0 + VIRTUAL * humidity) + VIRTUAL * air_temperature * vapour)
    geometry = geometry_of(ground, temperature_height, wind_height)
    speed2 = max(wind_speed, CALM_WIND) ** 2
    if buoyancy > 0.0:
        speed2 += (GUSTINESS * math.exp(math.log(buoyancy * max(depth, 1.0)) / 3.0)) ** 2
    friction = friction_velocity
    if not friction > 0.0:
        friction = friction_for(geometry, math.sqrt(speed2), buoyancy)
    highest = ZETA_MAX / max(geometry.wind_height, geometry.heat_height)
    x = min(highest, -KARMAN * buoyancy / (friction * friction * friction))
    resistance = heat_span(geometry.heat_height, geometry.roughness_heat, x) / (KARMAN * friction)
    skin = air_temperature + kinematic * resistance
    wet = max(0.0, humidity + vapour * resistance)
    unknown = math.nan
    return Exchange(
        skin, sensible, latent, unknown, unknown, friction, x, resistance, unknown, unknown, 0.0, latent / heat, wet
    )


@kernel
def screen(
    ground: Ground,
    exchange: Exchange,
    air_temperature: float,
    humidity: float,
    temperature_height: float,
    wind_speed: float,
    wind_height: float,
    pressure: float,
    height: float,
) -> Air:
    """Air at ``height`` [m] above displacement + z0m, by similarity between skin and the reference heights.

    Above a reference height its own value holds (potential temperature, humidity, wind).
    """
    geometry = geometry_of(ground, temperature_height, wind_height)
    x = exchange.inverse_obukhov
    z = height + ground.roughness_momentum
    whole = heat_span(geometry.heat_height, ground.roughness_heat, x)
    share = heat_span(min(z, geometry.heat_height), ground.roughness_heat, x) / whole
    theta = exchange.skin_temperature + (air_temperature - exchange.skin_temperature) * share
    wet = exchange.skin_humidity + (humidity - exchange.skin_humidity) * share
    blown = momentum_span(min(z, geometry.wind_height), ground.roughness_momentum, x)
    wind = wind_speed * blown / momentum_span(geometry.wind_height, ground.roughness_momentum, x)
    return Air(theta - GRAVITY / CP_DRY * height, wet, wind)
