"""The two unknowns of the surface, skin temperature and stability, solved together.

At a given resistance the skin temperature follows from the energy balance (all terms fall with it, so there is one
answer). Around it stands the stability: in unstable air Newton's rule on the logarithms of resistance and friction
velocity, with the convective gusts of Beljaars 1995 (Q. J. R. Meteorol. Soc. 121, 255) in the wind; in stable air a
bracketed Newton's rule on the inverse Obukhov length. The derivatives are exact, so that a warm start needs two or three rounds.
"""

from __future__ import annotations

import math
from typing import NamedTuple

from forcing.air import (
    EPSILON,
    GRAVITY,
    KARMAN,
    R_VAPOUR,
    VIRTUAL,
    saturation_vapour_pressure,
    saturation_vapour_pressure_ice,
)
from forcing.similarity import stable, unstable
from forcing.speed import kernel

GUSTINESS = 1.2  # share of the convective velocity that acts as wind, Beljaars 1995 (recalled)
CALM_WIND = 0.5  # m s-1: meandering and slope winds keep at least this much shear in calm air (common practice)
ZETA_MAX = 5.0  # stability is held beyond; Beljaars & Holtslag 1991 were fitted to about 10 (recalled)
TOLERANCE = 1e-6  # of the last Newton step; the error left is its square
ROUNDS = 60


class Balance(NamedTuple):
    """Coefficients of the energy balance of the skin; SI, fluxes in W m-2."""

    absorbed: float  # all that does not depend on the skin: sun, sky, anthropogenic
    emission: float  # W m-2 K-4
    soil_conductance: float  # W m-2 K-1
    soil_temperature: float
    air_temperature: float
    humidity: float
    pressure: float
    heat_capacity: float  # rho cp [J m-3 K-1]
    latent_capacity: float  # rho Lv [J m-3]
    resistance: float  # of the surface to vapour [s m-1]
    ceiling: float  # highest skin temperature [K], melting point over snow
    ice: float  # 1: saturation over ice
    latent_fixed: float
    virtual_air: float  # virtual temperature of the air
    wind: float
    depth: float


class Skin(NamedTuple):
    """Skin temperature at one aerodynamic resistance, and how the virtual difference answers."""

    temperature: float
    step: float  # size of the last Newton step [K]
    virtual_difference: float  # skin-side minus air virtual temperature [K]
    slope: float  # d(virtual difference)/d ln(resistance)


class Geometry(NamedTuple):
    """Heights above displacement and roughness lengths [m], and the logarithms of their ratios."""

    wind_height: float
    heat_height: float
    roughness_momentum: float
    roughness_heat: float
    log_momentum: float
    log_heat: float


class Transfer(NamedTuple):
    """Solution: skin temperature [K], resistance [s m-1], friction velocity [m s-1], 1/L [m-1], rounds used."""

    skin: float
    resistance: float
    friction: float
    inverse_obukhov: float
    rounds: float


@kernel
def skin_humidity(balance: Balance, temperature: float) -> tuple[float, float]:
    """Saturation humidity at the skin [kg/kg] and its slope [K-1] (Clausius-Clapeyron for the slope)."""
    if balance.ice > 0.0 and temperature < 273.15:
        vapour = saturation_vapour_pressure_ice(temperature)
        heat = 2.834e6  # sublimation, J kg-1
    else:
        vapour = saturation_vapour_pressure(temperature)
        heat = 2.5e6
    rest = balance.pressure - (1.0 - EPSILON) * vapour
    saturated = EPSILON * vapour / rest
    return saturated, saturated * balance.pressure / rest * heat / (R_VAPOUR * temperature * temperature)


