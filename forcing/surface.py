"""Exchange between ground and air: energy balance of the skin, imposed fluxes, values at screen height.

Signs: sensible and latent heat are positive upward, ground heat positive into the ground, net radiation positive
downward. The balance closes as net radiation + anthropogenic heat = sensible + latent + ground + melt.

The surface is one leaf-and-soil layer behind one aerodynamic resistance (Monteith 1965): stomata of the vegetated part and
the bare soil act in parallel (Kelliher et al. 1995, Agric. For. Meteorol. 73, 1). Anthropogenic heat is released at the skin.
"""

from __future__ import annotations

import math
from collections.abc import MutableSequence, Sequence
from typing import NamedTuple

from forcing.air import (
    CP_DRY,
    GRAVITY,
    KARMAN,
    STEFAN_BOLTZMANN,
    VIRTUAL,
    density,
    latent_heat,
    saturation_vapour_pressure,
    vapour_pressure,
    virtual,
)
from forcing.similarity import (
    heat_span,
    momentum_span,
    phi_heat,
    phi_momentum,
    psi_heat,
    psi_momentum,
    unstable,
)
from forcing.soil import implicit_soil, layer_thicknesses, soil_rates, soil_rates_from
from forcing.speed import kernel
from forcing.transfer import (
    CALM_WIND,
    GUSTINESS,
    ZETA_MAX,
    Balance,
    Geometry,
    Transfer,
    skin_at,
    skin_humidity,
    solve_stable,
    solve_unstable,
)

__all__ = [
    "Air",
    "Exchange",
    "Ground",
    "energy_balance",
    "energy_balance_net",
    "imposed_fluxes",
    "periodic_soil",
    "phi_heat",
    "phi_momentum",
    "psi_heat",
    "psi_momentum",
    "screen",
    "soil_layers",
    "soil_rates",
    "soil_rates_from",
    "surface_resistance",
]

MELTING = 273.15  # K
STOMATA_MAX = 5000.0  # s m-1, Noilhan & Planton 1989 (Mon. Weather Rev. 117, 536)
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
    stomatal_humidity: float  # Pa-1, how fast dry air closes the stomata
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
    and an exponential factor of the vapour pressure deficit.
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
        drought = math.exp(-ground.stomatal_humidity * deficit)
        opening = max(radiation * water * warmth * drought, lowest / STOMATA_MAX)
        conductance = ground.vegetation_fraction * ground.leaf_area * opening / lowest
    conductance += ground.bare_fraction / max(ground.bare_resistance, 1e-3)
    if conductance < 1.0 / NO_EVAPORATION:
        return NO_EVAPORATION
    return 1.0 / conductance


@kernel
def _geometry(ground: Ground, temperature_height: float, wind_height: float) -> Geometry:
    zm = max(wind_height, 1.5 * ground.roughness_momentum)
    zh = max(temperature_height, 1.5 * ground.roughness_momentum)
    return Geometry(
        zm, zh, ground.roughness_momentum, ground.roughness_heat,
        math.log(zm / ground.roughness_momentum), math.log(zh / ground.roughness_heat),
    )  # fmt: skip


@kernel
def _solve(balance: Balance, geometry: Geometry, guess_skin: float, guess_inverse_obukhov: float) -> Transfer:
    """Solve skin temperature and stability; the guess only shortens the way."""
    friction = KARMAN * balance.wind / geometry.log_momentum
    neutral = geometry.log_heat / (KARMAN * friction)
    skin = skin_at(balance, neutral, guess_skin, 1e-4, 40)
    difference = skin.virtual_difference
    if difference <= 0.0:
        return solve_stable(balance, geometry, skin, guess_inverse_obukhov, neutral)
    gravity = GRAVITY / balance.virtual_air
    x = guess_inverse_obukhov
    if x < -1e-9:
        # the last skin temperature and 1/L give back the wind with its gusts, and with it both unknowns
        warm = guess_skin - balance.air_temperature
        known = difference + (1.0 + VIRTUAL * balance.humidity) * (warm - (skin.temperature - balance.air_temperature))
        top_m = unstable(geometry.wind_height * x)
        top_h = unstable(geometry.heat_height * x)
        fm = geometry.log_momentum - top_m.psi_momentum
        fh = geometry.log_heat - top_h.psi_heat
        speed2 = -gravity * known * fm * fm / (fh * x)
        wind2 = balance.wind * balance.wind
        if fm > 0.1 and fh > 0.1 and wind2 < speed2 < 100.0 * wind2 + 25.0:
            friction = KARMAN * math.sqrt(speed2) / fm
            return solve_unstable(balance, geometry, skin, math.log(fh / (KARMAN * friction)), math.log(friction))
    gust = GUSTINESS * math.exp(math.log(max(gravity * difference / neutral * balance.depth, 1e-12)) / 3.0)
    share = math.sqrt(1.0 + gust * gust / (balance.wind * balance.wind))
    return solve_unstable(balance, geometry, skin, math.log(neutral / share), math.log(friction * share))


