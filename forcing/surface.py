"""Energy balance of the ground: skin temperature and fluxes by day and by night, and the soil's start.

Signs: sensible and latent heat are positive upward, ground heat positive into the ground, net radiation positive
downward. The balance closes as net radiation + anthropogenic heat = sensible + latent + ground + melt.

The surface is one leaf-and-soil layer behind one aerodynamic resistance (Monteith 1965): stomata of the vegetated part and
the bare soil act in parallel (Kelliher et al. 1995, Agric. For. Meteorol. 73, 1). Anthropogenic heat is released at the skin.
"""

from __future__ import annotations

import math
from collections.abc import MutableSequence, Sequence

from forcing.air import CP_DRY, GRAVITY, KARMAN, STEFAN_BOLTZMANN, VIRTUAL, density, latent_heat, virtual
from forcing.exchange import Air, Exchange, Ground, geometry_of, imposed_fluxes, screen, surface_resistance
from forcing.similarity import phi_heat, phi_momentum, psi_heat, psi_momentum, unstable_spans
from forcing.soil import implicit_soil, layer_thicknesses, soil_rates, soil_rates_from
from forcing.speed import kernel
from forcing.transfer import (
    CALM_WIND,
    GUSTINESS,
    ROUNDS,
    SUBLIMATION,
    Balance,
    Geometry,
    Transfer,
    bracket_unstable,
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


@kernel
def _resume(balance: Balance, geometry: Geometry, skin: float, x: float) -> Transfer:
    """Continue in unstable air: the last skin temperature and 1/L give back the gusts, and with them both unknowns."""
    zm, zh, z0m, z0h, log_m, log_h = geometry
    fm, fh, _, _ = unstable_spans(zm, zh, z0m, z0h, log_m, log_h, x)
    excess = skin_humidity(balance.pressure, balance.ice, skin)[0] - balance.humidity
    closed = balance.resistance if excess > 0.0 else 0.0
    warm = (1.0 + VIRTUAL * balance.humidity) * (skin - balance.air_temperature)
    moist = VIRTUAL * balance.air_temperature * excess
    rest = GRAVITY / balance.virtual_air * fm * fm / (fh * x)
    speed = balance.wind
    for _ in range(2):
        resistance = fh * fm / (KARMAN * KARMAN * speed)
        speed2 = -rest * (warm + moist * resistance / (resistance + closed))
        speed = math.sqrt(min(max(speed2, balance.wind * balance.wind), 900.0))
    return solve_unstable(
        balance, geometry, skin, math.log(fh * fm / (KARMAN * KARMAN * speed)), math.log(KARMAN * speed / fm)
    )


@kernel
def _solve(balance: Balance, geometry: Geometry, guess_skin: float, guess_inverse_obukhov: float) -> Transfer:
    """Solve skin temperature and stability; the guess only shortens the way."""
    x = guess_inverse_obukhov
    if -1e3 < x * geometry.wind_height < -1e-4:
        found = _resume(balance, geometry, guess_skin, x)
        if found.rounds < ROUNDS:
            return found
    friction = KARMAN * balance.wind / geometry.log_momentum
    neutral = geometry.log_heat / (KARMAN * friction)
    skin, _, difference, _ = skin_at(balance, neutral, guess_skin, 1e-2, 40)
    if -0.1 < difference < 0.1:  # which side of neutral it is must not hang on the guess
        skin, _, difference, _ = skin_at(balance, neutral, skin, 1e-11, 40)
    if difference <= 0.0:
        return solve_stable(balance, geometry, skin, x, neutral)
    buoyancy = GRAVITY / balance.virtual_air * difference / neutral
    gust = GUSTINESS * math.exp(math.log(max(buoyancy * balance.depth, 1e-12)) / 3.0)
    share = math.sqrt(1.0 + gust * gust / (balance.wind * balance.wind))
    found = solve_unstable(balance, geometry, skin, math.log(neutral / share), math.log(friction * share))
    if found.rounds < ROUNDS:
        return found
    return bracket_unstable(balance, geometry, skin, math.log(neutral))


@kernel
def _exchange(balance: Balance, transfer: Transfer, net_free: float, anthropogenic: float) -> Exchange:
    """Fluxes at the solution. ``net_free`` is the net radiation without the part emitted by the skin."""
    resistance = transfer.resistance
    skin = skin_at(balance, resistance, transfer.skin, 1e-8, 20)[0]
    humidity = balance.humidity
    excess = skin_humidity(balance.pressure, balance.ice, skin)[0] - humidity
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
        anthropogenic, latent / balance.latent_heat, humidity + excess * resistance / (resistance + limiting),
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
    latent = SUBLIMATION if ground.snow > 0.0 else latent_heat(air_temperature)
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
    transfer = _solve(balance, geometry_of(ground, temperature_height, wind_height), guess_skin, guess_inverse_obukhov)
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