@kernel
def skin_at(balance: Balance, resistance: float, guess: float, tolerance: float, rounds: int) -> Skin:
    """Skin temperature by Newton's rule at a given aerodynamic ``resistance`` [s m-1]."""
    temperature = guess
    step = 0.0
    saturated = 0.0
    slope = 0.0
    heat = balance.heat_capacity / resistance
    total = resistance
    falling = 1.0
    for _ in range(rounds):
        saturated, slope = skin_humidity(balance, temperature)
        excess = saturated - balance.humidity
        total = resistance + balance.resistance if excess > 0.0 else resistance  # dew meets no stomata
        vapour = balance.latent_capacity / total
        warm = temperature - balance.air_temperature
        emitted = balance.emission * temperature * temperature * temperature
        left = (
            balance.absorbed
            - emitted * temperature
            - heat * warm
            - vapour * excess
            - balance.soil_conductance * (temperature - balance.soil_temperature)
        )
        falling = 4.0 * emitted + heat + vapour * slope + balance.soil_conductance
        step = left / falling
        if step > 40.0:
            step = 40.0
        elif step < -40.0:
            step = -40.0
        if temperature + step > balance.ceiling:
            step = balance.ceiling - temperature
        temperature += step
        if abs(step) < tolerance:
            break
    excess = saturated - balance.humidity + slope * step
    share = resistance / total
    moist = VIRTUAL * balance.air_temperature
    dry = 1.0 + VIRTUAL * balance.humidity
    warm = temperature - balance.air_temperature
    difference = dry * warm + moist * excess * share
    # a larger resistance holds back heat and (partly) vapour: the skin answers by warming
    gain = 0.0
    if temperature < balance.ceiling:
        gain = (heat * warm + balance.latent_capacity / total * excess * share) / falling
    answer = (dry + moist * slope * share) * gain + moist * excess * share * (1.0 - share)
    return Skin(temperature, abs(step), difference, answer)


@kernel
def solve_unstable(
    balance: Balance, geometry: Geometry, start: Skin, ln_resistance: float, ln_friction: float
) -> Transfer:
    """Newton's rule on ln(resistance) and ln(friction velocity) in convective air."""
    p = ln_resistance
    v = ln_friction
    temperature = start.temperature
    gravity = GRAVITY / balance.virtual_air
    wind2 = balance.wind * balance.wind
    x = 0.0
    count = 0.0
    for _ in range(ROUNDS):
        count += 1.0
        resistance = math.exp(p)
        friction = math.exp(v)
        skin = skin_at(balance, resistance, temperature, 1e-3, 2)
        temperature = skin.temperature
        difference = skin.virtual_difference
        slope = skin.slope
        if difference < 1e-9:  # a step into stable air: come back towards neutral
            difference = 1e-9
            slope = 0.0
        buoyancy = gravity * difference / resistance
        buoyancy_p = gravity * slope / resistance - buoyancy
        cube = KARMAN / (friction * friction * friction)
        x = -buoyancy * cube
        x_p = -buoyancy_p * cube
        gust = GUSTINESS * math.exp(math.log(buoyancy * balance.depth) / 3.0)
        speed2 = wind2 + gust * gust
        speed_p = gust * gust / speed2 * buoyancy_p / (3.0 * buoyancy)
        top_m = unstable(geometry.wind_height * x)
        low_m = unstable(geometry.roughness_momentum * x)
        top_h = unstable(geometry.heat_height * x)
        low_h = unstable(geometry.roughness_heat * x)
        fm = geometry.log_momentum - top_m.psi_momentum + low_m.psi_momentum
        fh = geometry.log_heat - top_h.psi_heat + low_h.psi_heat
        gm = (top_m.phi_momentum - low_m.phi_momentum) / (x * fm)  # d ln fm / dx
        gh = (top_h.phi_heat - low_h.phi_heat) / (x * fh)
        first = v + math.log(fm / KARMAN) - 0.5 * math.log(speed2)
        second = v + p + math.log(KARMAN / fh)
        a11 = 1.0 - 3.0 * x * gm
        a12 = gm * x_p - speed_p
        a21 = 1.0 + 3.0 * x * gh
        a22 = 1.0 - gh * x_p
        determinant = a11 * a22 - a12 * a21
        if abs(determinant) < 1e-6:
            determinant = 1e-6
        dv = (a12 * second - a22 * first) / determinant
        dp = (a21 * first - a11 * second) / determinant
        dv = min(1.0, max(-1.0, dv))
        dp = min(1.0, max(-1.0, dp))
        v += dv
        p += dp
        x += x_p * dp - 3.0 * x * dv
        if abs(dv) + abs(dp) < TOLERANCE and skin.step < 1e-3:
            break
    return Transfer(temperature, math.exp(p), math.exp(v), x, count)