@kernel
def _exchange(balance: Balance, transfer: Transfer, net_free: float, anthropogenic: float) -> Exchange:
    """Fluxes at the solution. ``net_free`` is the net radiation without the part emitted by the skin."""
    resistance = transfer.resistance
    skin = skin_at(balance, resistance, transfer.skin, 1e-11, 20).temperature
    saturated, _ = skin_humidity(balance, skin)
    excess = saturated - balance.humidity
    limiting = balance.resistance if excess > 0.0 else 0.0
    sensible = balance.heat_capacity / resistance * (skin - balance.air_temperature)
    latent = balance.latent_capacity / (resistance + limiting) * excess
    into = balance.soil_conductance * (skin - balance.soil_temperature)
    net = net_free - balance.emission * skin * skin * skin * skin
    melt = 0.0
    if skin >= balance.ceiling:
        melt = net + anthropogenic - sensible - latent - into
    return Exchange(
        skin, sensible, latent, into, net, transfer.friction, transfer.inverse_obukhov, resistance, limiting, melt,
        anthropogenic, latent / balance.latent_fixed, balance.humidity + excess * resistance / (resistance + limiting),
    )  # fmt: skip


@kernel
def _solved(
    ground: Ground,
    shortwave_down: float,
    net_free: float,
    emission: float,
    air_temperature: float,
    humidity: float,
    temperature_height: float,
    wind_speed: float,
    wind_height: float,
    depth: float,
    pressure: float,
    soil_temperature: float,
    soil_half_conductance: float,
    anthropogenic: float,
    guess_skin: float,
    guess_inverse_obukhov: float,
) -> Exchange:
    rho = density(pressure, air_temperature, humidity)
    latent = latent_heat(air_temperature)
    conductance = ground.skin_conductance * soil_half_conductance / (ground.skin_conductance + soil_half_conductance)
    balance = Balance(
        net_free + anthropogenic,
        emission,
        conductance,
        soil_temperature,
        air_temperature,
        humidity,
        pressure,
        rho * CP_DRY,
        rho * latent,
        surface_resistance(ground, shortwave_down, air_temperature, humidity, pressure),
        MELTING if ground.snow > 0.0 else 1e4,
        ground.snow,
        latent,
        virtual(air_temperature, humidity),
        max(wind_speed, CALM_WIND),
        max(depth, 1.0),
    )
    transfer = _solve(balance, _geometry(ground, temperature_height, wind_height), guess_skin, guess_inverse_obukhov)
    return _exchange(balance, transfer, net_free, anthropogenic)


@kernel
def energy_balance(
    ground: Ground,
    shortwave_down: float,
    longwave_down: float,
    air_temperature: float,
    humidity: float,
    temperature_height: float,
    wind_speed: float,
    wind_height: float,
    depth: float,
    pressure: float,
    soil_temperature: float,
    soil_half_conductance: float,
    anthropogenic: float,
    guess_skin: float,
    guess_inverse_obukhov: float,
) -> Exchange:
    """Skin temperature and fluxes from the energy balance, by day and by night.

    Parameters
    ----------
    ground : Ground
    shortwave_down, longwave_down : float
        Downward radiation [W m-2].
    air_temperature : float
        Potential temperature of the air brought dry-adiabatically to the surface [K].
    humidity : float
        Specific humidity of that air [kg/kg].
    temperature_height, wind_height : float
        Where air and wind are known, above the displacement height [m].
    wind_speed : float
        Wind there [m s-1]; less than `CALM_WIND` counts as that.
    depth : float
        Depth of the mixed layer [m], for its gusts.
    pressure : float
        At the surface [Pa].
    soil_temperature : float
        First soil layer [K].
    soil_half_conductance : float
        From the top to the middle of that layer, 2 k/dz [W m-2 K-1].
    anthropogenic : float
        Heat released now [W m-2].
    guess_skin, guess_inverse_obukhov : float
        Where to start [K, m-1]; the answer does not depend on them.
    """
    sky = ground.emissivity * ground.sky_view
    net_free = (1.0 - ground.albedo) * shortwave_down + sky * longwave_down
    return _solved(
        ground, shortwave_down, net_free, sky * STEFAN_BOLTZMANN, air_temperature, humidity, temperature_height, wind_speed,
        wind_height, depth, pressure, soil_temperature, soil_half_conductance, anthropogenic, guess_skin, guess_inverse_obukhov,
    )  # fmt: skip


@kernel
def energy_balance_net(
    ground: Ground,
    shortwave_down: float,
    net_radiation: float,
    air_temperature: float,
    humidity: float,
    temperature_height: float,
    wind_speed: float,
    wind_height: float,
    depth: float,
    pressure: float,
    soil_temperature: float,
    soil_half_conductance: float,
    anthropogenic: float,
    guess_skin: float,
    guess_inverse_obukhov: float,
) -> Exchange:
    """`energy_balance` for a measured ``net_radiation`` [W m-2, positive downward]; sunlight only opens the stomata."""
    return _solved(
        ground, shortwave_down, net_radiation, 0.0, air_temperature, humidity, temperature_height, wind_speed,
        wind_height, depth, pressure, soil_temperature, soil_half_conductance, anthropogenic, guess_skin, guess_inverse_obukhov,
    )  # fmt: skip


@kernel
def _imposed_friction(geometry: Geometry, speed: float, buoyancy: float) -> float:
    """Friction velocity [m s-1] for a known buoyancy flux [m2 s-3]: the largest that fits."""
    v = math.log(KARMAN * speed / geometry.log_momentum)
    if buoyancy == 0.0:
        return math.exp(v)
    highest = ZETA_MAX / max(geometry.wind_height, geometry.heat_height)
    for _ in range(60):
        x = -KARMAN * buoyancy * math.exp(-3.0 * v)
        if x > highest:
            break
        fm = momentum_span(geometry.wind_height, geometry.roughness_momentum, x)
        change = phi_momentum(geometry.wind_height * x) - phi_momentum(geometry.roughness_momentum * x)
        slope = 1.0 - 3.0 * change / fm
        if slope <= 0.05:  # more heat is drawn from the air than this wind can bring: hold the stability
            x = highest + 1.0
            break
        step = -(v + math.log(fm / (KARMAN * speed))) / slope
        v += min(1.0, max(-1.0, step))
        if abs(step) < 1e-10:
            return math.exp(v)
    fm = momentum_span(geometry.wind_height, geometry.roughness_momentum, highest)
    return KARMAN * speed / fm


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
    geometry = _geometry(ground, temperature_height, wind_height)
    speed2 = max(wind_speed, CALM_WIND) ** 2
    if buoyancy > 0.0:
        speed2 += (GUSTINESS * math.exp(math.log(buoyancy * max(depth, 1.0)) / 3.0)) ** 2
    friction = friction_velocity
    if not friction > 0.0:
        friction = _imposed_friction(geometry, math.sqrt(speed2), buoyancy)
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
    geometry = _geometry(ground, temperature_height, wind_height)
    x = exchange.inverse_obukhov
    z = height + ground.roughness_momentum
    whole = heat_span(geometry.heat_height, ground.roughness_heat, x)
    share = heat_span(min(z, geometry.heat_height), ground.roughness_heat, x) / whole
    theta = exchange.skin_temperature + (air_temperature - exchange.skin_temperature) * share
    wet = exchange.skin_humidity + (humidity - exchange.skin_humidity) * share
    blown = momentum_span(min(z, geometry.wind_height), ground.roughness_momentum, x)
    wind = wind_speed * blown / momentum_span(geometry.wind_height, ground.roughness_momentum, x)
    return Air(theta - GRAVITY / CP_DRY * height, wet, wind)


@kernel
def soil_layers(ground: Ground) -> tuple[float, float, float, float, float, float]:
    """Thickness [m] of the six soil layers of a ground, from the top."""
    return layer_thicknesses(ground.soil_conductivity, ground.soil_heat_capacity)


@kernel
def periodic_soil(
    ground: Ground,
    thicknesses: Sequence[float],
    shortwave: Sequence[float],
    longwave: Sequence[float],
    air_temperature: Sequence[float],
    humidity: Sequence[float],
    wind: Sequence[float],
    depth: Sequence[float],
    anthropogenic: Sequence[float],
    temperature_height: float,
    wind_height: float,
    pressure: float,
    deep_temperature: float,
    step: float,
    days: int,
    out: MutableSequence[float],
) -> float:
    """Soil temperatures [K] after ``days`` of the same day, written into ``out``; returns the skin temperature [K].

    The tables hold one value per ``step`` [s] and cover one day; the answer stands at the start of the table. The step is implicit
    in soil and skin together. The lowest layer stays at ``deep_temperature``, so that the start keeps what is known of the season.
    """
    n = len(thicknesses)
    base = [0.0] * n
    answer = [0.0] * n
    for i in range(n):
        out[i] = deep_temperature
    half = 2.0 * ground.soil_conductivity / thicknesses[0]
    skin = air_temperature[0]
    x = 0.0
    for _ in range(days):
        for k in range(len(shortwave)):
            implicit_soil(
                out, thicknesses, ground.soil_conductivity, ground.soil_heat_capacity, step, 1.0, base, answer
            )
            exchange = energy_balance(
                ground, shortwave[k], longwave[k], air_temperature[k], humidity[k], temperature_height, wind[k], wind_height,
                depth[k], pressure, base[0], half / (1.0 + half * answer[0]), anthropogenic[k], skin, x,
            )  # fmt: skip
            skin = exchange.skin_temperature
            x = exchange.inverse_obukhov
            for i in range(n):
                out[i] = base[i] + answer[i] * exchange.ground
    return skin