@kernel
def solve_stable(
    balance: Balance, geometry: Geometry, start: Skin, guess: float, neutral_resistance: float
) -> Transfer:
    """Find 1/L in stable air: a bracketed Newton's rule, from the neutral side where two states are possible.

    Weak exchange cools the skin, which weakens the exchange: over rough ground with a poorly conducting skin two states
    may exist. The better coupled one is taken, whatever the guess. Beyond ``ZETA_MAX`` the stability is held, so that the
    skin never decouples without bound.
    """
    highest = ZETA_MAX / max(geometry.wind_height, geometry.heat_height)
    buoyancy = GRAVITY / (balance.virtual_air * balance.wind * balance.wind)
    held = 4.0 * balance.emission * start.temperature**3 + balance.soil_conductance
    # the heat flux falls with the temperature difference by at most a third of its neutral slope (phi = 1 + 5 zeta)
    single = balance.heat_capacity / neutral_resistance < 3.0 * held
    x = min(guess, highest) if single and guess > 0.0 else 0.0
    low = 0.0
    high = highest
    temperature = start.temperature
    friction = 0.0
    resistance = neutral_resistance
    capped = False
    count = 0.0
    for _ in range(ROUNDS):
        count += 1.0
        top_m = stable(geometry.wind_height * x)
        low_m = stable(geometry.roughness_momentum * x)
        top_h = stable(geometry.heat_height * x)
        low_h = stable(geometry.roughness_heat * x)
        fm = geometry.log_momentum - top_m.psi_momentum + low_m.psi_momentum
        fh = geometry.log_heat - top_h.psi_heat + low_h.psi_heat
        small = max(x, 1e-12)
        gm = (top_m.phi_momentum - low_m.phi_momentum) / (small * fm)
        gh = (top_h.phi_heat - low_h.phi_heat) / (small * fh)
        if x < 1e-9:  # the limit of (phi - 1)/x, 1 + b (1 + c) times the height
            gm = 5.0 * (geometry.wind_height - geometry.roughness_momentum) / fm
            gh = 5.0 * (geometry.heat_height - geometry.roughness_heat) / fh
        friction = KARMAN * balance.wind / fm
        resistance = fh / (KARMAN * friction)
        skin = skin_at(balance, resistance, temperature, 1e-6, 6)
        temperature = skin.temperature
        ratio = fh / (fm * fm)
        left = x * ratio + buoyancy * skin.virtual_difference
        if left < 0.0:
            low = x
            if x >= highest:
                break
        else:
            high = x
        slope = ratio * (1.0 + x * (gh - 2.0 * gm)) + buoyancy * skin.slope * (gm + gh)
        step = -left / slope if slope > 0.0 else 0.5 * (high - low)
        new = x + step
        if new > high and high == highest and not capped:
            capped = True  # first see whether the answer lies below the bound at all
            new = highest
        elif new < low or new > high:
            new = 0.5 * (low + high)
        step = new - x
        x = new
        friction *= 1.0 - gm * step
        resistance *= 1.0 + (gm + gh) * step
        if abs(step) <= TOLERANCE * (x + 1e-6 * highest):
            break
    return Transfer(temperature, resistance, friction, x, count)
